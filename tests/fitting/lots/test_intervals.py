"""Profile intervals: against nested optimisation of the dense likelihood, and by simulation."""

import math

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.fitting.lots import lot_scatter

CASES = {
    "lots matter": ([9, 3, 1, 5, 7, 12], 1.5, 0.8, 2),
    "lots hardly matter": ([4, 6, 2, 8, 5], 0.2, 1.0, 1),
    "two lots": ([6, 3], 2.0, 1.0, 4),
    "little within": ([3, 3, 4, 2], 5.0, 0.1, 7),
}


@pytest.fixture(params=CASES)
def sample(request, simulate):
    sizes, between, within, seed = CASES[request.param]
    return simulate(np.random.default_rng(seed), sizes, between, within)


def best_along(sample, dense_log_likelihood, sds, around):
    """Return the largest log-likelihood on a line: sds(v) gives both sds for one free sd v."""
    found = optimize.minimize_scalar(
        lambda v: -dense_log_likelihood(sample.values, sample.lots, *sds(math.exp(v))),
        bounds=(math.log(around) - 6, math.log(around) + 6),
        method="bounded",
        options={"xatol": 1e-9},
    )
    return -found.fun


@pytest.mark.parametrize("level", [0.5, 0.9, 0.99])
def test_profile_falls_by_half_the_chi_squared_fractile_at_the_ends(sample, dense_log_likelihood, level):
    found = lot_scatter(sample.values, sample.lots, level=level)
    target = found.log_likelihood - 0.5 * stats.chi2.ppf(level, 1)
    lines = {
        "between": (found.between_interval, lambda b: lambda v: (b, v), found.within_sd),
        "within": (found.within_interval, lambda w: lambda v: (v, w), max(found.between_sd, found.se_mean)),
        "intraclass": (
            found.intraclass_interval,
            lambda p: lambda v: (v * math.sqrt(p), v * math.sqrt(1 - p)),
            found.total_sd,
        ),
    }
    for name, (interval, fixed, around) in lines.items():
        for end in interval:
            height = best_along(sample, dense_log_likelihood, fixed(end), around)
            if end > 0.0:
                assert height == pytest.approx(target, abs=2e-5), (name, end)
            else:
                assert height >= target, name


def test_wider_at_higher_level(uneven):
    narrow, wide = (lot_scatter(uneven.values, uneven.lots, level=p) for p in (0.5, 0.95))
    for kind in ("between_interval", "within_interval", "intraclass_interval"):
        (a, b), (c, d) = getattr(wide, kind), getattr(narrow, kind)
        assert a < c < d < b


def test_one_lot_is_an_ordinary_sample():
    x = np.array([3.0, 4.5, 4.0, 7.0, 5.5])
    found = lot_scatter(x, ["a"] * 5)
    drop = [
        2 * math.log(end / found.within_sd) + (found.within_sd / end) ** 2 - 1
        for end in found.within_interval
    ]
    assert drop == pytest.approx([stats.chi2.ppf(0.9, 1) / 4] * 2, rel=1e-12)


@pytest.mark.parametrize(("sizes", "share"), [([6, 4, 8, 5] * 3, 0.5), ([3, 10, 5, 2, 7], 0.8)])
def test_intervals_cover_as_often_as_they_claim(simulate, sizes, share):
    rng = np.random.default_rng(11)
    between, within, samples = math.sqrt(share), math.sqrt(1 - share), 200
    covered = np.zeros(3, dtype=int)
    for _ in range(samples):
        sample = simulate(rng, sizes, between, within)
        found = lot_scatter(sample.values, sample.lots)
        intervals = (found.between_interval, found.within_interval, found.intraclass_interval)
        covered += [
            low <= true <= high for (low, high), true in zip(intervals, (between, within, share), strict=True)
        ]
    for count in covered:
        assert stats.binomtest(int(count), samples, 0.9).pvalue > 0.003


def test_intervals_cover_more_than_they_claim_where_lots_do_not_scatter(simulate):
    rng = np.random.default_rng(12)
    excluded = sum(
        lot_scatter(s.values, s.lots).intraclass_interval[0] > 0.0
        for s in (simulate(rng, [6, 4, 8, 5, 3, 9], 0.0, 1.0) for _ in range(200))
    )
    assert 1 <= excluded <= 20  # about half of one tenth at the edge of the parameter space
