"""Outlier tests against Rosner's example and simulation, influence against refits."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.screening.outliers import (
    critical_esd,
    esd_within_lots,
    generalised_esd,
    influence,
    most_influential,
)

# Rosner (1983) as in the NIST e-Handbook 1.3.5.17.3 (from memory, recomputed).
ROSNER = [
    float(v)
    for v in [
        "-0.25",
        "0.68",
        "0.94",
        "1.15",
        "1.20",
        "1.26",
        "1.26",
        "1.34",
        "1.38",
        "1.43",
        "1.49",
        "1.49",
        "1.55",
        "1.56",
        "1.58",
        "1.65",
        "1.69",
        "1.70",
        "1.76",
        "1.77",
        "1.81",
        "1.91",
        "1.94",
        "1.96",
        "1.99",
        "2.06",
        "2.09",
        "2.10",
        "2.14",
        "2.15",
        "2.23",
        "2.24",
        "2.26",
        "2.35",
        "2.37",
        "2.40",
        "2.47",
        "2.54",
        "2.62",
        "2.64",
        "2.90",
        "2.92",
        "2.92",
        "2.93",
        "3.21",
        "3.26",
        "3.30",
        "3.59",
        "3.68",
        "4.30",
        "4.64",
        "5.34",
        "5.42",
        "6.01",
    ]
]


def test_rosners_54_values_hold_three_outliers():
    test = generalised_esd(ROSNER, most=10)
    assert (test.scale, test.within_lots, test.n_outliers, test.specimens) == ("raw", False, 3, (53, 52, 51))
    assert len(test.steps) == 10
    distances = [3.118, 2.942, 3.179, 2.810, 2.815, 2.848, 2.279, 2.310, 2.101, 2.067]
    critical = [3.158, 3.151, 3.143, 3.136, 3.128, 3.120, 3.111, 3.103, 3.094, 3.085]
    np.testing.assert_allclose([s.distance for s in test.steps], distances, atol=1.1e-3)
    np.testing.assert_allclose([s.critical for s in test.steps], critical, atol=1.1e-3)
    assert [s.value for s in test.steps[:3]] == [6.01, 5.42, 5.34]


@pytest.mark.parametrize("n", [5, 20, 60])
def test_first_critical_distance_is_that_of_grubbs(n):
    # The largest |x - mean|/s exceeds its critical value with chance 0.05: exact to the overlap of two such events.
    x = np.random.default_rng(n).normal(size=(40_000, n))
    largest = (np.abs(x - x.mean(axis=1, keepdims=True)).max(axis=1)) / x.std(axis=1, ddof=1)
    assert np.mean(largest > critical_esd(n, 1)) == pytest.approx(
        0.05, abs=4.0 * np.sqrt(0.05 * 0.95 / 40_000)
    )


@pytest.mark.parametrize("n", [25, 60])
@pytest.mark.parametrize("logarithmic", [False, True])
def test_ordinary_samples_alarm_at_the_level(n, logarithmic):
    rng = np.random.default_rng(7)
    x = 5.0 + 0.5 * rng.normal(size=(1500, n))
    values = np.exp(x) if logarithmic else x
    rate = np.mean([generalised_esd(v, logarithmic=logarithmic).n_outliers > 0 for v in values])
    # Rosner's approximation: 0.05 within 0.01 from 25 values.
    assert rate == pytest.approx(0.05, abs=0.01 + 3.0 * np.sqrt(0.05 * 0.95 / 1500))


def test_ordinary_lots_alarm_at_the_level():
    rng = np.random.default_rng(8)
    lots = list(np.repeat(["a", "b", "c", "d"], 9))
    tests = [
        esd_within_lots(np.exp(np.repeat(rng.normal(2.0, 0.5, 4), 9) + rng.normal(0, 0.05, 36)), lots)
        for _ in range(1000)
    ]
    for which, scale in enumerate(("raw", "logarithmic")):
        assert {t[which].scale for t in tests} == {scale}
        rate = np.mean([t[which].n_outliers > 0 for t in tests])
        # Residuals within a lot are slightly correlated; the level is kept to 0.02.
        assert rate == pytest.approx(0.05, abs=0.02 + 3.0 * np.sqrt(0.05 * 0.95 / 1000))


def test_a_specimen_may_stand_out_in_its_lot_alone():
    lots = np.repeat(["thin", "thick", "few"], [9, 9, 2])
    scores = stats.norm.ppf((np.arange(9) + 0.5) / 9)
    x = np.where(lots == "thick", 20.0, 10.0) * np.exp(0.05 * np.concatenate([scores, scores, [0.0, 0.0]]))
    x[13] = 11.0
    assert generalised_esd(x).n_outliers == 0
    raw, logarithmic = esd_within_lots(x, list(lots))
    assert raw.specimens == logarithmic.specimens == (13,)
    assert raw.named[0].value == 11.0
    assert raw.within_lots
    assert esd_within_lots(x[:9], list(lots[:9])) == ()


def test_one_scale_may_find_what_another_bears():
    x = np.exp(np.random.default_rng(4).normal(0.0, 0.8, 60))
    assert generalised_esd(x).n_outliers > 0
    assert generalised_esd(x, logarithmic=True).n_outliers == 0


def test_chance_among_longer_tails():
    rest = np.random.default_rng(1).normal(10.0, 1.0, 39)
    rest = (rest - rest.mean()) / rest.std(ddof=1) + 10.0
    step = generalised_esd(np.append(rest, 16.0)).named[0]
    # Gumbel with the mean 10 and deviation 1 of the others, witnessed by scipy.
    scale = np.sqrt(6.0) / np.pi
    law = stats.gumbel_r(10.0 - np.euler_gamma * scale, scale)
    assert step.chance == pytest.approx(40 * law.sf(16.0), rel=0.03)  # n·p against 1 - exp(-n·p)
    low = generalised_esd(np.append(rest, 5.0)).named[0]
    logs = np.log(rest)
    scale = logs.std(ddof=1) * np.sqrt(6.0) / np.pi
    weibull = stats.gumbel_l(logs.mean() + np.euler_gamma * scale, scale)
    assert low.chance == pytest.approx(-np.expm1(40 * weibull.logsf(np.log(5.0))), rel=0.01)


@pytest.mark.parametrize("x", [[1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 9.0], [3.0] * 9, [1.0, 2.0, 3.0]])
def test_equal_and_few_values_end_the_test(x):
    test = generalised_esd(x)
    assert len(test.steps) <= len(x) // 4
    assert all(np.isfinite(s.distance) for s in test.steps)


def test_influence_is_that_of_a_refit():
    # One low value in 21 raised V from 0.10 to 0.16.
    x = np.append(stats.norm(10.0, 1.0).ppf((np.arange(20) + 0.5) / 20), 4.2)
    found = influence(x, most_influential(x))
    rest = x[:20]
    assert (found.specimen, found.value) == (20, 4.2)
    np.testing.assert_allclose(
        [found.cov, found.cov_without], [stats.variation(v, ddof=1) for v in (x, rest)], rtol=1e-12
    )
    z = stats.norm.ppf(0.05)
    for got, v in ((found.normal_fractile, x), (found.normal_fractile_without, rest)):
        assert got == pytest.approx(v.mean() + z * v.std(ddof=1), rel=1e-12)
    for got, v in ((found.lognormal_fractile, np.log(x)), (found.lognormal_fractile_without, np.log(rest))):
        assert got == pytest.approx(np.exp(v.mean() + z * v.std(ddof=1)), rel=1e-12)


@given(st.integers(3, 40), st.integers(0, 1000), st.floats(1e-3, 1e3))
def test_the_most_influential_is_found_and_scale_does_not_matter(n, seed, factor):
    x = np.random.default_rng(seed).gamma(4.0, 2.0, n)
    change = [abs(stats.variation(np.delete(x, i), ddof=1) - stats.variation(x, ddof=1)) for i in range(n)]
    found = most_influential(x)
    assert change[found] == pytest.approx(max(change), rel=1e-9)
    assert most_influential(x * factor) == found
    assert generalised_esd(x * factor).specimens == generalised_esd(x).specimens
    assert (
        generalised_esd(x * factor, logarithmic=True).specimens
        == generalised_esd(x, logarithmic=True).specimens
    )


def test_no_logarithm_of_what_is_not_positive():
    found = influence([-1.0, 0.0, 1.0, 8.0], 3)
    assert (found.lognormal_fractile, found.lognormal_fractile_without, found.cov_without) == (
        None,
        None,
        None,
    )
    assert most_influential([-1.0, 0.0, 1.0]) in (0, 2)
