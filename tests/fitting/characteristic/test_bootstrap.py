"""Bootstrap limits against exact ones, and what they do with samples that have bounds."""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting.characteristic import characteristic_value
from calibrate.fitting.characteristic.bootstrap import bootstrap_value
from calibrate.fitting.characteristic.pivots import gumbel_rows
from calibrate.fitting.characteristic.result import Request
from calibrate.records.observations import Observations


def refit_gumbel(observations):
    location, scale = gumbel_rows(observations.values[None, :])
    return distribution("gumbel", location=location[0], scale=scale[0])


def refit_exponential(observations):
    """Total time over number of failures: the largest likelihood also of right-censored samples."""
    if observations.n_exact == 0:
        return None
    return distribution("exponential", scale=observations.values.sum() / observations.n_exact)


def right_censored(values, at):
    return Observations(np.minimum(values, at), np.where(values < at, values, np.inf))


def limited(x, seed):
    """Return the 75 % limit of the 5 % fractile of an exponential sample."""
    rng = np.random.default_rng(seed)
    return characteristic_value(x, "exponential", 0.05, 0.75, rng=rng, refit=refit_exponential)


SAMPLES = {
    "gumbel": (np.random.default_rng(1).gumbel(50.0, 5.0, 12), refit_gumbel),
    "exponential": (np.random.default_rng(2).exponential(50.0, 12), refit_exponential),
}


@pytest.mark.parametrize("family", SAMPLES)
@pytest.mark.parametrize(("fractile", "confidence"), [(0.05, 0.75), (0.05, 0.95), (0.95, 0.75), (0.5, 0.75)])
def test_exact_for_families_with_a_pivot(family, fractile, confidence):
    x, refit = SAMPLES[family]
    request = Request(fractile, confidence, "tolerance", family)
    found = bootstrap_value(Observations.of(x), request, refit, np.random.default_rng(3))
    exact = characteristic_value(x, family, fractile, confidence, rng=np.random.default_rng(4))
    assert found.value == pytest.approx(exact.value, abs=4.0 * found.monte_carlo_error)
    assert found.monte_carlo_error < 0.06 * abs(exact.value)
    assert found.point_estimate == pytest.approx(exact.point_estimate, rel=1e-9)
    low, high = found.interval
    assert low < found.point_estimate < high


def test_same_generator_same_limit():
    x = right_censored(SAMPLES["exponential"][0], 60.0)
    first, again = (limited(x, seed=5) for _ in range(2))
    assert first.value == again.value


def test_censored_sample():
    x = right_censored(SAMPLES["exponential"][0], 60.0)
    found = limited(x, seed=5)
    scale = x.values.sum() / x.n_exact
    assert found.point_estimate == pytest.approx(-math.log(0.95) * scale)
    assert found.mean == pytest.approx(scale)  # not the mean of the bounds
    assert found.value < found.point_estimate
    assert found.statement == "5 % fractile at 75 % confidence, exponential, by bootstrap, n = 12"
    assert "drawn from the specimens, with replacement" in found.notes[0]
    point = characteristic_value(x, "exponential", 0.05, refit=refit_exponential)
    assert (point.value, point.route) == (found.point_estimate, "point")


def test_coverage_of_censored_samples():
    rng = np.random.default_rng(6)
    samples, true = 150, -math.log(0.95)
    request = Request(0.05, 0.75, "tolerance", "exponential")
    covered = 0
    for _ in range(samples):
        x = right_censored(rng.standard_exponential(20), 1.2)
        covered += bootstrap_value(x, request, refit_exponential, rng, 79).value <= true
    # A bootstrap limit of a censored sample is not exact; the band is three Monte Carlo standard errors.
    assert covered / samples == pytest.approx(0.75, abs=3.0 * math.sqrt(0.75 * 0.25 / samples))


def test_doubts():
    x = right_censored(np.array([3.0, 1.0, 2.0, 9.0, 9.0, 9.0]), 5.0)
    found = limited(x, seed=7)
    codes = {d.code for d in found.doubts}
    assert {"bootstrap-few-values", "refits-failed", "monte-carlo-error"} <= codes


def test_too_many_failures():
    x = right_censored(np.array([1.0, 9.0, 9.0, 9.0]), 5.0)
    with pytest.raises(InputError, match=r"cannot be fitted to 3\d\d of 999 samples drawn from this one"):
        limited(x, seed=7)


def test_sample_that_cannot_be_fitted():
    x = right_censored(np.array([8.0, 9.0, 9.0, 9.0]), 5.0)
    with pytest.raises(InputError, match="'exponential' cannot be fitted to this sample"):
        characteristic_value(x, "exponential", 0.05, refit=refit_exponential)


def test_refusal_of_a_fit_counts_as_failure():
    def refuses(observations):
        raise InputError("No.")

    with pytest.raises(InputError, match="'gamma' cannot be fitted to this sample"):
        characteristic_value([1.0, 2.0, 3.0], "gamma", 0.05, refit=refuses)
