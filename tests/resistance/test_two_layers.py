"""A model factor in two layers."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.resistance import FractileFactor, layer, two_layers


def test_product_of_two_lognormal_factors():
    rng = np.random.default_rng(1)
    runs, tests = rng.lognormal(0.05, 0.06, 900), rng.lognormal(-0.02, 0.09, 12)
    found = two_layers(layer(runs, "numerical"), layer(tests, "physical"))
    a, c = np.log(runs), np.log(tests)
    variance = a.var(ddof=1) + c.var(ddof=1)
    assert found.log_mean == pytest.approx(a.mean() + c.mean(), rel=1e-12)
    assert found.b == pytest.approx(math.exp(found.log_mean + variance / 2), rel=1e-12)
    # Coefficients of variation of a product of independent factors: 1 + V² multiply.
    v = [math.expm1(x.var(ddof=1)) for x in (a, c)]
    assert 1 + found.cov**2 == pytest.approx((1 + v[0]) * (1 + v[1]), rel=1e-12)
    assert found.effective_n == pytest.approx(
        variance / (a.var(ddof=1) / 900 + c.var(ddof=1) / 12), rel=1e-12
    )
    # The freedom of a sum of two variances is that of Welch's test, for samples whose means have these variances.
    welch = stats.ttest_ind(np.repeat(0.0, 900) + a * math.sqrt(900), c * math.sqrt(12), equal_var=False).df
    assert found.freedom == pytest.approx(welch, rel=1e-10)
    assert found.n_in_factors < 30
    assert found.share_physical == pytest.approx(c.var(ddof=1) / variance)
    assert found.closed_form.design[0] == pytest.approx(math.exp(found.log_mean - 3.04 * math.sqrt(variance)))
    assert "12 physical tests" in found.doubts[0].message


def test_thousands_of_runs_do_not_make_up_for_few_physical_tests():
    physical = layer([0.9, 1.0, 1.05, 1.12, 0.97, 1.08], "physical")
    exact = layer(np.exp(np.linspace(-0.01, 0.01, 10001)), "numerical")
    found = two_layers(exact, physical)
    assert found.effective_n == pytest.approx(6.0, rel=0.02)
    assert found.freedom == pytest.approx(5.0, rel=0.03)


def test_predicted_share_below_the_characteristic_value():
    # 2000 pairs of samples, true sds 0.08 and 0.10: on average a further test falls below r_k with about 5 %. The
    # combined freedom is approximate, so 1 % is allowed besides four standard errors.
    rng = np.random.default_rng(8)
    k = FractileFactor.predictive(0.05)
    below = []
    for _ in range(2000):
        parts = two_layers(
            layer(rng.lognormal(0.0, 0.08, 40), "numerical"), layer(rng.lognormal(0.0, 0.10, 8), "physical"),
            characteristic=k,
        )  # fmt: skip
        below.append(stats.norm.cdf(math.log(parts.closed_form.characteristic[0]) / math.hypot(0.08, 0.10)))
    error = np.std(below) / math.sqrt(2000)
    assert abs(np.mean(below) - 0.05) < 0.01 + 4 * error
    assert np.mean(below) < 0.06


def test_clusters_in_a_layer_count_by_their_effective_number():
    rng = np.random.default_rng(2)
    sites = np.repeat(np.arange(5), 6)
    delta = np.exp(np.repeat(rng.normal(0, 0.2, 5), 6) + rng.normal(0, 0.1, 30))
    found = layer(delta, "physical", sites)
    assert found.n == 30
    assert 5 <= found.effective_n < 12
    assert found.freedom == pytest.approx(found.effective_n - 1)
    with pytest.raises(InputError, match="come from one cluster, '0'"):
        layer(delta[:6], "physical", sites[:6])


def test_layers_without_scatter_are_refused():
    still = layer([1.0, 1.0], "numerical")
    with pytest.raises(InputError, match="Neither layer"):
        two_layers(still, still)
