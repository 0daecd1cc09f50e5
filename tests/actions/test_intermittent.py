"""Actions that are absent at times: against the mixed distribution function, differences, sums and FORM."""

import numpy as np
import pytest

from calibrate.actions.intermittent import Intermittent, intermittent
from calibrate.distributions import distribution, maximum_of
from calibrate.errors import InputError
from calibrate.reliability import CallableLimitState, form

# base, presence, repetitions
CASES = {
    "gamma": (("gamma", {"mean": 0.6, "cov": 0.9}), 0.2, 5.0),
    "weibull": (("weibull", {"mean": 0.5, "cov": 0.4}), 0.01, 50.0),
    "lognormal": (("lognormal", {"mean": 2.0, "cov": 0.5}), 0.5, 1.0),
    "gumbel, partly negative": (("gumbel", {"mean": 1.0, "cov": 0.9}), 0.7, 3.0),
    "many": (("exponential", {"mean": 1.0}), 1e-3, 1e5),
}


@pytest.fixture(params=CASES)
def case(request):
    """The base, its presence and repetitions, and the distribution."""
    (name, arguments), p, n = CASES[request.param]
    base = distribution(name, **arguments)
    return base, p, n, intermittent(base, p, n)


def above_zero(d):
    """Return standard normal values from just above the probability of zero to far out."""
    return np.maximum(float(d.u_of_zero), -5.0) + np.array([0.1, 0.5, 1.0, 2.0, 5.0, 8.0])


def test_probabilities_are_those_of_the_formula(case):
    base, p, n, d = case
    x = np.array([1e-6, 0.3, 1.0, 2.0, 4.0])
    np.testing.assert_allclose(d.cdf(x), (1.0 - p + p * base.cdf(x)) ** n, rtol=1e-10)
    assert float(d.cdf(0.0)) == pytest.approx(float((1.0 - p + p * base.cdf(0.0)) ** n), rel=1e-10)
    assert float(d.cdf(-1e-9)) == 0.0
    assert float(d.sf(-1e-9)) == 1.0
    far = base.isf(1e-20)
    assert float(d.sf(far)) == pytest.approx(n * p * 1e-20, rel=1e-6)


def test_values_and_slopes_above_zero(case):
    d = case[3]
    u, h = above_zero(d), 1e-5
    x, slope, curvature = d.x_curvature(u)
    np.testing.assert_allclose(d.x(u), x, rtol=1e-12)
    np.testing.assert_allclose(d.u(x), u, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(slope, (d.x(u + h) - d.x(u - h)) / (2.0 * h), rtol=1e-6)
    second = (d.x_slope(u + h)[1] - d.x_slope(u - h)[1]) / (2.0 * h)
    np.testing.assert_allclose(curvature, second, rtol=1e-5, atol=1e-7 * np.max(np.abs(slope)))
    density = np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi) / slope
    np.testing.assert_allclose(d.pdf(x), density, rtol=1e-8)


def test_below_the_probability_of_zero_nothing_moves():
    d = intermittent(distribution("gamma", mean=0.6, cov=0.9), 0.2, 5.0)
    assert float(d.cdf(0.0)) == pytest.approx(0.8**5, rel=1e-12)
    u = float(d.u_of_zero) - np.array([1e-6, 0.5, 6.0])
    for values in (*d.x_curvature(u), *d.parameter_slopes(u).values()):
        np.testing.assert_array_equal(values, 0.0)
    np.testing.assert_array_equal(d.ppf([0.0, 0.1, 0.8**5 - 1e-9]), 0.0)
    assert float(d.pdf(0.0)) == np.inf
    assert tuple(map(float, d.support)) == (0.0, np.inf)


def test_slopes_by_the_parameters_of_the_action():
    mean, cov, h = 0.6, 0.9, 1e-5
    base = distribution("gumbel", mean=mean, cov=cov)
    u = above_zero(intermittent(base, 0.3, 4.0))
    own = {k: float(v) for k, v in base.parameters.items()}
    for name, slopes in intermittent(base, 0.3, 4.0).parameter_slopes(u).items():
        up, down = (
            intermittent(distribution("gumbel", **(own | {name: own[name] + s * h})), 0.3, 4.0).x(u)
            for s in (1.0, -1.0)
        )
        np.testing.assert_allclose(slopes, (up - down) / (2.0 * h), rtol=1e-6)


def test_moments_of_one_repetition_in_closed_form():
    for name, p in (("gamma", 0.2), ("weibull", 0.01), ("lognormal", 0.9)):
        base = distribution(name, mean=0.6, cov=0.9)
        d = intermittent(base, p)
        assert float(d.mean) == pytest.approx(p * 0.6, rel=1e-9)
        square = p * (float(base.sd) ** 2 + 0.36)
        assert float(d.sd) == pytest.approx(np.sqrt(square - (p * 0.6) ** 2), rel=1e-9)


def test_moments_against_seeded_draws(case):
    d = case[3]
    draws = d.sample(np.random.default_rng(5), 200_000)
    # Four standard errors; that of the sd from the fourth moment of the sample.
    assert draws.mean() == pytest.approx(float(d.mean), abs=4.0 * draws.std() / np.sqrt(draws.size))
    spread = np.std((draws - draws.mean()) ** 2) / (2.0 * draws.std() * np.sqrt(draws.size))
    assert draws.std() == pytest.approx(float(d.sd), abs=4.0 * spread)


def test_repeated_again_is_repeated_more_often():
    base = distribution("weibull", mean=0.5, cov=0.4)
    u = np.array([0.5, 1.0, 3.0, 6.0])
    once, again = intermittent(base, 0.1, 40.0), maximum_of(intermittent(base, 0.1, 8.0), 5.0)
    np.testing.assert_allclose(again.x(u), once.x(u), rtol=1e-10)


def test_always_present_is_the_plain_maximum():
    base = distribution("normal", mean=1.0, sd=2.0)
    always = intermittent(base, 1.0, 10.0)
    assert not isinstance(always, Intermittent)
    np.testing.assert_array_equal(always.x([-3.0, 0.0]), maximum_of(base, 10.0).x([-3.0, 0.0]))


def test_situations_are_columns_and_units_change():
    base = distribution("gamma", mean=[0.5, 0.6, 0.7], cov=0.8)
    d = intermittent(base, [0.1, 0.2, 1.0], 5.0)
    assert d.shape == d.mean.shape == (3,)
    alone = intermittent(distribution("gamma", mean=0.6, cov=0.8), 0.2, 5.0)
    assert float(d.take(np.array([1])).x(1.5)[0]) == float(d.x(1.5)[1]) == float(alone.x(1.5))
    assert float(d.mean[1]) == pytest.approx(float(alone.mean), rel=1e-12)
    np.testing.assert_allclose(d.scaled(1e3).x(1.5), 1e3 * d.x(1.5), rtol=1e-12)
    assert alone.take([0]) is alone
    assert repr(alone).startswith("intermittent(gamma(")


def test_form_finds_the_design_point_in_the_part_above_zero():
    """One variable, so that FORM is exact: Phi(-beta) = 1 - F(3)."""
    d = intermittent(distribution("gumbel", mean=1.0, cov=0.3), 0.3, 10.0)
    limit = CallableLimitState(lambda Q: 3.0 - Q, ("Q",), derivatives=lambda Q: {"Q": -np.ones_like(Q)})
    assert float(form(limit, [d], 1).beta[0]) == pytest.approx(float(d.u(3.0)), abs=1e-9)


@pytest.mark.parametrize(
    ("presence", "repetitions", "message"),
    [
        (0.0, 1.0, "probability of presence must be positive"),
        (1.2, 1.0, "at most 1; got 1.2"),
        (0.5, 0.0, "number of repetitions must be positive"),
    ],
)
def test_refusals(presence, repetitions, message):
    with pytest.raises(InputError, match=message):
        intermittent(distribution("gamma", mean=1.0, cov=0.3), presence, repetitions)
    with pytest.raises(InputError, match="needs scatter"):
        intermittent(distribution("constant", value=1.0), 0.5)
