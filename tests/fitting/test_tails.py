"""Fits of one tail: the whole is the likelihood, a part is explicit censoring of the rest."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting import fit_family
from calibrate.records.observations import Observations

X = distribution("weibull", scale=40.0, shape=5.0).sample(np.random.default_rng(4), 40)
INF = np.inf
FAMILIES = ["weibull", "lognormal", "normal", "gumbel_min", "gamma"]


def tail(values, family, side, fraction, **more):
    return fit_family(values, family, method=f"{side}_tail", options={"fraction": fraction}, **more)


def explicit(values, side, count):
    """Return the sample with all but ``count`` values known only as beyond the last of these."""
    cut = np.sort(values)[count - 1 if side == "lower" else -count]
    if side == "lower":
        return Observations(np.minimum(values, cut), np.where(values > cut, INF, values))
    return Observations(np.where(values < cut, -INF, values), np.maximum(values, cut))


def assert_same(found, expected, rel):
    assert found.parameters == pytest.approx(expected.parameters, rel=rel)
    assert found.log_likelihood == pytest.approx(expected.log_likelihood, rel=rel)
    np.testing.assert_allclose(found.covariance, expected.covariance, rtol=100 * rel, atol=1e-9)


@pytest.mark.parametrize("side", ["lower", "upper"])
@pytest.mark.parametrize("family", FAMILIES)
def test_the_whole_is_the_likelihood(family, side):
    assert_same(tail(X, family, side, 1.0), fit_family(X, family), 1e-8)


@pytest.mark.parametrize(("fraction", "count"), [(0.25, 10), (0.26, 11), (0.5, 20)])
@pytest.mark.parametrize("side", ["lower", "upper"])
@pytest.mark.parametrize("family", FAMILIES)
def test_a_part_is_explicit_censoring(family, side, fraction, count):
    found = tail(X, family, side, fraction)
    assert_same(found, fit_family(explicit(X, side, count), family), 1e-8)
    word = {"lower": "smallest", "upper": "largest"}[side]
    messages = {d.code: d.message for d in found.doubts}
    assert f"Only the {count} {word} of 40 values" in messages["tail-only"]


@pytest.mark.parametrize(
    ("fraction", "n", "count"), [(0.07, 100, 7), (0.1, 30, 3), (0.001, 50, 3), (1 / 3, 30, 10)]
)
def test_size_of_the_tail(fraction, n, count):
    """Rounded up, but never so few that nothing is left beside the parameters."""
    values = np.arange(1.0, n + 1.0)
    found = tail(values, "weibull", "lower", fraction)
    assert f"Only the {count} smallest of {n} values" in "".join(d.message for d in found.doubts)


def test_specimens_that_did_not_fail_stay_bounds():
    seen = Observations(np.minimum(X, 35.0), np.where(X > 35.0, INF, X))
    found = tail(seen, "weibull", "lower", 0.25)
    assert_same(found, fit_family(explicit(X, "lower", 10), "weibull"), 1e-8)


def test_values_equal_to_the_last_of_the_tail_belong_to_it():
    values = np.array([1.0, 2.0, 2.5, 3.0, 3.0, 3.0, 7.0, 9.0, 12.0, 15.0])
    expected = Observations(np.minimum(values, 3.0), np.where(values > 3.0, INF, values))
    assert_same(tail(values, "weibull", "lower", 0.4), fit_family(expected, "weibull"), 1e-8)


def test_the_other_tail_has_no_say():
    spoiled = X.copy()
    spoiled[np.argsort(X)[-8:]] *= 3.0
    assert tail(spoiled, "weibull", "lower", 0.5).parameters == pytest.approx(
        tail(X, "weibull", "lower", 0.5).parameters, rel=1e-6
    )


@pytest.mark.parametrize("fraction", [0.0, -0.2, 1.1, np.nan])
def test_a_fraction_is_a_share(fraction):
    with pytest.raises(InputError, match="The fraction of the tail must lie above 0 and not above 1"):
        tail(X, "weibull", "lower", fraction)


def test_a_family_of_extremes_has_no_tail():
    assert "determined by its largest and smallest" in tail(X, "uniform", "upper", 0.5).reason
