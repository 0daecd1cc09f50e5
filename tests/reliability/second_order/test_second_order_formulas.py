"""Asymptotic formulas from given beta and curvatures."""

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import special

from calibrate.reliability.second_order import breitung, hohenbichler_rackwitz, paraboloid, tvedt

FORMULAS = (breitung, hohenbichler_rackwitz, tvedt, paraboloid)


def probability(formula, beta, kappa):
    kappa = np.array(kappa, dtype=float).reshape(-1, 1)
    return float(special.ndtr(-formula(np.array([beta], dtype=float), kappa))[0])


# Beta and curvatures are rounded in print, hence the tolerances.
PUBLISHED = {
    # Faber, Statistics and Probability Theory (2012), rod in tension (recalled).
    "rod": (3.74483, (-0.07102, 0.02632), {breitung: 1.00513e-4, hohenbichler_rackwitz: 1.01402e-4}, 5e-5),
    # Liu and Der Kiureghian, Optimization algorithms for structural reliability (1991).
    "six lognormal": (
        2.34817, (-0.18231, 0.0, 0.00769, 0.01013, 0.01511),
        {breitung: 0.0120068, hohenbichler_rackwitz: 0.0126401, paraboloid: 0.0122213}, 2e-5,
    ),
    # Der Kiureghian, First- and second-order reliability methods (2005), short column.
    "short column": (
        2.46602, (-0.15474, -0.03990, 0.0),
        {breitung: 9.1485e-3, hohenbichler_rackwitz: 9.6154e-3, tvedt: 9.4219e-3, paraboloid: 9.3728e-3}, 2e-5,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", PUBLISHED)
def test_published_values(name):
    beta, kappa, values, tolerance = PUBLISHED[name]
    for formula, value in values.items():
        assert probability(formula, beta, kappa) == pytest.approx(value, rel=tolerance), formula.__name__


def by_mpmath(beta, kappa):
    """The three formulas with 40 digits, as they are printed."""
    with mpmath.workdps(40):
        b, k = mpmath.mpf(beta), [mpmath.mpf(v) for v in kappa]
        first, density = mpmath.ncdf(-b), mpmath.npdf(b)

        def product(distance):
            return mpmath.fprod((1 + distance * v) ** mpmath.mpf(-0.5) for v in k)

        excess = b * first - density
        two = excess * (product(b) - product(b + 1))
        three = (b + 1) * excess * (product(b) - mpmath.re(product(b + mpmath.j)))
        return (
            float(first * product(b)),
            float(first * product(density / first)),
            float(first * product(b) + two + three),
        )


@pytest.mark.parametrize("beta", [0.0, 0.7, 3.0, 8.0, 14.0])
@pytest.mark.parametrize("kappa", [(-0.06, 0.3, 1.2), (0.0,), (-0.02, -0.01, 0.0, 0.05, 2.0, 3.0)])
def test_formulas_agree_with_mpmath(beta, kappa):
    for formula, value in zip((breitung, hohenbichler_rackwitz, tvedt), by_mpmath(beta, kappa), strict=True):
        if value <= 0.0:
            # Three terms may leave less than nothing near beta = 0, which is no probability.
            assert formula is tvedt
            value = np.nan
        # The index keeps about 15 digits; the probability loses beta^2 of them.
        assert probability(formula, beta, kappa) == pytest.approx(
            value, rel=1e-12 * (1.0 + beta**2), nan_ok=True
        )


@pytest.mark.parametrize("formula", FORMULAS)
@given(beta=st.floats(0.01, 10.0), kappa=st.lists(st.floats(-0.05, 2.0), min_size=1, max_size=5))
def test_the_safe_region_is_treated_as_the_failure_region(formula, beta, kappa):
    # The complement of v > beta + q is -v > -beta - q.
    k = np.array(kappa)[:, None]
    one, other = formula(np.array([beta]), k), formula(np.array([-beta]), -k)
    np.testing.assert_array_equal(one, -other)


@pytest.mark.parametrize("formula", FORMULAS)
def test_a_plane_has_the_index_of_first_order(formula):
    beta = np.array([-9.0, -1.0, 0.0, 0.5, 3.0, 14.0])
    np.testing.assert_allclose(formula(beta, np.zeros((4, 6))), beta, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(formula(beta, np.zeros((0, 6))), beta, rtol=1e-12, atol=1e-12)


def test_what_a_formula_does_not_cover_is_nan():
    beta, kappa = np.array([3.0, 3.0, 3.0, 3.0, np.nan]), np.array([[-0.3, -0.34, -0.27, np.nan, 0.1]])
    assert np.isnan(breitung(beta, kappa)).tolist() == [False, True, False, True, True]
    # 3 + psi and 3 + 1 are beyond the limit where 3 is not yet.
    assert np.isnan(hohenbichler_rackwitz(beta, kappa)).tolist() == [False, True, False, True, True]
    assert np.isnan(tvedt(beta, kappa)).tolist() == [True, True, True, True, True]
    assert np.isnan(paraboloid(beta, kappa)).tolist() == [False, False, False, True, True]


def test_breitung_at_beta_zero_sees_no_curvature():
    assert probability(breitung, 0.0, (0.5, 2.0)) == 0.5


def test_a_result_above_one_is_no_probability():
    # 0.46 / sqrt(1 - 0.1 * 9.9) = 4.6.
    assert np.isnan(breitung(np.array([0.1]), np.array([[-9.9]])))[0]


@pytest.mark.parametrize("kappa", [(0.3, 0.1), (-0.4, 0.2), (-0.5, -0.3)])
def test_breitung_is_the_limit_for_far_design_points(kappa):
    # beta * kappa is held; the relative difference falls as 1/beta^2.
    scaled = [np.array(kappa) / beta for beta in (4.0, 8.0, 14.0)]
    off = [
        abs(probability(breitung, beta, k) / probability(paraboloid, beta, k) - 1.0) * beta**2
        for beta, k in zip((4.0, 8.0, 14.0), scaled, strict=True)
    ]
    assert max(off) < 2.0
    assert off[2] / 14.0**2 < 0.25 * off[0] / 4.0**2
