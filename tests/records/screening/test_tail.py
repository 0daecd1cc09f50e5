"""Bent lower tails: level in ordinary samples, power, invariance."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.screening.tail import LEAST, lower_tail

LAWS = {
    "normal": stats.norm(10.0, 1.0),
    "lognormal": stats.lognorm(0.2, 0.0, 10.0),
    "weibull": stats.weibull_min(6.2, 0.0, 98.0),
    "gumbel": stats.gumbel_r(10.0, 1.5),
}


def two_populations(rng, n, share, weaker):
    """Weibull with a second, weaker population: brittle material with damaged specimens."""
    x = 98.0 * rng.weibull(6.2, n)
    damaged = rng.random(n) < share
    return np.where(damaged, weaker * rng.weibull(6.0, n), x)


@pytest.mark.parametrize("n", [12, 60, 400])
@pytest.mark.parametrize("paper", LAWS)
def test_level_in_ordinary_samples(paper, n):
    rng = np.random.default_rng(n)
    repeats = 300
    found = [lower_tail(x) for x in LAWS[paper].rvs((repeats, n), random_state=rng)]
    p = np.array([k.p_value for f in found for k in f.knees if k.paper == paper])
    margin = np.sqrt(0.05 * 0.95 * (1.0 / repeats + 1.0 / 999.0))
    assert np.mean(p < 0.05) == pytest.approx(0.05, abs=3.5 * margin)
    assert np.mean(p) == pytest.approx(0.5, abs=4.0 * np.sqrt((1.0 / repeats + 1.0 / 999.0) / 12.0))
    assert np.mean([f.bent for f in found]) <= 0.05 + 3.0 * margin


@pytest.mark.parametrize(("n", "share", "weaker", "least"), [(60, 0.12, 30.0, 0.8), (180, 0.12, 45.0, 0.9)])
def test_a_second_population_is_found(n, share, weaker, least):
    rng = np.random.default_rng(1)
    found = [lower_tail(two_populations(rng, n, share, weaker)) for _ in range(40)]
    assert np.mean([f.bent for f in found]) >= least
    bent = [f for f in found if f.bent]
    assert all(k.slope_ratio > 1.25 for f in bent for k in f.knees)


def test_the_knee_lies_between_the_populations():
    x = two_populations(np.random.default_rng(3), 2000, 0.2, 25.0)
    found = lower_tail(x)
    assert found.bent
    weibull = next(k for k in found.knees if k.paper == "weibull")
    assert 0.15 < weibull.share < 0.35
    assert 25.0 < weibull.value < 98.0
    assert found.straightest.aic_gain > 0.0


def test_a_proof_loaded_sample_has_a_thin_tail():
    x = np.random.default_rng(2).normal(10.0, 1.0, 600)
    found = lower_tail(x[x > 9.0])
    assert found.bent
    assert all(k.slope_ratio < 0.8 for k in found.knees)


def test_exact_quantiles_lie_on_one_line():
    for paper, law in LAWS.items():
        found = lower_tail(law.ppf((np.arange(80) + 0.5) / 80))
        knee = next(k for k in found.knees if k.paper == paper)
        assert knee.p_value == 1.0
        assert knee.slope_ratio == pytest.approx(1.0, abs=1e-6)
        assert knee.aic_gain == pytest.approx(-4.0, abs=1e-6)
        assert not found.bent


def test_two_exact_lines_meet_where_they_meet():
    z = stats.norm.ppf((np.arange(60) + 0.5) / 60)
    knee_at = 20
    x = 50.0 + 2.0 * (z - z[knee_at]) + 4.0 * np.minimum(z - z[knee_at], 0.0)
    knee = next(k for k in lower_tail(x).knees if k.paper == "normal")
    assert knee.value == pytest.approx(50.0, rel=1e-9)
    assert knee.slope_ratio == pytest.approx(3.0, rel=1e-9)
    assert knee.share == pytest.approx((knee_at + 0.5) / 60)


@pytest.mark.parametrize("x", [np.arange(1.0, LEAST), np.full(50, 3.0)])
def test_nothing_to_see(x):
    assert lower_tail(x) is None


def test_values_that_are_not_positive_need_no_logarithms():
    x = np.random.default_rng(1).normal(size=40)
    assert [k.paper for k in lower_tail(x).knees] == ["normal", "gumbel"]


def test_the_seed_decides_and_nothing_else():
    x = LAWS["weibull"].rvs(40, random_state=1)
    assert lower_tail(x, seed=1) == lower_tail(x, seed=1)
    assert lower_tail(x, seed=1) != lower_tail(x, seed=2)


@settings(max_examples=15)
@given(
    st.integers(12, 150), st.integers(0, 100), st.sampled_from([1e-3, 1e3]), st.randoms(use_true_random=False)
)
def test_scale_and_order_do_not_matter(n, seed, factor, random):
    x = LAWS["weibull"].rvs(n, random_state=seed)
    order = list(range(n))
    random.shuffle(order)
    a, b = lower_tail(x), lower_tail(x[order] * factor)
    for p, q in zip(a.knees, b.knees, strict=True):
        assert (p.paper, p.share) == (q.paper, q.share)
        np.testing.assert_allclose(
            [q.value, q.slope_ratio, q.aic_gain, q.p_value],
            [p.value * factor, p.slope_ratio, p.aic_gain, p.p_value],
            rtol=1e-6,
            atol=1e-8,
        )
