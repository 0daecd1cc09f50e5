"""Competing failure modes."""

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.records.observations import Observations
from calibrate.records.screening import failure_modes, kaplan_meier
from calibrate.records.screening.modes import NOT_STATED

INF = np.inf


def test_other_modes_become_survivors():
    sample = Observations.of([1.0, 2.0, 3.0, 4.0])
    plate, bolt = failure_modes(sample, ["bolt", "plate", "plate", " plate "])
    assert (plate.name, plate.specimens, bolt.name, bolt.specimens) == ("plate", (1, 2, 3), "bolt", (0,))
    np.testing.assert_array_equal(bolt.observations.lower, sample.lower)
    np.testing.assert_array_equal(bolt.observations.upper, [1.0, INF, INF, INF])
    np.testing.assert_array_equal(plate.observations.upper, [INF, 2.0, 3.0, 4.0])
    # By hand: plates fail at 1/4 each; their own strength is survived with 2/3, 1/3, 0.
    np.testing.assert_allclose(plate.incidence, [0.25, 0.5, 0.75], atol=1e-15)
    np.testing.assert_allclose(plate.survival.survival, [2 / 3, 1 / 3, 0.0], atol=1e-15)
    np.testing.assert_allclose(bolt.incidence, [0.25], atol=1e-15)


def test_bounds_of_every_kind():
    lower = np.array([1.0, -INF, 2.0, 5.0])
    upper = np.array([1.0, 1.5, 3.0, INF])
    sample = Observations(lower, upper, above=0.0)
    by_name = {m.name: m for m in failure_modes(sample, ["a", "b", "b", "a"])}
    a, b = by_name["a"], by_name["b"]
    assert (a.specimens, a.left_out) == ((0,), (1,))  # the survivor belongs to no mode
    np.testing.assert_array_equal(a.observations.lower, [1.0, 2.0, 5.0])
    np.testing.assert_array_equal(a.observations.upper, [1.0, INF, INF])
    assert (b.specimens, b.left_out) == ((1, 2), ())
    np.testing.assert_array_equal(b.observations.upper, [INF, 1.5, 3.0, INF])
    assert a.observations.above == b.observations.above == 0.0


def test_failures_without_a_mode_are_one_of_their_own():
    found = failure_modes(Observations.of([1.0, 2.0, 3.0]), ["a", None, " "])
    assert [(m.name, m.specimens) for m in found] == [(NOT_STATED, (1, 2)), ("a", (0,))]


def test_length_is_checked():
    with pytest.raises(InputError, match="3 specimens but 2 failure modes"):
        failure_modes(Observations.of([1.0, 2.0, 3.0]), ["a", "b"])


@pytest.mark.parametrize("seed", range(3))
def test_incidences_and_survival_add_up_to_one(seed):
    rng = np.random.default_rng(seed)
    strengths = rng.weibull(3.0, (3, 50)).round(1) + 0.1
    x = strengths.min(axis=0)
    stop = rng.uniform(0.3, 1.5, 50).round(1)
    sample = Observations(np.minimum(x, stop), np.where(x > stop, INF, x))
    found = failure_modes(sample, [f"mode {i}" for i in strengths.argmin(axis=0)])
    total = sum(m.incidence[-1] for m in found)
    assert total + kaplan_meier(sample).survival[-1] == pytest.approx(1.0, abs=1e-12)


def test_two_weibull_modes_are_recovered():
    # Equal shapes: the share of a mode is its rate, and its own survival is its own Weibull function.
    rng = np.random.default_rng(5)
    n = 3000
    a, b = rng.weibull(2.0, n), 1.5 * rng.weibull(2.0, n)
    first, second = failure_modes(Observations.of(np.minimum(a, b)), list(np.where(a < b, "a", "b")))
    assert (first.name, second.name) == ("a", "b")
    share = 1.0 / (1.0 + 1.5**-2)
    assert first.incidence[-1] == pytest.approx(share, abs=4.0 * np.sqrt(share * (1.0 - share) / n))
    at = np.searchsorted(first.survival.values, 0.8) - 1
    true = stats.weibull_min(2.0).sf(0.8)
    assert first.survival.survival[at] == pytest.approx(true, abs=4.0 * np.sqrt(first.survival.variance[at]))
