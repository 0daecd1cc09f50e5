"""Unit slips of lots and of whole samples."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.records.screening.unit_slips import FACTORS, lot_slips, sample_slip
from calibrate.units import parse_unit

LOTS = list(np.repeat(["a", "b", "c", "d"], 9))


def kilonewtons(seed=0, between=0.08, within=0.1):
    """Four lots of nine, two thicknesses."""
    rng = np.random.default_rng(seed)
    middle = np.log([14.0, 20.0, 14.0, 20.0]) + rng.normal(0.0, between, 4)
    return np.exp(np.repeat(middle, 9) + rng.normal(0.0, within, 36))


def in_lot(x, lot, factor):
    return np.where(np.array(LOTS) == lot, x * factor, x)


@pytest.mark.parametrize("factor", [f for f, _ in FACTORS])
@pytest.mark.parametrize("inverse", [False, True])
@pytest.mark.parametrize("seed", range(3))
def test_one_lot_in_another_unit_is_found(factor, inverse, seed):
    ratio = 1.0 / factor if inverse else factor
    (slip,) = lot_slips(in_lot(kilonewtons(seed), "b", ratio), LOTS)
    assert (slip.lot, slip.specimens) == ("b", tuple(range(9, 18)))
    assert factor in slip.factors
    assert (slip.ratio > 1.0) == (ratio > 1.0)
    assert slip.median / slip.reference == pytest.approx(slip.ratio, rel=1e-12)
    assert len(slip.units) == len(slip.factors)


@pytest.mark.parametrize(
    ("pair", "expected"),
    [
        (("lbf", "N"), 4.4482216152605),
        (("ksi", "MPa"), 6.894757293168361),
        (("kgf", "N"), 9.80665),
        (("inch", "mm"), 25.4),
        (("kN", "kgf"), 1000.0 / 9.80665),
        (("MPa", "psi"), 145.03773773020923),
        (("kN", "lbf"), 224.80894309971046),
        (("ft", "mm"), 304.8),
    ],
)
def test_factors_are_those_of_the_units(pair, expected):
    ratio = parse_unit(pair[0]).factor / parse_unit(pair[1]).factor
    assert expected == pytest.approx(ratio, rel=1e-12)
    assert expected in [f for f, _ in FACTORS]


@pytest.mark.parametrize("seed", range(40))
def test_ordinary_lots_are_left_in_peace(seed):
    assert lot_slips(kilonewtons(seed), LOTS) == ()
    assert lot_slips(kilonewtons(seed, 0.2, 0.3), LOTS) == ()


@pytest.mark.parametrize("seed", range(20))
def test_wide_scatter_excuses_a_large_ratio(seed):
    x = np.exp(np.random.default_rng(seed).normal(0.0, 1.0, 200))
    assert lot_slips(x, list(np.arange(200) // 2)) == ()


def test_two_lots_of_four_in_another_unit():
    x = in_lot(in_lot(kilonewtons(), "a", 9.80665), "c", 9.80665)
    # Which pair is the odd one no number tells.
    assert {s.lot for s in lot_slips(x, LOTS)} in ({"a", "c"}, {"b", "d"})


def test_of_two_lots_the_smaller_is_named():
    x = np.array([10.0, 11.0, 10.5, 10.2, 1000.0, 1050.0])
    (slip,) = lot_slips(x, ["a"] * 4 + ["b"] * 2)
    assert (slip.lot, slip.reference) == ("b", 10.35)
    assert slip.factors[:2] == (100.0, 1000.0 / 9.80665)


def test_labels_that_say_nothing_are_left_out():
    x = np.append(kilonewtons(), [1e6, 1e-6, -5.0])
    assert lot_slips(x, [*LOTS, None, " ", "e"]) == ()
    assert lot_slips([1.0, 2.0], ["a", "a"]) == ()
    assert lot_slips([1.0, 2.0], [None, None]) == ()


@given(st.integers(0, 500), st.sampled_from([1e-3, 9.80665, 1e3]), st.randoms(use_true_random=False))
def test_scale_and_order_do_not_matter(seed, factor, random):
    x = in_lot(kilonewtons(seed), "c", 1000.0)
    order = list(range(36))
    random.shuffle(order)
    before = lot_slips(x, LOTS)
    after = lot_slips(x[order] * factor, [LOTS[i] for i in order])
    assert [(a.lot, a.factors) for a in before] == [(b.lot, b.factors) for b in after]
    for a, b in zip(before, after, strict=True):
        assert b.ratio == pytest.approx(a.ratio, rel=1e-12)
        assert sorted(order[i] for i in b.specimens) == list(a.specimens)


def test_few_slips_are_missed():
    found = [[s.lot for s in lot_slips(in_lot(kilonewtons(seed), "c", 1000.0), LOTS)] for seed in range(200)]
    assert np.mean([lots == ["c"] for lots in found]) >= 0.97


@pytest.mark.parametrize(
    ("declared", "factor"),
    [
        ({"declared_range": (10.0, 30.0)}, 9.80665),
        ({"declared_range": (10.0, 30.0)}, 1.0 / 4.4482216152605),
        ({"declared_range": (16.5, 16.6)}, 1000.0),
        ({"nominal": 14.0}, 25.4),
        ({"nominal": 14.0}, 1.0 / 6.894757293168361),
        ({"nominal": 20.0}, 1000.0 / 9.80665),
    ],
)
def test_the_whole_sample_against_what_was_declared(declared, factor):
    slip = sample_slip(kilonewtons() * factor, **declared)
    assert max(factor, 1.0 / factor) in slip.factors
    assert slip.lot is None
    assert slip.specimens == tuple(range(36))
    assert sample_slip(kilonewtons(), **declared) is None


@pytest.mark.parametrize("ratio", [0.4, 0.7, 1.0, 1.6, 2.5])
def test_a_mean_may_differ_from_a_nominal_value(ratio):
    assert sample_slip(kilonewtons() * ratio, nominal=17.0) is None


def test_what_no_unit_explains_is_no_slip():
    assert sample_slip(kilonewtons() * 50.0, nominal=17.0) is None
    assert sample_slip(kilonewtons()) is None
    assert sample_slip(-kilonewtons(), nominal=17.0) is None
    assert sample_slip(kilonewtons(), nominal=-17.0) is None
