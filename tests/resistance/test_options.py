"""Options table where the model factor has a trend."""

import math

import numpy as np
import pytest
from scipy import stats
from statsmodels.api import OLS, add_constant

from calibrate.errors import InputError
from calibrate.resistance import FractileFactor, trend_options


def sample(n=30, slope=-0.3, sd=0.12, seed=4):
    rng = np.random.default_rng(seed)
    c = rng.uniform(10.0, 30.0, n)
    return 1.1 * (c / 18.0) ** slope * rng.lognormal(0.0, sd, n), c


def test_statistics_agree_with_regression_by_statsmodels():
    delta, c = sample()
    y, n = np.log(delta), 30
    table = trend_options(delta, c, "slenderness", split_at=20.0)
    low = c <= 20.0
    designs = {
        "leave": np.ones((n, 1)),
        "correct": add_constant(np.log(c / np.exp(np.log(c).mean()))),
        "split": np.column_stack([low, ~low]).astype(float),
    }
    for kind, design in designs.items():
        fit, option = OLS(y, design).fit(), table.option(kind)
        likelihood = fit.llf - y.sum()  # of delta, not of its logarithm
        assert option.log_likelihood == pytest.approx(likelihood, rel=1e-10)
        assert option.parameters == design.shape[1] + 1
        assert option.bic == pytest.approx(option.parameters * math.log(n) - 2 * likelihood, rel=1e-10)
        assert option.cov == pytest.approx(math.sqrt(math.expm1(fit.mse_resid)), rel=1e-10)
        assert option.b == pytest.approx(np.exp(fit.params[: option.b.size] + fit.mse_resid / 2), rel=1e-10)
        assert option.same_data
    assert table.option("correct").slope == pytest.approx(
        OLS(y, designs["correct"]).fit().params[1], rel=1e-10
    )
    lower = table.option("lower part")
    assert (lower.n, lower.same_data) == (low.sum(), False)
    assert lower.b[0] == pytest.approx(np.exp(y[low].mean() + y[low].var(ddof=1) / 2))
    assert lower.limits[0] == pytest.approx([c[low].min(), c[low].max()])


@pytest.mark.parametrize("kind", ["leave", "correct", "split", "upper part"])
def test_cross_validation_equals_leaving_out_each_test(kind):
    delta, c = sample(14)
    table = trend_options(delta, c, "slenderness")
    y, low = np.log(delta), c <= np.median(c)
    x = np.log(c)
    design = {
        "leave": np.ones((14, 1)),
        "correct": np.column_stack([np.ones(14), x]),
        "split": np.column_stack([low, ~low]).astype(float),
        "upper part": np.ones((14, 1)),
    }[kind]
    rows = np.flatnonzero(~low) if kind == "upper part" else np.arange(14)
    scores = []
    for i in rows:
        others = rows[rows != i]
        X, X_i = design[others], design[i]
        fit = OLS(y[others], X).fit()
        scale = math.sqrt(fit.mse_resid * (1 + X_i @ np.linalg.inv(X.T @ X) @ X_i))
        scores.append(stats.t(fit.df_resid, X_i @ fit.params, scale).logpdf(y[i]) - y[i])
    assert table.option(kind).cross_validation == pytest.approx(np.mean(scores), rel=1e-9)


def test_correcting_meets_the_target_everywhere_and_leaving_does_not():
    delta, c = sample(60)
    table = trend_options(delta, c, "slenderness", design=FractileFactor.constant(0.8 * 3.8))
    correct, leave, split = (table.option(k) for k in ("correct", "leave", "split"))
    assert [correct.worst_beta, correct.best_beta] == pytest.approx([3.8, 3.8], rel=1e-10)
    # Leaving counts the trend as scatter, which pays for part of it at the adverse end; splitting takes it out of the
    # scatter but not out of the subsets.
    assert max(leave.worst_beta, split.worst_beta) < 3.8
    assert 0.0 < split.best_beta - split.worst_beta < leave.best_beta - leave.worst_beta
    assert leave.worst_at == c.max()
    assert correct.bic < leave.bic
    assert correct.cross_validation > leave.cross_validation
    assert correct.cov < split.cov < leave.cov
    assert [d.code for d in table.doubts] == ["trend-left", "trend-within-subsets"]


def test_worst_beta_by_the_distribution_of_the_resistance():
    delta, c = sample(40)
    table = trend_options(delta, c, "slenderness", other_log_sd=0.08, alpha_r=0.75)
    mean, slope, sd = table.line
    option = table.option("leave")
    # With the line as truth the chance of a resistance below design at the worst place is Phi(-alpha_R beta).
    local = mean + slope * math.log(option.worst_at / option.reference)
    chance = stats.lognorm(math.hypot(sd, 0.08), scale=math.exp(local)).cdf(option.closed_form.design[0])
    assert stats.norm.isf(chance) / 0.75 == pytest.approx(option.worst_beta, rel=1e-10)


def test_null_data_prefer_no_correction():
    picks = [
        min(trend_options(*sample(40, 0.0, seed=s), "x").options[:3], key=lambda o: o.bic).kind
        for s in range(60)
    ]
    # A free parameter lowers -2 log-likelihood by chi-squared(1): it wins over ln 40 = 3.7 with p = 0.055, two do
    # so with at most 0.11; three standard errors for 60 samples.
    assert picks.count("leave") / 60 > 0.89 - 3 * math.sqrt(0.11 * 0.89 / 60)


def test_few_tests_cost_more_with_a_predictive_factor():
    delta, c = sample(12, 0.0)
    plain = trend_options(delta, c, "x")
    k, kd = FractileFactor.predictive(0.05), FractileFactor.predictive(stats.norm.sf(3.04))
    careful = trend_options(delta, c, "x", characteristic=k, design=kd)
    ratios = [
        b.closed_form.design[0] / a.closed_form.design[0]
        for a, b in zip(plain.options, careful.options, strict=True)
    ]
    assert max(ratios[3:]) < min(ratios[:3]) < 1.0
    assert "few-tests-in-part" in [d.code for d in careful.doubts]


def test_wrong_input_is_refused():
    delta, c = sample(10)
    with pytest.raises(InputError, match=r"leaves 0 with values above it; at least 3 .* reach from"):
        trend_options(delta, c, "x", split_at=99.0)
    with pytest.raises(InputError, match="same in all tests"):
        trend_options(delta, np.full(10, 2.0), "x")
    with pytest.raises(InputError, match="without any residual scatter"):
        trend_options(c**-0.5, c, "x")
    with pytest.raises(InputError, match="at least 4 tests are needed; got 3"):
        trend_options(delta[:3], c[:3], "x")
    with pytest.raises(InputError, match="alpha_R is 0"):
        trend_options(delta, c, "x", alpha_r=0.0)
