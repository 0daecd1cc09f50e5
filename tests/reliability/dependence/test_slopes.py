"""Derivatives of the correlation in standard normal space: closed forms, differences of the solved coefficient."""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution, maximum_of, minimum_of, mixture
from calibrate.reliability.dependence import Margin, equivalent_correlation, equivalent_slopes

GUMBEL = distribution("gumbel", mean=1.0, cov=0.3)
RHO = 0.4


def slopes(first, second, rho=RHO, n=1, **kind):
    r = equivalent_correlation(first, second, rho, **kind).coefficient
    return equivalent_slopes(Margin(first, n), Margin(second, n), r, **kind)


# Closed forms ------------------------------


@pytest.mark.parametrize("share", [-0.8, -0.1, 0.3, 0.95])
def test_two_lognormal_variables(share):
    """rho0 = ln(1 + rho v w)/(s t), v = sqrt(exp(s^2) - 1)."""
    s, t = np.array([0.2, 0.5]), np.array([0.6, 0.3])
    v, w = np.sqrt(np.expm1(s * s)), np.sqrt(np.expm1(t * t))
    first, second = (distribution("lognormal", median=2.0, log_sd=a) for a in (s, t))
    rho = np.expm1(share * s * t) / (v * w)
    found = equivalent_slopes(Margin(first, 2), Margin(second, 2), share)
    inner = 1.0 + rho * v * w
    np.testing.assert_allclose(found.by_coefficient, v * w / (inner * s * t), rtol=1e-9)
    v_s, w_t = s * np.exp(s * s) / v, t * np.exp(t * t) / w
    assert set(found.by_first) == set(found.by_second) == {"log_sd"}
    by_s, by_t = rho * w * v_s / (inner * s * t) - share / s, rho * v * w_t / (inner * s * t) - share / t
    # Shapes are shared after rounding to 40 bits.
    np.testing.assert_allclose(found.by_first["log_sd"], by_s, rtol=1e-8, atol=1e-10)
    np.testing.assert_allclose(found.by_second["log_sd"], by_t, rtol=1e-8, atol=1e-10)


def test_lognormal_with_normal():
    """rho0 = rho v/s."""
    s = 0.7
    v = math.sqrt(math.expm1(s * s))
    normal = distribution("normal", mean=1.0, sd=0.2)
    found = slopes(normal, distribution("lognormal", median=1.0, log_sd=s))
    assert found.by_coefficient[0] == pytest.approx(v / s, rel=1e-10)
    assert found.by_first == {}
    by_s = RHO * (s * math.exp(s * s) / v / s - v / s**2)
    assert found.by_second["log_sd"][0] == pytest.approx(by_s, rel=1e-9)


def test_ranks():
    found = slopes(GUMBEL, distribution("weibull", mean=1.0, cov=0.3), kind="rank")
    assert found.by_coefficient[0] == pytest.approx(math.pi / 3.0 * math.cos(math.pi * RHO / 6.0), rel=1e-14)
    assert found.by_first == found.by_second == {}


def test_two_normal_variables():
    normal = distribution("normal", mean=1.0, sd=0.2)
    found = slopes(normal, normal)
    assert (found.by_coefficient[0], found.by_first, found.by_second) == (1.0, {}, {})


# Differences ------------------------------

FAMILIES = {
    "lognormal": {"median": 3.0, "log_sd": 0.7},
    "weibull": {"scale": 4.0, "shape": 2.5},
    "gamma": {"shape": 1.8, "scale": 3.0},
    "frechet": {"scale": 2.0, "shape": 3.2},
    "gev": {"location": 1.0, "scale": 0.2, "shape": -0.3},
    "beta": {"shape_1": 0.7, "shape_2": 1.6, "lower": -1.0, "upper": 3.0},
    "truncated_normal": {"location": 5.0, "scale": 3.0, "lower": 4.0, "upper": 12.0},
    "student_t": {"location": 1.0, "scale": 2.0, "freedom": 5.0},
    "weibull3": {"threshold": 1.0, "scale": 2.0, "shape": 1.5},
    "uniform": {"lower": 1.0, "upper": 3.0},
}
MOVING = {"truncated_normal": {"location", "scale", "lower", "upper"}, "beta": {"shape_1", "shape_2"}}


@pytest.mark.parametrize("family", FAMILIES)
def test_parameters_by_differences(family):
    own = FAMILIES[family]
    found = slopes(distribution(family, **own), GUMBEL)
    assert set(found.by_first) == MOVING.get(family, set(own) & {"log_sd", "shape", "freedom"})
    for name, value in own.items():
        moved = np.array([value + 1e-4, value - 1e-4])
        r = equivalent_correlation(distribution(family, **{**own, name: moved}), GUMBEL, RHO).coefficient
        # The rest of the differences, of third order, and what rounding of shapes to 40 bits leaves.
        assert found.by_first.get(name, [0.0])[0] == pytest.approx((r[0] - r[1]) / 2e-4, abs=2e-7)
    r = [
        equivalent_correlation(distribution(family, **own), GUMBEL, RHO + d).coefficient
        for d in (1e-4, -1e-4)
    ]
    assert found.by_coefficient[0] == pytest.approx((r[0] - r[1]) / 2e-4, rel=1e-7)


@pytest.mark.parametrize(
    ("repeated", "family", "own", "names"),
    [
        (maximum_of, "normal", {"location": 1.0, "scale": 0.3}, {"ratio"}),
        (minimum_of, "gamma", {"shape": 3.0, "scale": 2.0}, {"shape", "ratio"}),
        (maximum_of, "gev", {"location": 1.0, "scale": 0.2, "shape": 0.1}, {"shape"}),
        (minimum_of, "weibull", {"scale": 1.0, "shape": 3.0}, {"shape"}),
        (maximum_of, "truncated_normal", {"location": 5.0, "scale": 3.0, "lower": 4.0, "upper": 12.0},
         {"location", "scale", "lower", "upper", "ratio"}),
    ],
)  # fmt: skip
def test_extremes_by_differences(repeated, family, own, names):
    ratio = 6.0

    def r(**changed):
        base = distribution(family, **{**own, **{k: v for k, v in changed.items() if k in own}})
        return equivalent_correlation(repeated(base, changed.get("ratio", ratio)), GUMBEL, RHO).coefficient

    found = slopes(repeated(distribution(family, **own), ratio), GUMBEL)
    assert set(found.by_first) == names
    for name, value in {**own, "ratio": ratio}.items():
        expected = (r(**{name: value + 1e-4}) - r(**{name: value - 1e-4})) / 2e-4
        assert found.by_first.get(name, [0.0])[0] == pytest.approx(float(expected), abs=2e-7)


def test_a_partner_with_a_gap():
    """A coin, on panels and with a long series; its own remainder counts in that of the derivative."""
    lower = np.array([0.0, 1.0])
    coin = mixture(distribution("uniform", lower=lower, upper=lower + 1e-8), [0.5, 0.5])
    found = slopes(coin, distribution("weibull", scale=1.0, shape=2.0))
    assert found.by_first == {}
    r = [
        equivalent_correlation(coin, distribution("weibull", scale=1.0, shape=k), RHO).coefficient
        for k in (2.0 + 1e-4, 2.0 - 1e-4)
    ]
    assert found.by_second["shape"][0] == pytest.approx((r[0] - r[1]) / 2e-4, abs=1e-6)


def test_a_tail_with_hardly_a_variance():
    """Both on panels; the coefficient itself is known to 1e-7 there."""
    own = {"scale": 2.0, "shape": 2.15}
    heavy = distribution("frechet", scale=3.0, shape=2.3)
    found = slopes(distribution("frechet", **own), heavy, 0.3)
    r = [
        equivalent_correlation(distribution("frechet", scale=2.0, shape=k), heavy, 0.3).coefficient
        for k in (own["shape"] + 1e-3, own["shape"] - 1e-3)
    ]
    assert found.by_first["shape"][0] == pytest.approx((r[0] - r[1]) / 2e-3, rel=1e-3)


# Batches ------------------------------


def test_units_do_not_matter_and_a_situation_is_the_same_in_any_batch():
    rng = np.random.default_rng(2)
    n = 12
    scale = rng.uniform(1.0, 9.0, n)
    first = distribution(
        "truncated_normal", location=5.0 * scale, scale=scale, lower=4.0 * scale, upper=9.0 * scale
    )
    second = distribution("weibull", scale=1.0, shape=rng.choice([2.0, 5.0, 11.0], n))
    r = equivalent_correlation(first, second, 0.4).coefficient
    whole = equivalent_slopes(Margin(first, n), Margin(second, n), r)
    assert np.ptp(whole.by_first["location"][second.values[1] == 2.0] * scale[second.values[1] == 2.0]) < 1e-9
    for i in (0, 5, 11):
        one = equivalent_slopes(Margin(first.take([i]), 1), Margin(second.take([i]), 1), r[[i]])
        assert one.by_coefficient[0] == whole.by_coefficient[i]
        for name in ("location", "scale", "lower", "upper"):
            assert one.by_first[name][0] == whole.by_first[name][i]
        assert one.by_second["shape"][0] == whole.by_second["shape"][i]


def test_no_standard_deviation_no_slope():
    heavy = distribution("frechet", scale=1.0, shape=np.array([1.5, 4.0]))
    found = equivalent_slopes(Margin(heavy, 2), Margin(GUMBEL, 2), 0.3)
    for slope in (found.by_coefficient, found.by_first["shape"]):
        np.testing.assert_array_equal(np.isnan(slope), [True, False])
