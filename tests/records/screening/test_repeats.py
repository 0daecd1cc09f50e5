"""Rounding, and loads at which too many specimens stand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.observations import Observations
from calibrate.records.screening.repeats import TIE_LEVEL, repeats, resolution

INF = np.inf


@pytest.mark.parametrize(
    ("values", "step"),
    [
        ([512.3, 498.0, 530.0], 0.1),
        ([500.0, 510.0, 520.0], 10.0),
        ([1500.0, 2000.0], 500.0),
        ([0.25, 0.5], 0.05),
        ([0.2, 0.4, 1.8], 0.2),
        ([0.1 + 0.2, 1.1], 0.1),
        ([-3.0, 0.0, 6.0], 1.0),
        ([7e-7, 1.2e-6], 1e-7),
        ([3e21, 5e21], 1e21),
        ([np.pi, np.e], None),
        ([0.0, 0.0], None),
    ],
)
def test_resolution(values, step):
    assert resolution(values) == (step if step is None else pytest.approx(step, rel=1e-12))


def test_resolution_of_most_forgives_single_values():
    x = [11.0, 12.0, 13.0, 14.0, 15.0, 16.0, 17.0, 18.0, 19.0, 12.37]
    found = repeats(Observations.of(x))
    assert (found.resolution, found.resolution_of_most) == (0.01, 1.0)


@given(st.integers(-8, 8), st.sampled_from([1, 2, 5]), st.integers(0, 10_000))
def test_resolution_scales_with_powers_of_ten(k, m, seed):
    x = m * np.random.default_rng(seed).integers(100, 1000, 12)
    base = resolution(x)
    assert base >= m
    assert resolution([float(f"{v}e{k}") for v in x]) == pytest.approx(base * 10.0**k, rel=1e-12)


def test_shares():
    found = repeats(Observations.of([1.0, 1.0, 2.0, 4.0]))
    assert (found.n_distinct, found.tied_share, found.ties) == (3, 0.5, ())
    assert found.rounding_share == pytest.approx(1.0 / 12.0 / 2.0)
    assert repeats(Observations.of([2.0, 2.0])).rounding_share is None


def failures(n=30, seed=0):
    return np.random.default_rng(seed).normal(14.0, 1.5, n).round(2)


@pytest.mark.parametrize(("load", "position"), [(11.0, "inside"), (9.0, "minimum"), (15.5, "maximum")])
def test_ten_survivors_are_found(load, position):
    x = failures()
    x = np.concatenate([np.minimum(x, load) if position == "maximum" else x, [load] * 10])
    (tie,) = repeats(Observations.of(x)).ties
    assert (tie.value, tie.position) == (load, position)
    assert tie.specimens == tuple(np.flatnonzero(x == load))
    assert tie.count == len(tie.specimens) >= 10
    assert tie.p_value < 1e-6


def test_effect_on_the_mean_is_that_of_a_censored_fit():
    x = np.minimum(failures(60), 15.0)
    tied = x == 15.0
    (tie,) = repeats(Observations.of(x)).ties
    assert tie.mean_now == pytest.approx(x.mean(), rel=1e-12)
    above, below = (
        stats.norm.fit(stats.CensoredData(x[~tied], **{side: x[tied]})) for side in ("right", "left")
    )
    assert tie.mean_if_survivors == pytest.approx(above[0], rel=1e-4)
    assert tie.mean_if_below == pytest.approx(below[0], rel=1e-3)
    assert tie.mean_if_survivors > x.mean() > tie.mean_if_below


def test_known_survivors_are_not_suspected():
    x = np.concatenate([failures(), [11.0] * 10])
    upper = np.where(x == 11.0, INF, x)
    assert repeats(Observations(x, upper)).ties == ()


def test_the_positions_are_those_of_the_whole_sample():
    x = np.concatenate([[INF] * 5, failures(), [11.0] * 10])
    lower = np.where(np.isinf(x), 20.0, x)
    (tie,) = repeats(Observations(lower, x)).ties
    assert tie.specimens == tuple(range(35, 45))
    assert tie.mean_now > lower.mean()  # the five known survivors count as such


def test_digits_in_full_make_any_three_equal_values_odd():
    x = np.random.default_rng(3).normal(size=20)
    x[[2, 5, 9]] = x[2]
    (tie,) = repeats(Observations.of(x)).ties
    assert tie.specimens == (2, 5, 9)


@pytest.mark.parametrize("step", [0.002, 0.05, 0.2, 0.5])
@pytest.mark.parametrize(
    "law", [stats.norm(20), stats.weibull_min(2, 5), stats.expon(), stats.laplace(), stats.uniform()]
)
def test_rounding_alone_does_not_alarm(law, step):
    rng = np.random.default_rng(5)
    alarms = 0
    for n in (12, 40, 300):
        step_here = step * law.std()
        for x in np.round(law.rvs((30, n), random_state=rng) / step_here) * step_here:
            alarms += bool(repeats(Observations.of(x)).ties)
    # The level is an upper bound: of 90 samples more than four alarms have a chance below 0.003.
    assert TIE_LEVEL == 0.01
    assert alarms <= 4
    assert stats.binom.sf(4, 90, TIE_LEVEL) < 0.003


@given(st.integers(0, 1000), st.sampled_from([1e-3, 1000.0, 10.0]), st.randoms(use_true_random=False))
def test_scale_and_order_do_not_matter(seed, factor, random):
    x = np.concatenate([failures(20, seed), [11.0] * 8])
    order = list(range(28))
    random.shuffle(order)
    (a,) = repeats(Observations.of(x)).ties
    (b,) = repeats(Observations.of(np.round(x[order] * factor, 6))).ties
    assert sorted(order[i] for i in b.specimens) == list(a.specimens)
    assert b.p_value == pytest.approx(a.p_value, rel=1e-9)
    assert b.mean_if_survivors == pytest.approx(a.mean_if_survivors * factor, rel=1e-8)
