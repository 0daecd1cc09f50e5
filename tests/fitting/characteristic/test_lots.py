"""Limits over lots against the balanced formulas, a simple sample and their own invariances."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting.characteristic import characteristic_value_of_lots, lot_limit, tolerance_factor

Z = 1.6448536269514722
LOTS = np.repeat([1, 2, 3, 4, 5], 4)
VALUES = (
    500.0 + 20.0 * np.random.default_rng(3).standard_normal(20) + 25.0 * np.array([0, 1, -1, 2, -1])[LOTS - 1]
)


def balanced(means, n, within_sd, confidence, ratio_level):
    """Mee and Owen's factor, written in their own terms: mean squares, ratio R, Satterthwaite's f, effective N."""
    lots = len(means)
    between, within = n * np.var(means, ddof=1), within_sd**2
    quantile = stats.f.ppf(ratio_level, lots * (n - 1), lots - 1)
    r = max(0.0, (between / within * quantile - 1.0) / n)
    f = (r + 1.0) ** 2 / ((r + 1.0 / n) ** 2 / (lots - 1) + (1.0 - 1.0 / n) / (lots * n))
    size = lots * n * (r + 1.0) / (n * r + 1.0)
    k = stats.nct.ppf(confidence, f, Z * math.sqrt(size)) / math.sqrt(size)
    return k, math.sqrt((between + (n - 1) * within) / n)


@pytest.mark.parametrize(("confidence", "level"), [(0.75, 0.75), (0.90, 0.85), (0.95, 0.905), (0.99, 0.975)])
@pytest.mark.parametrize("within_sd", [1.0, 4.0, 30.0])
def test_balanced_lots(confidence, level, within_sd):
    means = np.array([100.0, 103.0, 96.0, 108.0, 99.0])
    found = lot_limit(means, [4] * 5, within_sd, 0.05, confidence)
    k, sd = balanced(means, 4, within_sd, confidence, level)
    assert found.factor == pytest.approx(k, rel=1e-7)
    assert found.sd == pytest.approx(sd, rel=1e-12)
    assert found.limit == pytest.approx(101.2 - k * sd, rel=1e-7)


def test_lots_without_scatter_within_are_a_sample_of_their_means():
    means = np.array([100.0, 103.0, 96.0, 108.0])
    found = lot_limit(means, [3, 2, 9, 4], 0.0, 0.05, 0.75)
    assert found.factor == pytest.approx(float(tolerance_factor(4, 0.05, 0.75)), rel=1e-9)
    assert (float(found.effective_n), float(found.freedom), float(found.between_share)) == pytest.approx(
        (4, 3, 1)
    )


def test_equal_lot_means_use_every_specimen():
    found = lot_limit(np.full(4, 100.0), [5] * 4, 2.0, 0.05, 0.75)
    assert (float(found.effective_n), float(found.between_share)) == pytest.approx((20.0, 0.0))


def test_batch():
    means = np.random.default_rng(1).normal(size=(6, 3))
    sd = np.linspace(0.0, 2.0, 6)
    batch = lot_limit(means, [2, 5, 3], sd, 0.05, 0.9).limit
    single = [float(lot_limit(m, [2, 5, 3], s, 0.05, 0.9).limit) for m, s in zip(means, sd, strict=True)]
    np.testing.assert_allclose(batch, single, rtol=1e-12)


def test_upper_limit_mirrors_the_lower_one():
    lower = characteristic_value_of_lots(VALUES, LOTS, "normal", 0.05, 0.9)
    upper = characteristic_value_of_lots(-VALUES, LOTS, "normal", 0.95, 0.9)
    assert upper.value == pytest.approx(-lower.value, rel=1e-9)


def test_lognormal_is_normal_of_logarithms():
    found = characteristic_value_of_lots(VALUES, LOTS, "lognormal")
    logs = characteristic_value_of_lots(np.log(VALUES), LOTS, "normal")
    assert found.value == pytest.approx(math.exp(logs.value), rel=1e-9)
    assert found.factor == pytest.approx(logs.factor, rel=1e-9)


def test_result():
    names = np.array(["a", "b", "c", "d", "e"])[LOTS - 1]
    found = characteristic_value_of_lots(VALUES, names, "normal")
    assert found.route == "lots"
    assert found.statement.startswith(
        "5 % fractile at 75 % confidence, normal, specimen of a random lot, 5 lots"
    )
    assert found.value < found.point_estimate < found.mean
    assert found.doubts == ()
    assert "of the variance lies between lots" in found.notes[0]
    few = characteristic_value_of_lots(VALUES[:8], names[:8], "normal")
    assert [d.code for d in few.doubts] == ["few-lots"]


@pytest.mark.parametrize("family", ["normal", "lognormal"])
def test_floor(family):
    plain = characteristic_value_of_lots(VALUES, LOTS, family)
    raised = characteristic_value_of_lots(VALUES, LOTS, family, least_cov=0.2)
    assert (plain.floored, raised.floored) == (False, True)
    assert raised.cov_used == pytest.approx(0.2)
    assert raised.value < plain.value


@pytest.mark.parametrize(
    ("values", "lots", "family", "message"),
    [
        (VALUES, np.ones(20), "normal", "needs at least two lots; there is one"),
        (VALUES, np.arange(20), "normal", "at least one lot with two specimens"),
        (VALUES, LOTS[:19], "normal", "20 values but 19 names of lots"),
        (VALUES, LOTS, "gumbel", "not offered for the family 'gumbel'"),
        (np.full(20, 3.0), LOTS, "normal", "All values are equal"),
        (VALUES - 500.0, LOTS, "lognormal", "needs values above zero"),
    ],
)
def test_refusals(values, lots, family, message):
    with pytest.raises(InputError, match=message):
        characteristic_value_of_lots(values, lots, family)


def test_means_and_sizes_of_different_length():
    with pytest.raises(InputError, match="3 sizes of lots but means of shape"):
        lot_limit([1.0, 2.0], [3, 4, 5], 1.0, 0.05, 0.75)
