"""Threshold exceedances: fits, clusters, figures for the choice of a threshold, and the maximum of a period."""

import math

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.actions.maxima import fit_maxima
from calibrate.actions.return_levels import return_levels
from calibrate.actions.thresholds import (
    annual_maximum,
    decluster,
    dispersion,
    fit_excesses,
    fit_exponential_excesses,
    level_interval,
    mean_residual_life,
    stability,
)
from calibrate.errors import InputError

THRESHOLD = 12.0


def excesses(shape=0.1, scale=2.0, n=200, seed=3):
    """Values above the threshold; scipy's shape of the generalised Pareto family has the same sign."""
    return THRESHOLD + stats.genpareto(shape, 0.0, scale).rvs(n, random_state=np.random.default_rng(seed))


def codes(found):
    return [doubt.code for doubt in found.doubts]


def profile(y):
    """Return Grimshaw's profile over t = shape/scale: shapes, and log-likelihoods per value where shape > -1."""
    below = -(1.0 - np.logspace(-9.0, 0.0, 600, endpoint=False)) / y.max()
    t = np.sort(np.concatenate([below, np.logspace(-8.0, 4.0, 900) / y.mean()]))
    shape = np.mean(np.log1p(t[:, None] * y), axis=1)
    return shape[shape > -1.0], (-np.log(shape / t) - shape - 1.0)[shape > -1.0]


# Excesses ------------------------------


@pytest.mark.parametrize("seed", range(40))
def test_likelihood_against_grimshaws_profile(seed):
    """Samples of all sizes and shapes: the largest inner top of the profile, or none at all."""
    rng = np.random.default_rng(seed)
    y = stats.genpareto(rng.uniform(-0.6, 1.2), 0.0, 2.0).rvs(int(rng.integers(5, 80)), random_state=rng)
    shape, value = profile(y)
    inner = np.flatnonzero((value[1:-1] > value[:-2] + 1e-12) & (value[1:-1] > value[2:])) + 1
    if not inner.size:
        with pytest.raises(InputError, match="has no maximum"):
            fit_excesses(y, 0.0)
        return
    found = fit_excesses(y, 0.0)
    best = inner[np.argmax(value[inner])]
    assert value[best] * y.size == pytest.approx(found.log_likelihood, abs=2e-3)
    assert found.log_likelihood >= value[best] * y.size - 1e-9
    assert found.shape == pytest.approx(shape[best], abs=0.05)


def test_against_scipy():
    x = excesses()
    shape, _, scale = stats.genpareto.fit(x - THRESHOLD, floc=0.0)
    found = fit_excesses(np.append(x, [1.0, THRESHOLD]), THRESHOLD)
    assert (found.n, found.shape, found.scale) == (
        200,
        pytest.approx(shape, abs=1e-3),
        pytest.approx(scale, rel=1e-3),
    )
    above = np.array([THRESHOLD, 13.0, 30.0])
    law = stats.genpareto(found.shape, THRESHOLD, found.scale)
    np.testing.assert_allclose(found.exceedance(above), law.sf(above), rtol=1e-12)
    assert found.log_likelihood == pytest.approx(law.logpdf(x).sum(), rel=1e-12)


def test_standard_errors_against_differences():
    x = excesses()
    found = fit_excesses(x, THRESHOLD, years=40.0)
    h = 1e-3

    def value(i, j):
        law = stats.genpareto(found.shape + j * h, THRESHOLD, found.scale + i * h)
        return -law.logpdf(x).sum()

    both = (value(1, 1) - value(1, -1) - value(-1, 1) + value(-1, -1)) / 4.0
    scale, shape = (value(i, j) - 2.0 * value(0, 0) + value(-i, -j) for i, j in ((1, 0), (0, 1)))
    information = np.array([[scale, both], [both, shape]]) / h**2
    np.testing.assert_allclose(found.covariance, np.linalg.inv(information), rtol=1e-4)
    assert found.standard_errors["rate"] == pytest.approx(math.sqrt(200) / 40)


def test_no_unit_and_no_order():
    x = excesses()
    found, scaled = fit_excesses(x, THRESHOLD), fit_excesses(1e-6 * x[::-1], 1e-6 * THRESHOLD)
    assert scaled.shape == pytest.approx(found.shape, abs=1e-8)
    assert scaled.scale == pytest.approx(1e-6 * found.scale, rel=1e-8)


def test_doubts():
    assert codes(fit_excesses(excesses(0.4, n=19), THRESHOLD)) == ["few-excesses", "shape-sign"]
    assert codes(fit_excesses(excesses(0.4), THRESHOLD)) == []
    bounded = fit_excesses(excesses(-0.8, n=200), THRESHOLD)
    assert codes(bounded) == ["not-regular"]
    assert np.isnan(bounded.covariance).all()


def test_exponential_excesses():
    x = excesses(shape=0.0)
    found = fit_exponential_excesses(x, THRESHOLD, years=40.0)
    scale = np.mean(x - THRESHOLD)
    assert (found.shape, found.scale) == (0.0, pytest.approx(scale, rel=1e-14))
    assert found.log_likelihood == pytest.approx(stats.expon(THRESHOLD, scale).logpdf(x).sum(), rel=1e-12)
    assert found.shape_interval == (0.0, 0.0)
    assert found.upper_end == math.inf
    # The level is linear in the scale, whose profile is 2 n (ln s + 1/s - 1) with s over its estimate.
    statistic = stats.chi2(1).ppf(0.95) / (2.0 * x.size)
    ends = [
        optimize.brentq(lambda s: math.log(s) + 1.0 / s - 1.0 - statistic, *b) for b in ((0.3, 1), (1, 3))
    ]
    level = float(found.level(100.0)) - THRESHOLD
    assert level == pytest.approx(scale * math.log(5.0 * 100.0), rel=1e-12)
    assert level_interval(found, 100.0) == pytest.approx([THRESHOLD + s * level for s in ends], rel=1e-7)


def test_upper_end_and_interval_of_the_shape():
    found = fit_excesses(excesses(shape=-0.3), THRESHOLD)
    assert found.upper_end == pytest.approx(THRESHOLD + found.scale / -found.shape)
    assert float(found.exceedance(found.upper_end)) == 0.0
    half = stats.norm.ppf(0.975) * found.standard_errors["shape"]
    assert found.shape_interval == pytest.approx((found.shape - half, found.shape + half), rel=1e-12)


def test_level_and_its_intervals():
    x = excesses()
    found = fit_excesses(x, THRESHOLD, years=40.0)
    expected = THRESHOLD + found.scale / found.shape * ((5.0 * 100.0) ** found.shape - 1.0)
    assert float(found.level(100.0)) == pytest.approx(expected, rel=1e-12)

    def moved(scale, shape, rate):
        return THRESHOLD + scale / shape * ((rate * 100.0) ** shape - 1.0)

    at, h = np.array([found.scale, found.shape, 5.0]), 1e-5
    slope = np.array([(moved(*(at + h * e)) - moved(*(at - h * e))) / (2 * h) for e in np.eye(3)])
    variance = slope[:2] @ found.covariance @ slope[:2] + (slope[2] * found.standard_errors["rate"]) ** 2
    assert float(found.level_error(100.0)) == pytest.approx(math.sqrt(variance), rel=1e-6)

    def most(level):
        def cost(shape):
            scale = (level - THRESHOLD) * shape / (500.0**shape - 1.0)
            return -stats.genpareto(shape, THRESHOLD, scale).logpdf(x).sum()

        return -optimize.minimize_scalar(cost, bounds=(-0.2, 0.8), method="bounded").fun

    ends = level_interval(found, 100.0)
    assert ends[0] < expected < ends[1]
    for end in ends:
        assert most(end) == pytest.approx(found.log_likelihood - 0.5 * 3.841459, abs=1e-4)


# The maximum of a period ------------------------------


@pytest.mark.parametrize("shape", [-0.2, -1e-9, 0.0, 0.3])
@pytest.mark.parametrize("years", [1.0, 50.0])
def test_annual_maximum_against_the_poisson_process(shape, years):
    found = annual_maximum(4.0, THRESHOLD, 2.0, shape, years)
    x = np.array([THRESHOLD, 13.0, 16.0, 20.0])
    expected = -4.0 * years * stats.genpareto(shape, THRESHOLD, 2.0).sf(x)
    np.testing.assert_allclose(found.distribution.logcdf(x), expected, rtol=1e-7)
    assert found.mass_below == pytest.approx(math.exp(-4.0 * years))
    assert float(found.distribution.cdf(THRESHOLD)) == pytest.approx(found.mass_below, rel=1e-6)


def test_annual_maximum_given_an_exceedance():
    found = annual_maximum(0.5, THRESHOLD, 2.0, 0.1)
    assert codes(found) == ["seldom-exceeded"]
    rng = np.random.default_rng(2)
    counts = rng.poisson(0.5, 40_000)
    counts = counts[counts > 0]
    maxima = THRESHOLD + stats.genpareto(0.1, 0.0, 2.0).ppf(rng.uniform(size=counts.size) ** (1.0 / counts))
    assert stats.kstest(maxima, found.conditional_cdf).pvalue > 0.01
    p = np.array([0.0, 0.2, 0.999])
    np.testing.assert_allclose(found.conditional_cdf(found.conditional_ppf(p)), p, atol=1e-12)
    assert float(found.conditional_ppf(0.0)) == pytest.approx(THRESHOLD)


def test_block_maxima_and_thresholds_agree():
    """80 years of about eight storms each: one parent, two roads to its annual maximum and its 100-year level."""
    rng = np.random.default_rng(11)
    counts = rng.poisson(8.0, 80)
    storms = [THRESHOLD + rng.exponential(2.0, n) for n in counts]
    over = fit_excesses(np.concatenate(storms), THRESHOLD, years=80.0)
    truth = annual_maximum(8.0, THRESHOLD, 2.0, 0.0)
    assert truth.distribution.family.name == "gumbel"
    blocks = fit_maxima([s.max() for s in storms], "gumbel")
    table = return_levels(blocks, [100.0])
    for level in (float(over.level(100.0)), float(truth.distribution.isf(0.01))):
        assert table.lower[0] < level < table.upper[0]
    assert abs(float(over.level(100.0)) - table.levels[0]) < 2.0 * float(over.level_error(100.0))
    year = over.maximum().distribution
    assert float(year.mean) == pytest.approx(float(blocks.distribution.mean), rel=0.02)
    assert float(year.ppf(0.5)) == pytest.approx(float(truth.distribution.ppf(0.5)), rel=0.02)


# Clusters ------------------------------


def test_clusters_by_runs():
    values = [1.0, 5.0, 2.0, 1.0, 1.0, 7.0, 8.0, 1.0, 8.0]
    found = decluster(values, np.arange(9.0), 1.5, 2.0)
    assert found.peaks.tolist() == [5.0, 8.0]
    assert found.times.tolist() == [1.0, 6.0]
    assert (found.begins.tolist(), found.ends.tolist()) == ([1.0, 5.0], [2.0, 8.0])
    assert found.sizes.tolist() == [2, 3]
    assert found.extremal_index == pytest.approx(0.4)


@pytest.mark.parametrize(
    ("run_length", "peaks"), [(0.0, [5.0, 2.0, 7.0, 8.0]), (1.0, [5.0, 8.0]), (9.0, [8.0])]
)
def test_run_length(run_length, peaks):
    order = [3, 0, 5, 1, 2, 4]
    values, times = np.array([5.0, 2.0, 1.0, 1.0, 7.0, 8.0]), np.arange(6.0)
    assert decluster(values[order], times[order], 1.5, run_length).peaks.tolist() == peaks


def test_clusters_of_a_process_with_known_extremal_index():
    """Maxima of two successive Frechet values: extremal index 1/2 (Coles 2001, example 5.1, from memory)."""
    z = stats.invweibull(1.0).rvs(40_001, random_state=np.random.default_rng(4))
    x = np.maximum(z[1:], z[:-1])
    found = decluster(x, np.arange(x.size), np.quantile(x, 0.99), 1.0)
    assert found.extremal_index == pytest.approx(0.5, abs=0.03)


def test_dispersion():
    counts = np.array([3, 5, 4, 9, 1, 2, 4, 6])
    index, p_value = dispersion(counts)
    assert index == pytest.approx(counts.var(ddof=1) / counts.mean())
    assert p_value == pytest.approx(2.0 * stats.chi2.sf(7 * index, 7))
    assert dispersion([4, 4, 4, 4])[1] == 0.0


# Choice of the threshold ------------------------------


def test_mean_residual_life():
    x = excesses(0.2, n=5000)
    found = mean_residual_life(x, [12.0, 14.0, 18.0])
    over = x[x > 14.0] - 14.0
    assert (found.mean[1], found.count[1]) == (pytest.approx(over.mean()), over.size)
    half = 1.959964 * over.std(ddof=1) / math.sqrt(over.size)
    assert (found.lower[1], found.upper[1]) == pytest.approx(
        (over.mean() - half, over.mean() + half), rel=1e-6
    )
    truth = (2.0 + 0.2 * (found.thresholds - THRESHOLD)) / (1.0 - 0.2)  # straight, slope shape/(1 - shape)
    assert np.all((found.lower < truth) & (truth < found.upper))


def test_stability():
    x = excesses(0.2, n=2000)
    found = stability(x, [12.0, 13.0, 15.0])
    assert found.reasons == ("", "", "")
    for estimate, (lower, upper), truth in (
        (found.shape, found.shape_interval, 0.2),
        (found.modified_scale, found.modified_scale_interval, 2.0 - 0.2 * THRESHOLD),
    ):
        assert np.all((lower < truth) & (truth < upper) & (lower < estimate) & (estimate < upper))
    one = fit_excesses(x, 13.0)
    assert (found.shape[1], found.count[1]) == (one.shape, one.n)
    assert found.modified_scale[1] == pytest.approx(one.scale - 13.0 * one.shape)


def test_stability_tells_where_there_is_no_fit():
    x = np.concatenate([excesses(n=50), [99.0, 99.5, 99.9]])
    found = stability(x, [THRESHOLD, 90.0])
    assert found.reasons[0] == ""
    assert "no maximum" in found.reasons[1]
    assert np.isnan(found.shape_interval[:, 1]).all()


def test_thresholds_chosen_by_themselves():
    x = np.round(excesses(n=300), 2)
    found = mean_residual_life(x)
    assert found.thresholds.size == 50
    assert found.thresholds[0] == x.min()
    assert (found.count[-1], found.count[0]) == (np.sum(x > found.thresholds[-1]), np.sum(x > x.min()))
    assert found.count[-1] >= 10


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: fit_excesses([13.0, 14.0, 1.0], THRESHOLD), "2 of 3 values exceed the threshold 12"),
        (lambda: fit_excesses([13.0] * 5, THRESHOLD), "All 5 excesses"),
        (lambda: fit_excesses(excesses(), math.inf), "finite number"),
        (lambda: fit_excesses(excesses(), THRESHOLD, years=0.0), "length of a record"),
        (lambda: fit_excesses(excesses(), THRESHOLD).level(50.0), "give its years"),
        (lambda: fit_excesses(excesses(), THRESHOLD, years=40.0).level(0.1), "more than 0.2 years"),
        (lambda: level_interval(fit_excesses(excesses(), THRESHOLD, years=40.0), 50.0, 2.0), "confidence"),
        (lambda: annual_maximum(-1.0, 0.0, 0.0, math.nan), "The rate must be a positive"),
        (lambda: decluster([1.0], [1.0, 2.0], 0.0, 1.0), "1 values and 2 times"),
        (lambda: decluster([1.0], [1.0], 0.0, -1.0), "run length"),
        (lambda: decluster([1.0], [1.0], 5.0, 1.0), "None of the 1 values"),
        (lambda: dispersion([1.5, 2.0]), "whole numbers"),
        (lambda: mean_residual_life(np.arange(9.0)), "too few to choose"),
        (lambda: mean_residual_life(excesses(), [99.0]), "0 of 200 values"),
        (lambda: stability(excesses(), confidence=0.0), "confidence"),
    ],
)
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()


def test_all_problems_of_a_period_at_once():
    with pytest.raises(InputError) as refused:
        annual_maximum(-1.0, 0.0, 0.0, math.nan)
    assert [p.message.split()[1] for p in refused.value.problems] == ["rate", "scale", "shape"]
