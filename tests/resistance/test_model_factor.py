"""b and the errors against a worked example; the censored estimate against scipy and against likelihood by hand."""

import math

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.resistance import ComponentTests, censored_model_factor, model_factor
from calibrate.resistance.model_factor import errors_of, normality_of

# Twelve invented tests; the expected numbers were computed for the formulas of EN 1990:2002, D.8.2 (from memory) with
# 30 digits by separate code, and once more in double precision.
PREDICTED = [102.4, 118.9, 131.5, 145.0, 150.2, 163.7, 178.1, 185.6, 199.3, 214.8, 226.0, 241.7]
EXPERIMENTAL = [110.3, 121.6, 146.9, 150.8, 169.4, 171.2, 201.9, 196.0, 224.7, 229.5, 257.6, 261.2]


def example(**more):
    return ComponentTests(EXPERIMENTAL, PREDICTED, **more)


def test_the_steps_of_a_worked_example():
    found = model_factor(example())
    assert found.b == pytest.approx(1.0918925971, rel=1e-9)
    assert found.log_mean == pytest.approx(-0.00571333120, rel=1e-8)
    assert found.log_variance == pytest.approx(0.001440964080, rel=1e-8)
    assert found.cov == pytest.approx(0.0379737115, rel=1e-8)
    assert found.correlation == pytest.approx(0.9912027273, rel=1e-9)
    assert found.doubts == ()


def test_b_is_the_least_squares_slope_through_the_origin():
    slope = np.linalg.lstsq(np.array(PREDICTED)[:, None], np.array(EXPERIMENTAL), rcond=None)[0][0]
    assert model_factor(example()).b == pytest.approx(slope, rel=1e-13)


def test_the_unit_of_resistance_changes_nothing_but_rounding():
    # Squares of such numbers would leave the range of floating point.
    tests = ComponentTests(np.array(EXPERIMENTAL) * 1e200, np.array(PREDICTED) * 1e200)
    assert model_factor(tests).b == pytest.approx(1.0918925971, rel=1e-9)
    assert model_factor(tests).cov == pytest.approx(0.0379737115, rel=1e-8)


@pytest.mark.parametrize("n", [4, 8, 30, 200])
@pytest.mark.parametrize("shape", [0.3, 1.0, 2.0])
def test_normality_against_statsmodels_and_scipy(n, shape):
    from statsmodels.stats.diagnostic import normal_ad

    # Gamma samples: from far from normal to nearly so, hence p-values from all branches of the formula.
    x = stats.gamma.rvs(10.0**shape, size=n, random_state=n) ** 0.5
    found = normality_of(x)
    distance, p = normal_ad(x)
    assert found.anderson_darling == pytest.approx(distance * (1 + 0.75 / n + 2.25 / n**2), rel=1e-9)
    assert found.anderson_darling_p == pytest.approx(p, rel=1e-9)
    assert found.shapiro_wilk == pytest.approx(stats.shapiro(x).statistic, rel=1e-9)
    assert found.shapiro_wilk_p == pytest.approx(stats.shapiro(x).pvalue, rel=1e-7)


def test_normal_samples_are_rejected_at_the_nominal_rate():
    rng = stream(1, "normality")
    found = [normality_of(rng.standard_normal(12)) for _ in range(2000)]
    error = math.sqrt(0.05 * 0.95 / 2000)
    for name in ("anderson_darling_p", "shapiro_wilk_p"):
        assert np.mean([getattr(f, name) < 0.05 for f in found]) == pytest.approx(0.05, abs=4 * error)


def test_large_series_have_no_shapiro_wilk_value_and_no_warning():
    found = normality_of(stream(2, "normality").standard_normal(6000))
    assert math.isnan(found.shapiro_wilk_p)
    assert 0.0 < found.anderson_darling_p <= 1.0


def test_errors_of_two_populations_are_doubted():
    ratio = np.exp(np.r_[np.linspace(-0.01, 0.01, 15), np.linspace(0.39, 0.41, 15)])
    predicted = np.linspace(10.0, 60.0, 30)
    found = model_factor(ComponentTests(ratio * predicted, predicted), "resistance.bracket")
    assert {d.code for d in found.doubts} >= {"errors-not-lognormal"}
    assert all(d.where == "resistance.bracket" for d in found.doubts)


def test_a_model_that_explains_little_is_doubted():
    found = model_factor(ComponentTests(EXPERIMENTAL, PREDICTED[::-1]))
    assert found.correlation < 0.0
    assert "weak-correlation" in {d.code for d in found.doubts}


def test_equal_predictions_have_no_correlation():
    found = model_factor(ComponentTests(EXPERIMENTAL, [150.0] * 12))
    assert math.isnan(found.correlation)
    assert found.b == pytest.approx(np.mean(EXPERIMENTAL) / 150.0, rel=1e-14)


def test_no_scatter_is_refused():
    with pytest.raises(InputError, match="no scatter"):
        model_factor(ComponentTests(1.1 * np.array(PREDICTED), PREDICTED))


def test_survivors_are_refused_by_the_plain_model_factor():
    with pytest.raises(InputError, match="2 of 12 tests did not fail"):
        model_factor(example(survived=[True] * 2 + [False] * 10))


SURVIVED = np.array([False, False, True, False, True, False, True, False, True, False, False, False])


def close_search(function, start, args=(), disp=0):
    """Return the minimum as scipy's own search does, but to more digits than its 1e-4."""
    return optimize.fmin(function, start, args=args, disp=disp, xtol=1e-10, ftol=1e-13)


def test_survivors_against_scipy():
    ratio = np.array(EXPERIMENTAL) / PREDICTED
    log = np.log(ratio)
    data = stats.CensoredData(uncensored=log[~SURVIVED], right=log[SURVIVED])
    mean, sd = stats.norm.fit(data, optimizer=close_search)
    found = censored_model_factor(example(survived=SURVIVED))
    assert (found.n, found.n_failed) == (12, 8)
    assert found.log_mean == pytest.approx(mean, abs=1e-8)
    assert found.log_sd == pytest.approx(sd, rel=1e-7)
    lognormal = stats.CensoredData(uncensored=ratio[~SURVIVED], right=ratio[SURVIVED])
    shape, _, scale = stats.lognorm.fit(lognormal, floc=0.0, optimizer=close_search)
    assert found.log_mean == pytest.approx(math.log(scale), abs=1e-8)
    assert found.log_sd == pytest.approx(shape, rel=1e-7)


def test_survivors_against_the_likelihood_itself():
    log = np.log(np.array(EXPERIMENTAL) / PREDICTED)

    def minus_log_likelihood(t):
        density = stats.norm.logpdf(log[~SURVIVED], t[0], math.exp(t[1])).sum()
        return -density - stats.norm.logsf(log[SURVIVED], t[0], math.exp(t[1])).sum()

    top = optimize.minimize(
        minus_log_likelihood, [0.1, -3.0], method="Nelder-Mead", options={"xatol": 1e-10, "fatol": 1e-13}
    )
    found = censored_model_factor(example(survived=SURVIVED))
    assert found.log_mean == pytest.approx(top.x[0], abs=1e-7)
    assert found.log_sd == pytest.approx(math.exp(top.x[1]), rel=1e-6)
    assert found.b == pytest.approx(math.exp(top.x[0] + 0.5 * math.exp(2 * top.x[1])), rel=1e-7)
    assert found.cov == pytest.approx(math.sqrt(math.expm1(math.exp(2 * top.x[1]))), rel=1e-6)


def test_without_survivors_the_censored_estimate_is_in_closed_form_and_not_that_of_the_slope():
    log = np.log(np.array(EXPERIMENTAL) / PREDICTED)
    found = censored_model_factor(example())
    assert found.log_mean == pytest.approx(log.mean(), abs=1e-12)
    assert found.log_sd == pytest.approx(log.std(), rel=1e-9)
    assert found.log_mean_error == pytest.approx(log.std() / math.sqrt(12), rel=1e-6)
    assert found.log_sd_error == pytest.approx(log.std() / math.sqrt(24), rel=1e-6)
    slope = model_factor(example())
    assert abs(found.b - slope.b) > 1e-3
    # The log-mean of the ratio is that of the errors plus ln b.
    assert found.log_mean == pytest.approx(slope.log_mean + math.log(slope.b), abs=1e-12)


def test_survivors_of_a_known_population_bias_neither_level_nor_scatter():
    # ln theta normal(0.05, 0.1), rig capacity at a random share of the prediction. Largest likelihood has a bias of the
    # sd of about -3/(4 m), which 400 tests make small.
    means, sds = [], []
    for i in range(40):
        rng = stream(7, "survivors", i)
        theta = np.exp(rng.normal(0.05, 0.1, 400))
        limit = np.exp(rng.normal(0.10, 0.15, 400))
        tests = ComponentTests(np.minimum(theta, limit), np.ones(400), survived=theta > limit)
        found = censored_model_factor(tests)
        means.append(found.log_mean)
        sds.append(found.log_sd)
    assert np.mean(means) == pytest.approx(0.05, abs=4 * np.std(means) / math.sqrt(40))
    assert np.mean(sds) == pytest.approx(0.1, abs=4 * np.std(sds) / math.sqrt(40) + 0.1 / 400)


def test_too_few_failures_are_refused():
    with pytest.raises(InputError, match="Of 12 tests 1 failed"):
        censored_model_factor(example(survived=[False] + [True] * 11))


def test_one_test_has_a_level_and_no_scatter():
    found = errors_of(np.array([11.0]), np.array([10.0]))
    assert found.b == pytest.approx(1.1, rel=1e-15)
    assert math.isnan(found.cov)
