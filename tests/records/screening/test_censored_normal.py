"""Normal likelihood of censored samples against scipy's censored fit."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.observations import Observations
from calibrate.records.screening.censored_normal import censored_normal

INF = np.inf


def test_a_complete_sample_gives_its_moments():
    x = np.array([11.2, 9.4, 10.1, 13.3, 8.8])
    np.testing.assert_allclose(censored_normal(Observations.of(x)), [x.mean(), x.std()], rtol=1e-12)


@pytest.mark.parametrize(("low", "high"), [(-INF, 10.5), (9.5, INF), (9.0, 11.0), (9.9, 10.1), (-INF, 8.5)])
def test_same_maximum_as_scipy(low, high):
    x = np.random.default_rng(3).normal(10.0, 1.0, 60)
    right, left = x > high, x < low
    clipped = np.clip(x, low, high)
    sample = Observations(np.where(left, -INF, clipped), np.where(right, INF, clipped))
    data = stats.CensoredData(x[~right & ~left], left=clipped[left], right=clipped[right])
    mean, sd = censored_normal(sample)

    def height(loc, scale):
        tails = (
            stats.norm.logcdf(clipped[left], loc, scale).sum()
            + stats.norm.logsf(clipped[right], loc, scale).sum()
        )
        return stats.norm.logpdf(x[~right & ~left], loc, scale).sum() + tails

    other = stats.norm.fit(data)
    assert height(mean, sd) >= height(*other) - 1e-10
    np.testing.assert_allclose([mean, sd], other, rtol=2e-3)
    for step in ((1e-3, 0.0), (-1e-3, 0.0), (0.0, 1e-3), (0.0, -1e-3)):
        assert height(mean + step[0], sd + step[1]) < height(mean, sd)


@pytest.mark.parametrize("values", [[5.0], [5.0, 5.0, 5.0]])
def test_without_scatter_there_is_no_maximum(values):
    x = np.array([*values, 7.0, 8.0])
    upper = np.append(values, [INF, INF])
    assert censored_normal(Observations(x, upper)) is None


def test_bounds_far_from_the_failures_are_borne():
    lower = np.concatenate([[1.0, 2.0], np.full(500, 40.0)])
    mean, sd = censored_normal(Observations(lower, np.concatenate([[1.0, 2.0], np.full(500, INF)])))
    assert mean > 40.0
    assert np.isfinite(sd)


@given(st.floats(1e-3, 1e3), st.floats(-100.0, 100.0), st.integers(0, 50))
def test_scale_and_shift_move_the_estimate_along(factor, shift, seed):
    x = np.random.default_rng(seed).normal(size=25)
    right = x > 0.6
    lower = np.minimum(x, 0.6)
    a = censored_normal(Observations(lower, np.where(right, INF, lower)))
    moved = lower * factor + shift
    b = censored_normal(Observations(moved, np.where(right, INF, moved)))
    np.testing.assert_allclose(b, [a[0] * factor + shift, a[1] * factor], rtol=1e-7, atol=1e-9 * abs(shift))
