"""A limit at confidence c lies on the safe side of the true fractile in the share c of samples."""

import math

import numpy as np
import pytest

from calibrate.fitting.characteristic import characteristic_value, lot_limit, tolerance_factor
from calibrate.fitting.characteristic.pivots import gumbel_rows

SAMPLES = 2_000
Z = 1.6448536269514722


def within(share, confidence):
    """Whether a share of SAMPLES is the confidence, to three Monte Carlo standard errors."""
    return abs(share - confidence) <= 3.0 * math.sqrt(confidence * (1.0 - confidence) / SAMPLES)


@pytest.mark.parametrize(
    ("family", "fractile", "confidence"),
    [("normal", 0.05, 0.75), ("lognormal", 0.05, 0.75), ("lognormal", 0.95, 0.95)],
)
def test_normal_and_lognormal(family, fractile, confidence):
    x = 6.0 + 0.2 * np.random.default_rng(11).standard_normal((SAMPLES, 10))
    true = 6.0 + 0.2 * math.copysign(Z, fractile - 0.5)
    if family == "lognormal":
        x, true = np.exp(x), math.exp(true)
    values = np.array([characteristic_value(row, family, fractile, confidence).value for row in x])
    assert within(np.mean(values <= true if fractile < 0.5 else values >= true), confidence)


@pytest.mark.parametrize("confidence", [0.75, 0.95])
@pytest.mark.parametrize("fractile", [0.05, 0.95])
def test_weibull(fractile, confidence):
    rng = np.random.default_rng(12)
    x = 500.0 * rng.weibull(8.0, size=(SAMPLES, 10))
    true = 500.0 * (-math.log(1.0 - fractile)) ** (1.0 / 8.0)
    one = characteristic_value(x[0], "weibull", fractile, confidence, rng=rng)
    # The factor depends on n alone, so that one simulation of it serves all samples.
    location, scale = gumbel_rows(-np.log(x))
    values = np.exp(-location + math.copysign(one.factor, fractile - 0.5) * scale)
    assert values[0] == pytest.approx(one.value, rel=1e-12)
    assert within(np.mean(values <= true if fractile < 0.5 else values >= true), confidence)


def lot_samples(sizes, between_share, seed):
    """Return standard normal specimens of random lots, one sample per row."""
    rng = np.random.default_rng(seed)
    lots = np.repeat(np.arange(len(sizes)), sizes)
    of_lots = math.sqrt(between_share) * rng.standard_normal((SAMPLES, len(sizes)))
    return lots, of_lots[:, lots] + math.sqrt(1.0 - between_share) * rng.standard_normal((SAMPLES, lots.size))


def share_covered(sizes, between_share, confidence):
    lots, x = lot_samples(sizes, between_share, seed=[*sizes, int(100 * between_share)])
    means = np.add.reduceat(x, np.flatnonzero(np.diff(lots, prepend=-1)), axis=1) / sizes
    within_sd = np.sqrt(np.sum((x - means[:, lots]) ** 2, axis=1) / (lots.size - len(sizes)))
    return np.mean(lot_limit(means, sizes, within_sd, 0.05, confidence).limit <= -Z)


@pytest.mark.parametrize("between_share", [0.6, 0.95])
def test_five_lots_that_differ(between_share):
    assert within(share_covered([4] * 5, between_share, 0.75), 0.75)


@pytest.mark.parametrize("confidence", [0.75, 0.95])
@pytest.mark.parametrize(
    ("sizes", "between_share"), [([4] * 5, 0.0), ([2, 3, 8, 20], 0.3), ([1, 2, 3, 4, 30], 0.6)]
)
def test_lots_cover_at_least_as_often_as_stated(sizes, between_share, confidence):
    share = share_covered(sizes, between_share, confidence)
    assert share > confidence - 3.0 * math.sqrt(confidence * (1.0 - confidence) / SAMPLES)
    # Safe, but not by throwing the information away: it fails at least a fifth as often as stated.
    assert 1.0 - share > 0.2 * (1.0 - confidence)


def test_lots_that_differ_are_not_covered_by_the_limit_of_a_simple_sample():
    _, x = lot_samples([4] * 5, 0.6, seed=13)
    limits = x.mean(axis=1) - tolerance_factor(20, 0.05, 0.75) * x.std(axis=1, ddof=1)
    assert np.mean(limits <= -Z) < 0.70
