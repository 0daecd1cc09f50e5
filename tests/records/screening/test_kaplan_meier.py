"""The product-limit estimate against a published table and scipy, and plotting positions."""

import numpy as np
import pytest
from scipy import stats

from calibrate.records.observations import Observations
from calibrate.records.screening import kaplan_meier, plotting_positions

INF = np.inf

# Remission of 21 patients in weeks, + means still in remission: Freireich et al., Blood 21 (1963) 699; survival and
# standard errors as in Kalbfleisch & Prentice (from memory, recomputed).
WEEKS = [
    "6",
    "6",
    "6",
    "6+",
    "7",
    "9+",
    "10",
    "10+",
    "11+",
    "13",
    "16",
    "17+",
    "19+",
    "20+",
    "22",
    "23",
    "25+",
    "32+",
    "32+",
    "34+",
    "35+",
]
PUBLISHED = {
    6: (0.857, 0.0764),
    7: (0.807, 0.0869),
    10: (0.753, 0.0963),
    13: (0.690, 0.1068),
    16: (0.627, 0.1141),
    22: (0.538, 0.1282),
    23: (0.448, 0.1346),
}


def right_censored(values, censored):
    x = np.asarray(values, dtype=float)
    return Observations(x, np.where(censored, INF, x))


def test_remission_of_21_patients():
    sample = right_censored([w.rstrip("+") for w in WEEKS], [w.endswith("+") for w in WEEKS])
    curve = kaplan_meier(sample)
    assert list(curve.values) == list(PUBLISHED)
    survival, error = np.array(list(PUBLISHED.values())).T
    np.testing.assert_allclose(curve.survival, survival, atol=5e-4)
    np.testing.assert_allclose(np.sqrt(curve.variance), error, atol=6e-5)
    assert list(curve.at_risk) == [21, 17, 15, 12, 11, 7, 6]
    assert list(curve.failures) == [3, 1, 1, 1, 1, 1, 1]


@pytest.mark.parametrize("seed", range(4))
def test_same_steps_and_variance_as_scipy(seed):
    rng = np.random.default_rng(seed)
    x, stop = rng.weibull(2.0, 40).round(1) + 0.1, rng.weibull(2.0, 40).round(1) + 0.1
    x[0], stop[0] = 9.0, 8.0  # the largest is a survivor: Greenwood's formula has a value everywhere
    curve = kaplan_meier(right_censored(np.minimum(x, stop), x > stop))
    survival = stats.ecdf(stats.CensoredData.right_censored(np.minimum(x, stop), x > stop)).sf
    np.testing.assert_allclose(survival.evaluate(curve.values), curve.survival, atol=1e-12)
    low = survival.confidence_interval(confidence_level=0.1, method="linear").low
    half = curve.survival - low.evaluate(curve.values)
    np.testing.assert_allclose(half, stats.norm.ppf(0.55) * np.sqrt(curve.variance), atol=1e-12)


def test_a_complete_sample_gives_the_empirical_distribution():
    x = np.array([3.0, 1.0, 2.0, 2.0])
    curve = kaplan_meier(Observations.of(x))
    np.testing.assert_allclose(curve.survival, [0.75, 0.25, 0.0], atol=1e-15)
    np.testing.assert_allclose(curve.variance, curve.survival * (1.0 - curve.survival) / 4.0, atol=1e-15)
    places = plotting_positions(Observations.of(x))
    np.testing.assert_allclose(places.probability, [0.125, 0.375, 0.625, 0.875], atol=1e-15)
    assert list(places.specimens) == [1, 2, 3, 0]
    assert list(places.values) == [1.0, 2.0, 2.0, 3.0]


def test_positions_lie_between_the_steps_and_skip_survivors():
    sample = right_censored([5.0, 4.0, 4.0, 6.0, 7.0], [False, True, False, True, False])
    places = plotting_positions(sample)
    assert list(places.specimens) == [2, 0, 4]  # at 4.0 the failure comes first
    # By hand: S = 4/5, 4/5·2/3 = 8/15, 0.
    np.testing.assert_allclose(places.probability, [0.1, 1 - (4 / 5 + 8 / 15) / 2, 1 - 8 / 30], atol=1e-15)


def test_intervals_count_in_the_middle_and_left_bounds_where_they_are():
    sample = Observations(np.array([1.0, -INF, 4.0]), np.array([3.0, 1.5, 4.0]))
    assert list(kaplan_meier(sample).values) == [1.5, 2.0, 4.0]
    assert list(plotting_positions(sample).specimens) == [1, 0, 2]


def test_survivors_alone_have_no_steps():
    sample = right_censored([1.0, 2.0], [True, True])
    assert kaplan_meier(sample).values.size == 0
    assert plotting_positions(sample).values.size == 0
