"""Scatter by lots where it has a closed form, and where a sample cannot tell it."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from calibrate.errors import InputError
from calibrate.fitting.lots import lot_scatter

# Yield of dyestuff by batch, g of standard colour: O. L. Davies, P. L. Goldsmith, Statistical Methods in Research and
# Production, 4th ed. 1972, section 6.4. Data, place and mean squares from memory; sums recomputed.
DYESTUFF = [
    [1545, 1440, 1440, 1520, 1580],
    [1540, 1555, 1490, 1560, 1495],
    [1595, 1550, 1605, 1510, 1560],
    [1445, 1440, 1595, 1465, 1545],
    [1595, 1630, 1515, 1635, 1625],
    [1520, 1455, 1450, 1480, 1445],
]
# Generated data in which the mean square between lots is the smaller one: G. E. P. Box, G. C. Tiao, Bayesian Inference
# in Statistical Analysis, 1973, section 5.1.2. Data and place from memory.
BOX_TIAO = [
    [7.298, 3.846, 2.434, 9.566, 7.990],
    [5.220, 6.556, 0.608, 11.788, -0.892],
    [0.110, 10.386, 13.434, 5.510, 8.166],
    [2.212, 4.852, 7.092, 9.288, 4.980],
    [0.282, 9.014, 4.458, 9.446, 7.198],
    [1.722, 4.782, 8.106, 0.758, 3.758],
]
NAMES = np.repeat(list("ABCDEF"), 5)


def codes(scatter) -> set[str]:
    return {d.code for d in scatter.doubts}


def test_dyestuff():
    found = lot_scatter(np.ravel(DYESTUFF), NAMES)
    assert found.mean == pytest.approx(1527.5, rel=1e-14)
    assert found.anova.between_mean_square == pytest.approx(11271.5, rel=1e-12)
    assert found.anova.within_mean_square == pytest.approx(2451.25, rel=1e-12)
    assert found.between_sd**2 == pytest.approx(1764.05, rel=1e-9)
    assert found.within_sd**2 == pytest.approx(2451.25, rel=1e-9)
    assert found.se_mean == pytest.approx(math.sqrt(11271.5 / 30), rel=1e-9)
    # The criterion 319.6543 is printed without the constant ln n (widely reproduced example, from memory).
    assert -2 * found.log_likelihood + math.log(30) == pytest.approx(319.6543, abs=5e-5)


def test_box_and_tiao_is_a_pooled_fit():
    values = np.ravel(BOX_TIAO)
    found = lot_scatter(values, NAMES)
    assert (found.between_sd, found.intraclass) == (0.0, 0.0)
    assert found.mean == pytest.approx(np.mean(values), rel=1e-14)
    assert found.within_sd == pytest.approx(np.std(values, ddof=1), rel=1e-14)
    assert found.total_sd == found.within_sd
    assert found.effective_n == pytest.approx(30, rel=1e-14)
    assert found.se_mean == pytest.approx(found.total_sd / math.sqrt(30), rel=1e-14)
    assert (found.between_interval[0], found.intraclass_interval[0]) == (0.0, 0.0)
    assert found.anova.between_variance < 0.0 == found.anova.between_sd
    assert [s.shrunken_mean for s in found.shares] == pytest.approx([found.mean] * 6, rel=1e-14)
    # Printed without ln n: 161.8283 (widely reproduced example, from memory).
    assert -2 * found.log_likelihood + math.log(30) == pytest.approx(161.8283, abs=5e-5)
    assert not found.doubts


@pytest.mark.parametrize(("lots", "size"), [(3, 2), (4, 9), (20, 3), (2, 30), (150, 2)])
@pytest.mark.parametrize("between", [0.3, 1.0, 1e3])
def test_lots_of_one_size_equal_the_analysis_of_variance(simulate, lots, size, between):
    sample = simulate(np.random.default_rng([lots, size]), [size] * lots, between, 1.0)
    found = lot_scatter(sample.values, sample.lots)
    table = np.reshape(sample.values, (lots, size))
    means = table.mean(axis=1)
    within = np.sum((table - means[:, None]) ** 2) / (lots * (size - 1))
    between_square = size * np.var(means, ddof=1)
    positive = between_square > within
    pooled = np.var(sample.values, ddof=1)
    expected = ((between_square - within) / size, within) if positive else (0.0, pooled)
    assert_allclose((found.between_sd**2, found.within_sd**2), expected, rtol=1e-9)
    assert found.mean == pytest.approx(np.mean(sample.values), rel=1e-13)
    assert found.anova.mean_size == pytest.approx(size, rel=1e-13)
    assert_allclose(found.anova.between_variance, (between_square - within) / size, rtol=1e-9)
    if positive:
        assert found.se_mean == pytest.approx(math.sqrt(between_square / (lots * size)), rel=1e-9)


def test_mean_size_of_uneven_lots(uneven):
    sizes = np.array([9, 3, 1, 5, 7, 12])
    expected = (37 - np.sum(sizes**2) / 37) / 5
    found = lot_scatter(uneven.values, uneven.lots)
    assert found.anova.mean_size == pytest.approx(expected, rel=1e-14)
    assert (found.sizes, found.n) == (tuple(sizes), 37)


def test_shares(uneven):
    found = lot_scatter(uneven.values, uneven.lots)
    assert found.lots == tuple(dict.fromkeys(uneven.lots))
    ratio = found.intraclass / (1 - found.intraclass)
    for share, x in zip(found.shares, uneven.apart, strict=True):
        assert (share.size, share.lowest, share.highest) == (x.size, np.min(x), np.max(x))
        assert share.mean == pytest.approx(np.mean(x), rel=1e-14)
        pull = x.size * ratio / (1 + x.size * ratio)
        assert share.shrunken_mean == pytest.approx(found.mean + pull * (np.mean(x) - found.mean), rel=1e-12)
        if x.size > 1:
            assert share.sd == pytest.approx(np.std(x, ddof=1), rel=1e-12)
        else:
            assert math.isnan(share.sd)
    assert_allclose(found.lot_means, [np.mean(x) for x in uneven.apart], rtol=1e-14)


def test_doubt_quotes_share_and_effective_number(uneven):
    found = lot_scatter(uneven.values, uneven.lots, where="records.strength")
    (doubt,) = (d for d in found.doubts if d.code == "lots-matter")
    assert f"{found.intraclass:.0%} of the variance is between lots" in doubt.message
    assert f"about {found.effective_n:.0f}, not 37" in doubt.message
    assert doubt.where == "records.strength"
    assert "single-specimen-lots" in codes(found)


def test_no_scatter_within_lots():
    found = lot_scatter([0.1, 0.1, 0.1, 0.7, 0.7, 0.4], ["a", "a", "a", "b", "b", "c"])
    assert found.within_sd == 0.0
    assert found.between_sd == found.total_sd == pytest.approx(0.3, rel=1e-14)
    assert found.mean == pytest.approx(0.4, rel=1e-14)  # lots count, not specimens
    assert (found.intraclass, found.effective_n) == (1.0, 3)
    assert found.intraclass_interval == (1.0, 1.0)
    assert found.within_interval == (0.0, 0.0)
    assert 0.0 < found.between_interval[0] < found.between_sd < found.between_interval[1] < math.inf
    assert [s.shrunken_mean for s in found.shares] == pytest.approx([0.1, 0.7, 0.4], rel=1e-14)
    assert {"no-scatter-within-lots", "lots-matter"} <= codes(found)


@pytest.mark.parametrize("within", [1e-3, 1e-6, 1e-9])
def test_little_scatter_within_lots_leads_to_none(within):
    noise = within * np.array([-1, 0, 1, 2, -2, 0, 1, 1, -1])
    found = lot_scatter(np.repeat([4.0, 5.0, 7.0], [3, 4, 2]) + noise, list("aaabbbbcc"))
    limit = lot_scatter(np.repeat([4.0, 5.0, 7.0], [3, 4, 2]), list("aaabbbbcc"))
    assert found.between_sd == pytest.approx(limit.between_sd, rel=2 * within)
    assert_allclose(found.between_interval, limit.between_interval, rtol=2 * within + 1e-8)
    assert found.within_sd == pytest.approx(math.sqrt((2 + 8.75 + 2) / (9 - 3)) * within, rel=1e-5)
    assert found.effective_n == pytest.approx(3.0, abs=20 * within**2 + 1e-12)


def test_one_lot():
    x = [1.0, 1.5, 2.5, 4.0]
    found = lot_scatter(x, ["only"] * 4)
    assert (found.mean, found.within_sd) == pytest.approx((2.25, np.std(x, ddof=1)), rel=1e-14)
    assert np.isnan(
        [found.between_sd, found.total_sd, found.intraclass, found.effective_n, found.se_mean]
    ).all()
    assert (found.between_interval, found.intraclass_interval) == ((0.0, math.inf), (0.0, 1.0))
    assert found.shares[0].shrunken_mean == found.mean
    assert codes(found) == {"one-lot"}
    assert "cannot represent production" in found.doubts[0].message


def test_every_lot_has_one_specimen():
    x = [1.0, 1.5, 2.5, 4.0]
    found = lot_scatter(x, [1, 2, 3, 4])
    assert found.total_sd == pytest.approx(np.std(x, ddof=1), rel=1e-14)
    assert found.effective_n == 4
    assert found.se_mean == pytest.approx(found.total_sd / 2, rel=1e-14)
    assert np.isnan([found.between_sd, found.within_sd, found.intraclass]).all()
    assert found.between_interval == found.within_interval
    assert found.intraclass_interval == (0.0, 1.0)
    assert codes(found) == {"single-specimen-lots"}


def test_two_lots_are_few():
    found = lot_scatter([1, 2, 3, 4, 4.5], ["a", "a", "a", "b", "b"])
    assert "few-lots" in codes(found)
    assert 0.0 < found.between_sd < found.between_interval[1] < math.inf


@pytest.mark.parametrize("labels", [[1, 1, 2, 2], [1.0, 1.0, 2.0, 2.0], [" 1", "1 ", "2", 2]])
def test_names_of_lots_are_text(labels):
    assert lot_scatter([1, 2, 3, 5], labels).lots == ("1", "2")


@pytest.mark.parametrize(
    ("values", "lots", "options", "told"),
    [
        ([1, 2, 3], ["a", "b"], {}, "3 values and 2 lots"),
        ([1], ["a"], {}, "at least two specimens"),
        ([1, math.nan, math.inf], ["a", "a", "b"], {}, "specimen 2, 3 of 3"),
        ([1, 0, 3], ["a", "a", "b"], {"scale": "logarithmic"}, "Not positive: specimen 2"),
        ([1, 2, 3], ["a", "", None], {}, "Without a lot: specimen 2, 3"),
        ([1, 2, 3], [1.0, 2.0, math.nan], {}, "Without a lot: specimen 3"),
        ([2, 2, 2], ["a", "a", "b"], {}, "no scatter"),
        ([1, 2, 3], ["a", "a", "b"], {"level": 1.0}, "between 0 and 1"),
        ([1, 2, 3], ["a", "a", "b"], {"scale": "log"}, "'as measured' or 'logarithmic'"),
    ],
)
def test_wrong_input_is_told(values, lots, options, told):
    with pytest.raises(InputError, match=told):
        lot_scatter(values, lots, **options)
