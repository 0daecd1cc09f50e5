"""Trend in the order of testing against counting by hand."""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.screening.trend import runs_test, trend


def score(x, t):
    """Kendall's S by counting pairs."""
    pairs = itertools.combinations(range(len(x)), 2)
    return sum(np.sign(x[j] - x[i]) * np.sign(t[j] - t[i]) for i, j in pairs)


def test_exact_chance_by_all_permutations():
    x = np.array([3.1, 2.4, 5.0, 4.2, 6.6, 6.1])
    t = np.arange(6)
    found = trend(x, t)
    every = np.array([score(p, t) for p in itertools.permutations(x)])
    seen = score(x, t)
    assert found.tau == pytest.approx(seen / 15.0, abs=1e-15)
    assert found.p_value == pytest.approx(np.mean(np.abs(every) >= abs(seen)), rel=1e-9)


def test_chance_with_ties_is_mann_kendall():
    rng = np.random.default_rng(4)
    x, t = rng.integers(0, 8, 50) * 1.0, np.sort(rng.integers(0, 20, 50))
    s = score(x, t)
    found = trend(x, t)

    def parts(v):
        c = np.unique(v, return_counts=True)[1].astype(float)
        return (
            np.sum(c * (c - 1)),
            np.sum(c * (c - 1) * (c - 2)),
            np.sum(c * (c - 1) * (2 * c + 5)),
        )

    n = 50.0
    (x2, x3, x5), (t2, t3, t5) = parts(x), parts(t)
    # Kendall (1970), chapter 4: variance of S with ties in both.
    variance = (n * (n - 1) * (2 * n + 5) - x5 - t5) / 18.0
    variance += x3 * t3 / (9 * n * (n - 1) * (n - 2)) + x2 * t2 / (2 * n * (n - 1))
    assert found.p_value == pytest.approx(2.0 * stats.norm.sf(abs(s) / math.sqrt(variance)), rel=1e-9)


@pytest.mark.parametrize("n", [5, 30])
def test_slope_is_the_median_of_all_slopes(n):
    rng = np.random.default_rng(n)
    t = np.sort(rng.uniform(0.0, 9.0, n))
    x = 0.5 * t + rng.normal(size=n)
    slopes = [(x[j] - x[i]) / (t[j] - t[i]) for i, j in itertools.combinations(range(n), 2)]
    found = trend(x, t)
    assert found.slope == pytest.approx(np.median(slopes), rel=1e-12)
    assert found.slope_low < found.slope < found.slope_high


@pytest.mark.parametrize("n", [12, 60, 1001])
def test_level_and_coverage_without_trend(n):
    rng = np.random.default_rng(n)
    repeats = 400 if n < 1000 else 150
    found = [trend(rng.normal(size=n), np.arange(n)) for _ in range(repeats)]
    margin = 3.0 * math.sqrt(0.05 * 0.95 / repeats)
    alarms = np.mean([f.p_value < 0.05 for f in found])
    outside = np.mean([not f.slope_low <= 0.0 <= f.slope_high for f in found])
    runs = np.mean([f.runs_p_value < 0.05 for f in found])
    assert alarms == pytest.approx(0.05, abs=margin + 0.015)  # few possible values of S at n = 12
    assert outside == pytest.approx(0.05, abs=margin + 0.015)
    assert runs <= 0.05 + margin
    assert max(alarms, outside, runs) > 0.01


def test_a_large_sample_uses_half_of_the_pairs_and_agrees():
    n = 5000
    x = 0.001 * np.arange(n) + np.random.default_rng(1).normal(size=n)
    found = trend(x, np.arange(n))
    assert found.slope == pytest.approx(0.001, abs=5e-5)
    assert found.slope_low < 0.001 < found.slope_high
    assert found.slope_high - found.slope_low < 2e-4
    assert found.p_value < 1e-100
    half = n // 2
    assert found.slope == pytest.approx(np.median((x[half:] - x[:half]) / half), rel=1e-12)


def test_any_form_of_order():
    x = [1.0, 2.0, 4.0, 3.0, 6.0]
    dates = ["2021-03-01", "2021-03-02", "2021-03-09", "2021-04-01", "2022-01-01"]
    by_rank = trend(x, [0, 1, 2, 3, 4])
    assert trend(x, dates) == by_rank
    assert trend(x, np.array(dates, dtype="datetime64[D]")) == by_rank
    assert trend(x[::-1], dates[::-1]) == by_rank


@pytest.mark.parametrize(
    ("x", "t"), [([1.0, 2.0, 3.0], [1, 2, 3]), ([1.0] * 6, range(6)), (range(6), [2] * 6)]
)
def test_nothing_to_test(x, t):
    assert trend(x, list(t)) is None


@pytest.mark.parametrize(("above", "below"), [(1, 1), (3, 5), (4, 4), (6, 2)])
def test_runs_by_all_arrangements(above, below):
    n = above + below
    every = list(itertools.combinations(range(n), above))

    def runs(high):
        row = [i in high for i in range(n)]
        return 1 + sum(a != b for a, b in itertools.pairwise(row))

    counts = np.array([runs(h) for h in every])
    for high in every:
        r = runs(high)
        expected = min(1.0, 2.0 * min(np.mean(counts <= r), np.mean(counts >= r)))
        # The middle is kept at zero by a value that the test leaves out, or by the two halves.
        x = np.full(n, -1.0)
        x[list(high)] = 1.0
        padded = np.concatenate([x, np.zeros(2 * n + 1)])
        side, p = runs_test(padded)
        assert (int(side.sum()), side.size) == (above, n)
        assert p == pytest.approx(expected, rel=1e-9)


def test_runs_of_one_side_only_have_no_chance():
    assert runs_test(np.array([1.0, 1.0, 1.0, 5.0]))[1] is None


@given(
    st.integers(5, 40),
    st.integers(0, 500),
    st.sampled_from([1e-3, 7.0, 1e4]),
    st.randoms(use_true_random=False),
)
def test_scale_and_order_of_the_sample_do_not_matter(n, seed, factor, random):
    rng = np.random.default_rng(seed)
    x, t = rng.normal(size=n), rng.permutation(n)
    order = list(range(n))
    random.shuffle(order)
    a, b = trend(x, t), trend(x[order] * factor, t[order])
    assert (b.tau, b.n_runs, b.runs_p_value) == (pytest.approx(a.tau), a.n_runs, a.runs_p_value)
    assert b.slope == pytest.approx(a.slope * factor, rel=1e-9)
    assert b.slope_high == pytest.approx(a.slope_high * factor, rel=1e-9)
