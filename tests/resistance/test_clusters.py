"""Clusters of tests: balanced closed forms, leave-one-cluster-out, planted effects."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting.lots import lot_scatter
from calibrate.resistance import FractileFactor, cluster_effects


def sample(k=9, m=8, between=0.15, within=0.24, seed=3):
    rng = np.random.default_rng(seed)
    clusters = np.repeat([f"site {i + 1}" for i in range(k)], m)
    return np.exp(0.07 + np.repeat(rng.normal(0.0, between, k), m) + rng.normal(0.0, within, k * m)), clusters


def test_balanced_clusters_follow_the_analysis_of_variance():
    k, m = 6, 5
    delta, clusters = sample(k, m, between=0.3)
    y = np.log(delta).reshape(k, m)
    msb = m * y.mean(axis=1).var(ddof=1)
    msw = y.var(axis=1, ddof=1).mean()
    assert msb > msw
    between = (msb - msw) / m
    total = between + msw
    effective = total / (msb / (k * m))
    found = cluster_effects(delta, clusters, design=FractileFactor.predictive(0.001))
    assert found.share_between == pytest.approx(between / total, rel=1e-8)
    assert found.effective_n == pytest.approx(effective, rel=1e-8)
    assert found.b == pytest.approx(math.exp(y.mean() + total / 2), rel=1e-8)
    assert found.cov == pytest.approx(math.sqrt(math.expm1(total)), rel=1e-8)
    k_d = FractileFactor.predictive(0.001).estimated(effective)
    assert found.design == pytest.approx(math.exp(y.mean() - k_d * math.sqrt(total)), rel=1e-7)
    assert found.partial_factor == pytest.approx(math.exp((k_d - 1.645) * math.sqrt(total)), rel=1e-7)
    assert found.pooled_cov == pytest.approx(math.sqrt(math.expm1(y.var(ddof=1))), rel=1e-12)


def test_without_scatter_between_clusters_the_pooled_numbers_return():
    delta, clusters = sample(5, 6, between=0.0, seed=6)
    # Cluster means brought together: the restricted likelihood is largest at no scatter between them.
    y = np.log(delta).reshape(5, 6)
    delta = np.exp(y - y.mean(axis=1, keepdims=True)).ravel()
    found = cluster_effects(delta, clusters)
    assert found.share_between == 0.0
    assert found.effective_n == pytest.approx(30.0)
    assert (found.b, found.cov, found.design) == pytest.approx(
        (found.pooled_b, found.pooled_cov, found.pooled_design), rel=1e-12
    )


def test_leaving_out_each_cluster_is_recomputed():
    delta, clusters = sample(4, 6)
    found = cluster_effects(delta, clusters)
    assert found.names == ("site 1", "site 2", "site 3", "site 4")
    for i, name in enumerate(found.names):
        rest = clusters != name
        alone = lot_scatter(delta[rest], clusters[rest], scale="logarithmic")
        q = alone.total_sd
        expected = [
            math.exp(alone.mean + q * q / 2),
            math.sqrt(math.expm1(q * q)),
            math.exp(alone.mean - 3.04 * q),
        ]
        mine = [found.left_out_b[i], found.left_out_cov[i], found.left_out_design[i]]
        assert mine == pytest.approx(expected, rel=1e-12)
        assert found.left_out_factor[i] == pytest.approx(math.exp((3.04 - 1.645) * q), rel=1e-12)


def test_clusters_may_be_numbers_in_any_order():
    delta, clusters = sample(4, 6)
    numbers = np.array([float(c.split()[1]) for c in clusters])
    order = np.random.default_rng(0).permutation(24)
    found = cluster_effects(delta[order], numbers[order])
    plain = cluster_effects(delta, clusters)
    by_name = dict(zip(found.names, found.left_out_cov, strict=True))
    expected = dict(zip((c.split()[1] for c in plain.names), plain.left_out_cov, strict=True))
    assert by_name == pytest.approx(expected, rel=1e-9)


def test_two_clusters_leave_one_whose_total_scatter_is_unknown():
    delta, clusters = sample(2, 8)
    found = cluster_effects(delta, clusters)
    assert np.isfinite(found.left_out_b).all()
    assert np.isnan(found.left_out_cov).all()
    (doubt,) = [d for d in found.doubts if d.code == "few-clusters"]
    assert "only 2 clusters: the scatter between clusters" in doubt.message
    assert "lot" not in doubt.message


def test_planted_scatter_between_clusters_is_recovered():
    # Many clusters: the mean over 40 samples of the restricted estimates of the variances is within four of its own
    # standard errors (restricted estimates of balanced data are unbiased where none is cut off at zero).
    found = [cluster_effects(*sample(9, 6, seed=s)).scatter for s in range(40)]
    for values, truth in (
        ([f.between_sd**2 for f in found], 0.15**2),
        ([f.within_sd**2 for f in found], 0.24**2),
    ):
        assert abs(np.mean(values) - truth) < 4.0 * np.std(values, ddof=1) / math.sqrt(40)


def test_predicted_share_below_the_characteristic_value():
    # True scatter 0.25 between and 0.10 within 6 clusters of 5: over 120 samples a test of a new cluster falls below
    # r_k with 5 % within four standard errors; taken as 30 independent tests it does so far too often.
    k, q, below, pooled = FractileFactor.predictive(0.05), math.hypot(0.25, 0.10), [], []
    for seed in range(120):
        delta, clusters = sample(6, 5, between=0.25, within=0.10, seed=seed)
        found = cluster_effects(delta, clusters, characteristic=k)
        y = np.log(delta)
        below.append(stats.norm.cdf((math.log(found.characteristic) - 0.07) / q))
        pooled.append(stats.norm.cdf((y.mean() - k.estimated(30) * y.std(ddof=1) - 0.07) / q))
    error = np.std(below, ddof=1) / math.sqrt(120)
    assert abs(np.mean(below) - 0.05) < 4.0 * error
    assert np.mean(pooled) > 0.05 + 4.0 * np.std(pooled, ddof=1) / math.sqrt(120)


def test_a_deviant_cluster_is_named():
    delta, clusters = sample(6, 6, between=0.02, within=0.05)
    delta = np.where(clusters == "site 4", 0.6 * delta, delta)
    (doubt,) = [d for d in cluster_effects(delta, clusters).doubts if d.code == "one-cluster-sways"]
    assert "Without cluster 'site 4'" in doubt.message
    assert "higher" in doubt.message
    (doubt,) = [d for d in cluster_effects(delta, clusters).doubts if d.code == "clusters-matter"]
    assert "Tests of one cluster are not independent" in doubt.message


def test_wrong_input_is_refused():
    delta, clusters = sample(2, 4)
    with pytest.raises(
        InputError, match=r"All 8 tests come from one cluster, 'A': they cannot tell the scatter"
    ):
        cluster_effects(delta, ["A"] * 8)
    with pytest.raises(InputError, match="delta: must be finite and above zero"):
        cluster_effects(np.append(delta[:-1], 0.0), clusters)
    with pytest.raises(InputError, match="each specimen needs one lot"):
        cluster_effects(delta, clusters[:-1])
    with pytest.raises(InputError, match="Without cluster 'B' there is no scatter left"):
        cluster_effects([1.0, 1.1, 1.2], ["A", "B", "B"])
