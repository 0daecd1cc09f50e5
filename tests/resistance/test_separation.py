"""Known scatter taken out of observed scatter: closed forms of chi-square, and simulated tests with known parts."""

import math

import numpy as np
import pytest
from scipy import special, stats

from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.resistance import separate_scatter

KNOWN = {"measurement": 0.03, "material": 0.05}
KNOWN_LOG = math.log1p(0.03**2) + math.log1p(0.05**2)


def separated(observed=0.10, freedom=19, known=KNOWN, seed=3, **more):
    return separate_scatter(observed, freedom, known, stream(seed, "separation"), **more)


def test_variances_subtract_by_hand():
    found = separated()
    expected = 1.01 / (1.0009 * 1.0025) - 1.0
    assert found.cov_squared == pytest.approx(expected, rel=1e-12)
    assert found.cov == pytest.approx(math.sqrt(expected), rel=1e-12)
    assert found.cov_squared_first_order == pytest.approx(0.01 - 0.0009 - 0.0025, rel=1e-12)
    assert found.log_variance == pytest.approx(math.log1p(expected), rel=1e-12)
    assert found.known_cov == pytest.approx(math.sqrt(1.0009 * 1.0025 - 1.0), rel=1e-12)
    assert found.doubts == ()


def test_the_parts_put_together_again_are_the_whole():
    # A lognormal product of model, measurement and material has the observed scatter.
    found = separated()
    rng = stream(4, "product")
    parts = [found.cov, 0.03, 0.05]
    z = sum(math.sqrt(math.log1p(v**2)) * rng.standard_normal(400_000) for v in parts)
    product = np.exp(z)
    assert product.std() / product.mean() == pytest.approx(0.10, rel=4 / math.sqrt(2 * 400_000))


@pytest.mark.parametrize("observed", [0.06, 0.10])
def test_interval_and_probability_against_chi_square(observed):
    replicates = 200_000
    found = separated(observed, replicates=replicates)
    variance = math.log1p(observed**2)
    for value, tail in zip(found.interval, (0.05, 0.95), strict=True):
        exact = math.expm1(variance * 19 / special.chdtri(19, tail) - KNOWN_LOG)
        # chdtri takes the upper tail: the lower end of the variance is the upper quantile of chi-square.
        slope = stats.chi2.pdf(special.chdtri(19, tail), 19) * special.chdtri(19, tail) ** 2 / (variance * 19)
        error = math.sqrt(0.05 * 0.95 / replicates) / slope
        assert value == pytest.approx(exact, abs=4 * error)
    negative = special.chdtrc(19, variance * 19 / KNOWN_LOG)
    error = math.sqrt(negative * (1 - negative) / replicates)
    assert found.probability_negative == pytest.approx(negative, abs=4 * error + 1e-12)


def test_the_interval_holds_the_true_scatter_as_often_as_it_says():
    true = 0.08
    total = math.log1p(true**2) + KNOWN_LOG
    inside = 0
    for i in range(500):
        rng = stream(5, "coverage", i)
        variance = float(np.var(rng.normal(0.0, math.sqrt(total), 12), ddof=1))
        found = separate_scatter(math.sqrt(math.expm1(variance)), 11, KNOWN, rng, level=0.9, replicates=2000)
        inside += found.interval[0] <= true**2 <= found.interval[1]
    assert inside / 500 == pytest.approx(0.9, abs=4 * math.sqrt(0.09 / 500))


def test_a_negative_remainder_is_kept_and_doubted():
    found = separated(0.04)
    assert found.cov_squared == pytest.approx(1.0016 / (1.0009 * 1.0025) - 1.0, rel=1e-10)
    assert found.cov_squared < 0.0
    assert found.cov_squared_first_order == pytest.approx(0.0016 - 0.0034, rel=1e-12)
    assert math.isnan(found.cov)
    assert found.interval[0] < found.cov_squared < found.interval[1]
    assert found.probability_negative > 0.9
    (doubt,) = found.doubts
    assert doubt.code == "negative-model-scatter"
    assert f"{found.cov_squared:.3g}" in doubt.message


def test_scatter_that_may_be_nothing_is_doubted():
    found = separated(0.065)
    assert found.cov_squared > 0.0 > found.interval[0]
    assert [d.code for d in found.doubts] == ["model-scatter-not-shown"]


def test_a_hopeless_case_says_so():
    found = separated(0.01, 60)
    assert found.interval[1] < 0.0
    assert "look for the mistake" in found.doubts[0].message


def test_uncertain_known_parts_widen_the_interval():
    exact = separated()
    uncertain = separated(known_freedom={"material": 4})
    assert uncertain.cov_squared == exact.cov_squared
    assert uncertain.interval[0] < exact.interval[0]
    # Many degrees of freedom are as good as exact knowledge.
    sure = separated(known_freedom={"material": 1e7})
    np.testing.assert_allclose(sure.interval, exact.interval, rtol=0.03)


def test_no_known_part_leaves_the_observed_scatter():
    found = separated(known={})
    assert found.cov == pytest.approx(0.10, rel=1e-12)
    assert found.probability_negative == 0.0


def test_one_seed_gives_one_answer():
    assert separated().interval == separated().interval
    assert separated().interval != separated(seed=4).interval


def test_all_wrong_arguments_are_told_at_once():
    with pytest.raises(InputError) as caught:
        separated(0.0, 0.0, {"a": -0.1}, known_freedom={"b": 3, "a": 0}, level=1.0, replicates=5)
    assert len(caught.value.problems) == 7
