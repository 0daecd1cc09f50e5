"""The inverse problem, against closed forms."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem, beta_slope, design_points
from calibrate.reliability.inverse import inverse


def lognormal_ratio(beta, v_r, v_e):
    """Return the ratio of means at which lognormal R and E have this index, in closed form."""
    s = np.sqrt(np.log1p(v_r**2) + np.log1p(v_e**2))
    return np.exp(beta * s) * np.sqrt((1.0 + v_r**2) / (1.0 + v_e**2))


def by_form(v_r, v_e):
    """Return beta and its slope by the ratio p of means of p R - E with means of 1."""
    n = v_r.size
    laws = (distribution("lognormal", mean=1.0, cov=v_r), distribution("lognormal", mean=1.0, cov=v_e))

    def build(p):
        problem = Problem(ExpressionLimitState(parse("p * R - E"), ("R", "E"), {"p": p}), laws, n)
        found = design_points(problem)
        return found.beta, beta_slope(found, found.x[0])

    return build


def test_the_ratio_of_means_of_lognormal_variables():
    v_r, v_e = np.array([0.1, 0.05, 0.25]), np.array([0.3, 0.4, 0.2])
    target = np.array([3.8, 4.7, -1.0])
    found = inverse(by_form(v_r, v_e), target, 2.0, 0.1, 20.0)
    assert found.met.all()
    np.testing.assert_array_equal(found.status, "target met")
    np.testing.assert_allclose(found.p, lognormal_ratio(target, v_r, v_e), rtol=1e-8)
    assert found.p[0] == pytest.approx(3.12694998, abs=1e-7)
    np.testing.assert_allclose(found.beta, target, atol=1e-9)
    s = np.sqrt(np.log1p(v_r**2) + np.log1p(v_e**2))
    np.testing.assert_allclose(found.slope, 1.0 / (found.p * s), rtol=1e-7)
    # Start, two ends, and steps that square the error.
    assert found.evaluations <= 14


@given(
    st.lists(
        st.tuples(st.floats(-3.0, 3.0), st.floats(0.1, 5.0), st.floats(0.01, 0.99)), min_size=1, max_size=6
    ),
    st.booleans(),
)
def test_monotone_functions_are_inverted_whatever_the_start(cases, falling):
    root, scale, share = np.array(cases).T
    sign = -1.0 if falling else 1.0

    def build(p):
        return sign * np.sinh(scale * (p - root)), sign * scale * np.cosh(scale * (p - root))

    found = inverse(build, 0.0, -4.0 + 8.0 * share, -4.0, 4.0)
    assert found.met.all()
    np.testing.assert_allclose(found.p, root, atol=1e-9 / np.min(scale) + 1e-12)


def test_a_function_that_rises_and_falls():
    """sin has 0.5 at pi/6 + 2 k pi and 5 pi/6 + 2 k pi; from 3 down to the bound 0 lies 5 pi / 6 or pi / 6."""
    found = inverse(lambda p: (np.sin(p), np.cos(p)), 0.5, 3.0, 0.0, 10.0)
    assert np.sin(found.p[0]) == pytest.approx(0.5, abs=1e-9)
    assert found.met[0]


def test_a_target_met_between_ends_and_start_on_one_side():
    """1 - (p - 2)^2 is below 0.5 at the bounds and the start, above it between 2 - sqrt 0.5 and 2 + sqrt 0.5."""
    found = inverse(lambda p: (1.0 - (p - 2.0) ** 2, -2.0 * (p - 2.0)), 0.5, 4.5, 0.0, 5.0)
    assert abs(found.p[0] - 2.0) == pytest.approx(math.sqrt(0.5), abs=1e-9)


def test_a_target_at_an_end():
    found = inverse(lambda p: (p, np.ones_like(p)), [1.0, 3.0, 2.0], 2.0, 1.0, 3.0)
    np.testing.assert_array_equal(found.p, [1.0, 3.0, 2.0])


def test_out_of_reach_in_words():
    found = inverse(lambda p: (p, np.ones_like(p)), [2.5, 7.0], 2.0, 1.0, 3.0)
    np.testing.assert_array_equal(found.met, [True, False])
    assert found.status[1] == "out of reach between 1 and 3: beta runs from 1 to 3"
    assert np.isnan(found.p[1])
    assert np.isnan(found.beta[1])


def test_no_beta_in_words():
    found = inverse(lambda p: (np.full_like(p, np.nan), np.ones_like(p)), 2.0, 2.0, 1.0, 3.0)
    assert found.status[0] == "no beta at 2"

    # Only the first of two situations has a target where there is a beta.
    def half(p):
        return np.where(p > 2.0, np.nan, p), np.ones_like(p)

    found = inverse(half, [1.7, 2.7], 1.2, 1.0, 3.0)
    assert found.p[0] == pytest.approx(1.7, abs=1e-9)
    assert found.status[1] == "out of reach between 1 and 3: beta runs from 1 to 2, no beta at 3"


def test_a_gap_without_beta_is_stepped_over_or_told():
    """beta = p^3 - 8 without the piece around the first Newton step; then without that around the root."""

    def build(gap):
        def function(p):
            inside = (p > gap[0]) & (p < gap[1])
            return np.where(inside, np.nan, p**3 - 8.0), 3.0 * p**2

        return function

    start = 4.0
    newton = start - (start**3 - 8.0) / (3.0 * start**2)
    found = inverse(build((newton - 0.05, newton + 0.05)), 0.0, start, 0.0, 5.0)
    assert found.p[0] == pytest.approx(2.0, abs=1e-9)
    found = inverse(build((1.9, 2.1)), 0.0, start, 0.0, 5.0)
    assert not found.met[0]
    assert found.status[0].startswith("no beta at ")


def test_a_jump_over_the_target_is_told():
    found = inverse(lambda p: (np.where(p < 1.0 / 3.0, 1.0, 4.0), np.zeros_like(p)), 2.0, 0.9, 0.0, 1.0)
    assert found.status[0] == "beta jumps over the target at 0.333333"


def test_too_few_steps_are_told():
    found = inverse(lambda p: (np.exp(p), np.exp(p)), 2.0, 0.0, -1.0, 5.0, most=1)
    assert found.status[0] == "not converged between -1 and 5: too many steps"


def test_a_situation_is_the_same_alone_and_among_others():
    v_r, v_e = np.array([0.1, 0.2, 0.15, 0.05]), np.array([0.3, 0.1, 0.25, 0.5])
    target = np.array([3.8, 2.0, 40.0, 4.2])
    whole = inverse(by_form(v_r, v_e), target, 2.0, 0.5, 12.0)
    for j in range(4):
        alone = inverse(by_form(v_r[j : j + 1], v_e[j : j + 1]), target[j : j + 1], 2.0, 0.5, 12.0)
        for name in ("p", "beta", "slope", "status"):
            np.testing.assert_array_equal(getattr(alone, name), getattr(whole, name)[j : j + 1])


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"lower": 3.0}, "lower must be less than upper"),
        ({"start": 5.0}, "must lie between"),
        ({"target_beta": math.nan}, "must be finite"),
        ({"start": [2.0, 2.0], "lower": [1.0, 1.0, 1.0]}, "one length"),
        ({"tolerance": 0.0}, "tolerance"),
    ],
)
def test_what_does_not_fit_is_refused(change, message):
    given_ = {"target_beta": 2.0, "start": 2.0, "lower": 1.0, "upper": 3.0} | change
    with pytest.raises(InputError, match=message):
        inverse(lambda p: (p, np.ones_like(p)), **given_)


def test_a_function_that_returns_something_else_is_refused():
    with pytest.raises(InputError, match="shape"):
        inverse(lambda p: (p[:1], p), [2.0, 2.0], 2.0, 1.0, 3.0)
