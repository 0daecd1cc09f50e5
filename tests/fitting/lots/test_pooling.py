"""Tests for pooling against scipy, full enumeration, a published example, and by simulation."""

import math
import warnings
from itertools import combinations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting.lots import pooling

# Smoothness of paper by laboratory: F. W. Scholz, M. A. Stephens, JASA 82 (1987), section 6. Data and statistic from
# memory; the statistic recomputed with scipy.
PAPER = {
    "A": [38.7, 41.5, 43.8, 44.5, 45.5, 46.0, 47.7, 58.0],
    "B": [39.2, 39.3, 39.7, 41.4, 41.8, 42.9, 43.3, 45.8],
    "C": [34.0, 35.0, 39.0, 40.0, 43.0, 43.0, 44.0, 45.0],
    "D": [34.0, 34.8, 34.8, 35.4, 37.2, 37.8, 41.2, 42.8],
}
LABS = np.repeat(list(PAPER), 8)
MEASURED = np.ravel(list(PAPER.values()))


def pooled(values, lots, seed=0, **options):
    return pooling(values, lots, np.random.default_rng(seed), **options)


def test_paper_of_four_laboratories():
    found = pooled(MEASURED, LABS, replicates=4999)
    assert found.distributions.statistic == pytest.approx(4.480, abs=5e-4)
    assert 0.0005 < found.distributions.p_value < 0.005  # published: about 0.002, from memory
    assert found.rejected
    assert "is rejected at the 0.05 level by the k-sample Anderson-Darling test" in found.sentence
    assert "not rejected by the Levene test of scatter" in found.sentence


@pytest.mark.parametrize("decimals", [0, 1, 6])
@pytest.mark.parametrize("sizes", [[5, 4], [3, 1, 7, 6], [2, 2, 2, 30], [12, 9, 15]])
def test_statistics_equal_scipys(simulate, sizes, decimals):
    sample = simulate(np.random.default_rng([decimals, len(sizes)]), sizes, 1.0, 2.0)
    values = np.round(sample.values, decimals)
    groups = [values[sample.lots == name] for name in dict.fromkeys(sample.lots)]
    found = pooled(values, sample.lots, replicates=1)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # its own p-value ends at 0.25 and 0.001
        expected = stats.anderson_ksamp(groups).statistic
    assert found.distributions.statistic == pytest.approx(expected, rel=1e-10)
    f = stats.f_oneway(*groups)
    assert (found.means.statistic, found.means.p_value) == pytest.approx((f.statistic, f.pvalue), rel=1e-9)
    usable = [x for x in groups if x.size >= 3]
    if len(usable) > 1:
        w = stats.levene(*usable, center="median")
        assert (found.scatter.statistic, found.scatter.p_value) == pytest.approx(
            (w.statistic, w.pvalue), rel=1e-8
        )
    else:
        assert "fewer than two lots have 3 specimens" in found.scatter.reason


def test_a_tie_across_the_end_of_one_lot_and_the_start_of_the_next():
    groups = [[1, 2, 3, 3], [3, 3, 4, 5], [5, 5, 6]]
    found = pooled(np.concatenate(groups), np.repeat(list("abc"), [4, 4, 3]), replicates=1)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        expected = stats.anderson_ksamp(groups).statistic
    assert found.distributions.statistic == pytest.approx(expected, rel=1e-10)


def squared_distance(values, chosen) -> float:
    """A² of two lots by mid-ranks, term by term from its definition."""
    n, total = len(values), 0.0
    lots = (values[list(chosen)], np.delete(values, list(chosen)))
    for z in np.unique(values):
        ties = np.count_nonzero(values == z)
        rank = np.count_nonzero(values < z) + ties / 2
        for x in lots:
            own = np.count_nonzero(x < z) + np.count_nonzero(x == z) / 2
            total += ties * (n * own - x.size * rank) ** 2 / x.size / (rank * (n - rank) - n * ties / 4)
    return total * (n - 1) / n**2


@pytest.mark.parametrize(
    "values",
    [
        [1.0, 4.0, 2.0, 7.0, 5.0, 9.0, 8.0],
        [1.0, 1.0, 2.0, 2.0, 2.0, 3.0, 1.0],
        [3.0, 1.0, 2.0, 3.0, 3.0, 3.0, 4.0],
    ],
)
def test_p_value_is_the_share_of_all_divisions(values):
    values = np.array(values)
    all_of_them = np.array([squared_distance(values, c) for c in combinations(range(7), 3)])
    exact = np.mean(all_of_them >= all_of_them[0] - 1e-9)
    replicates = 20_000
    found = pooled(values, list("aaabbbb"), replicates=replicates).distributions.p_value
    assert found == pytest.approx(exact, abs=4 * math.sqrt(exact * (1 - exact) / replicates) + 1e-4)


def test_p_values_are_uniform_where_all_lots_come_from_one_population(simulate):
    rng = np.random.default_rng(8)
    p = np.empty((300, 3))
    for row in p:
        sample = simulate(rng, [7, 12, 5, 9], 0.0, 1.0)
        row[:] = [t.p_value for t in pooling(sample.values, sample.lots, rng, replicates=199).tests]
    for name, column in zip(("distributions", "means"), (p[:, 0], p[:, 2]), strict=True):
        assert stats.kstest(column, "uniform").pvalue > 0.01, name
    # Levene's test about medians keeps its level but is not exact for few specimens.
    assert np.mean(p[:, 1] < 0.05) < 0.09


@pytest.mark.parametrize(
    ("between", "spreads", "means_differ", "scatters_differ"),
    [(3.0, [1, 1, 1], True, False), (0.0, [1, 1, 6], False, True)],
)
def test_differences_are_found(simulate, between, spreads, means_differ, scatters_differ):
    sample = simulate(np.random.default_rng(4), [30, 30, 30], between, 1.0)
    values = sample.values.reshape(3, 30)
    middle = values.mean(axis=1, keepdims=True)
    shown = (middle * (between > 0) + (values - middle) * np.reshape(spreads, (3, 1))).ravel()
    found = pooled(shown, sample.lots)
    assert found.distributions.p_value < 0.05
    assert (found.means.p_value < 0.05) == means_differ
    assert (found.scatter.p_value < 0.05) == scatters_differ


def test_order_of_rows_and_seed(uneven):
    order = np.random.default_rng(2).permutation(uneven.values.size)
    first, again, moved = (
        pooled(uneven.values[i], uneven.lots[i]) for i in (slice(None), slice(None), order)
    )
    assert first == again
    assert moved.distributions.p_value == first.distributions.p_value
    for a, b in zip(moved.tests, first.tests, strict=True):
        assert_allclose((a.statistic, a.p_value), (b.statistic, b.p_value), rtol=1e-10)
    assert moved.sentence == first.sentence


def test_ranks_are_the_same_on_both_scales():
    plain, logarithmic = (pooled(MEASURED, LABS, scale=s) for s in ("as measured", "logarithmic"))
    assert plain.distributions == logarithmic.distributions
    assert plain.means.statistic != logarithmic.means.statistic
    expected = stats.f_oneway(*np.log(MEASURED).reshape(4, 8))
    assert logarithmic.means.statistic == pytest.approx(expected.statistic, rel=1e-9)


def test_chunks_do_not_change_the_draws(monkeypatch):
    whole = pooled(MEASURED, LABS)
    monkeypatch.setattr("calibrate.fitting.lots.k_sample.CHUNK", 100)
    assert pooled(MEASURED, LABS) == whole


def test_nothing_rejected_is_not_called_sameness(simulate):
    sample = simulate(np.random.default_rng(3), [8, 8, 8], 0.0, 1.0)
    found = pooled(sample.values, sample.lots, level=0.01)
    assert not found.rejected
    assert "is not rejected at the 0.01 level" in found.sentence
    assert "this does not show that it is so" in found.sentence
    assert "equal" not in found.sentence


@pytest.mark.parametrize(
    ("values", "lots", "reasons"),
    [
        ([1, 2, 4, 5], "aaaa", ("only one lot", "fewer than two lots", "only one lot")),
        ([1, 2, 4, 5], "abcd", ("every lot has one", "fewer than two lots", "every lot has one")),
        ([1, 2, 4], "aab", ("fewer than four", "fewer than two lots", "")),
        ([1, 1, 1, 2, 2, 2], "aaabbb", ("", "do not scatter", "")),
    ],
)
def test_tests_that_cannot_be_made(values, lots, reasons):
    found = pooled(values, list(lots))
    for test, reason in zip(found.tests, reasons, strict=True):
        assert reason in test.reason
        assert bool(test.reason) == bool(reason) == math.isnan(test.p_value)
    if all(reasons):
        assert found.sentence.startswith("Whether the lots may be pooled cannot be tested")
        assert not found.rejected


def test_lots_without_scatter_that_differ():
    found = pooled([1, 1, 1, 2, 2, 2], list("aaabbb"))
    assert (found.means.statistic, found.means.p_value) == (math.inf, 0.0)


@pytest.mark.parametrize(
    ("options", "told"), [({"level": 0.0}, "between 0 and 1"), ({"replicates": 0}, "at least one")]
)
def test_wrong_options_are_told(options, told):
    with pytest.raises(InputError, match=told):
        pooled(MEASURED, LABS, **options)
