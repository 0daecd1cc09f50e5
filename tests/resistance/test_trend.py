"""Trends of the model factor: witnesses, nominal rate of false alarms, planted slopes."""

import itertools
import math

import numpy as np
import pytest
from scipy import stats
from statsmodels.api import OLS, add_constant
from statsmodels.stats.multitest import multipletests

from calibrate.errors import InputError
from calibrate.resistance import holm, trends


def sample(n=40, slope=0.0, seed=1):
    """Return delta, prediction and two inputs; delta follows a power of the second input."""
    rng = np.random.default_rng(seed)
    slenderness = rng.uniform(10.0, 30.0, n)
    strength = rng.lognormal(math.log(400.0), 0.1, n)
    prediction = 0.01 * strength * slenderness * rng.lognormal(0.0, 0.1, n)
    delta = 1.1 * (slenderness / 18.0) ** slope * rng.lognormal(0.0, 0.15, n)
    return delta, prediction, {"strength": strength, "slenderness": slenderness}


def test_coefficients_agree_with_scipy_and_statsmodels():
    delta, prediction, inputs = sample(slope=-0.3)
    found = trends(delta, prediction, inputs, level=0.1)
    assert found.names == ("prediction", "strength", "slenderness")
    for j, x in enumerate((prediction, *inputs.values())):
        rho, tau = stats.spearmanr(delta, x), stats.kendalltau(delta, x)
        assert [found.spearman[j], found.spearman_p[j]] == pytest.approx(
            [rho.statistic, rho.pvalue], rel=1e-12
        )
        assert [found.kendall[j], found.kendall_p[j]] == pytest.approx([tau.statistic, tau.pvalue], rel=1e-12)
        line = OLS(np.log(delta), add_constant(np.log(x))).fit()
        mine = [
            found.intercept[j],
            found.slope[j],
            found.slope_error[j],
            found.slope_p[j],
            found.r_squared[j],
        ]
        theirs = [*line.params, line.bse[1], line.pvalues[1], line.rsquared]
        assert mine == pytest.approx(theirs, rel=1e-9)
        assert found.slope_interval[j] == pytest.approx(line.conf_int(0.1)[1], rel=1e-9)
        assert found.residual_sd[j] == pytest.approx(math.sqrt(line.mse_resid), rel=1e-9)


def test_slope_by_hand():
    # Least squares on four points written out: x = ln 1, 2, 4, 8; y = 0.3 - 0.2 x + (e, -e, -e, e), e = 0.01.
    step, e = math.log(2.0), 0.01
    x = step * np.arange(4)
    delta = np.exp(0.3 - 0.2 * x + e * np.array([1, -1, -1, 1]))
    found = trends(delta, np.exp(x))
    assert found.slope[0] == pytest.approx(-0.2, rel=1e-12)
    assert found.intercept[0] == pytest.approx(0.3, rel=1e-12)
    assert found.slope_error[0] == pytest.approx(math.sqrt(4 * e * e / 2 / (5 * step**2)), rel=1e-9)


def test_holm_agrees_with_statsmodels_and_skips_what_is_missing():
    p = np.array([0.02, 0.001, 0.04, 0.6, 0.013])
    assert holm(p) == pytest.approx(multipletests(p, method="holm")[1], rel=1e-14)
    with_gap = holm([0.02, np.nan, 0.03])
    assert math.isnan(with_gap[1])
    assert with_gap[[0, 2]] == pytest.approx([0.04, 0.04])


def test_small_samples_use_all_orders():
    # Four tests in perfect order: 2 of the 24 orders are as far from no correlation.
    found = trends([0.9, 1.0, 1.1, 1.2], [1.0, 2.0, 3.5, 4.0])
    assert found.spearman[0] == pytest.approx(1.0)
    assert found.spearman_p[0] == pytest.approx(2 / 24)
    # Ties: written out with scipy's coefficient over all orders.
    d, x = np.array([0.9, 1.0, 1.0, 1.2, 1.05, 1.3]), np.array([1.0, 1.0, 2.0, 3.0, 4.0, 4.0])
    observed = abs(stats.spearmanr(d, x).statistic)
    orders = [abs(stats.spearmanr(d[list(o)], x).statistic) for o in itertools.permutations(range(6))]
    assert trends(d, x).spearman_p[0] == pytest.approx(np.mean(np.array(orders) >= observed - 1e-12))


@pytest.mark.parametrize(
    ("n", "decide_by"), [(7, "spearman"), (15, "spearman"), (15, "slope"), (12, "kendall")]
)
def test_null_data_alarm_at_the_nominal_rate(n, decide_by):
    rng = np.random.default_rng(20)
    repeats, level = 400, 0.10
    alarms = 0
    for _ in range(repeats):
        inputs = {name: rng.uniform(1.0, 3.0, n) for name in ("a", "b")}
        found = trends(
            rng.lognormal(0, 0.2, n), rng.uniform(1.0, 3.0, n), inputs, level=level, decide_by=decide_by
        )
        alarms += bool(found.flagged.any())
    # Independent covariates: Holm's rate of any false alarm is 1 - (1 - level/3)^3 = 0.0967 for continuous
    # p-values; those of few ranks are discrete, hence lower. Four standard errors either side.
    expected = 1.0 - (1.0 - level / 3) ** 3
    error = 4.0 * math.sqrt(expected * (1.0 - expected) / repeats)
    assert alarms / repeats < expected + error
    assert alarms / repeats > (expected - error if decide_by == "slope" else 0.02)


def test_planted_slope_is_found_and_named():
    hits = [trends(*sample(40, -0.35, seed)).flagged for seed in range(60)]
    share = np.mean(hits, axis=0)
    # ln slenderness has an sd of 0.31: the slope is 4.5 of its standard errors, 0.15/(0.31 sqrt(40)).
    assert share[2] > 0.9
    assert share[1] < 0.15
    found = trends(*sample(40, -0.35, 3))
    assert found.with_trend == ("prediction", "slenderness") or found.with_trend == ("slenderness",)
    doubt = next(d for d in found.doubts if "'slenderness'" in d.message)
    assert doubt.code == "trend"
    assert "falls with it" in doubt.message


def test_stopped_tests_are_left_out_or_taken_in():
    delta, prediction, inputs = sample(120, -0.4, 5)
    stop = 1.1
    stopped = delta > stop
    seen = np.minimum(delta, stop)
    out = trends(seen, prediction, inputs, stopped=stopped)
    exact = trends(delta[~stopped], prediction[~stopped], {k: v[~stopped] for k, v in inputs.items()})
    assert out.stopped == stopped.sum()
    assert out.slope == pytest.approx(exact.slope, rel=1e-14)
    assert [d.code for d in out.doubts if d.code != "trend"] == ["stopped-left-out"]
    taken = trends(seen, prediction, inputs, stopped=stopped, stopped_are="regression")
    assert taken.decided_by == "slope"
    assert not [d for d in taken.doubts if d.code == "stopped-left-out"]
    # The slope without stopped tests is drawn towards zero; with them it is within its own error of the truth.
    assert abs(taken.slope[2] + 0.4) < 2.0 * taken.slope_error[2]
    assert out.slope[2] > -0.4 + 2.0 * out.slope_error[2]
    # Witness: the censored likelihood is largest at these coefficients (the sd is the one before widening).
    x, n, m = np.log(inputs["slenderness"]), 120, int((~stopped).sum())
    sd = taken.residual_sd[2] * math.sqrt((m - 2) / m)

    def likelihood(intercept, slope):
        z = (np.log(seen) - intercept - slope * x) / sd
        return np.sum(np.where(stopped, stats.norm.logsf(z), stats.norm.logpdf(z) - math.log(sd)))

    best = likelihood(taken.intercept[2], taken.slope[2])
    for di, ds in ((1e-3, 0), (-1e-3, 0), (0, 1e-3), (0, -1e-3)):
        assert likelihood(taken.intercept[2] + di, taken.slope[2] + ds) < best
    assert n > m


def test_what_cannot_be_tested_says_why_and_is_not_counted():
    delta, prediction, inputs = sample(20, 0.0, 2)
    plain = trends(delta, prediction)
    found = trends(delta, prediction, {"width": np.full(20, 3.0), "offset": inputs["strength"] - 400.0})
    assert "same in all tests" in found.reasons[1]
    assert np.isnan([found.spearman[1], found.slope[1], found.adjusted_p[1]]).all()
    assert "not positive" in found.reasons[2]
    assert np.isfinite(found.spearman[2])
    assert np.isnan(found.slope[2])
    assert found.adjusted_p[0] <= 2.0 * plain.spearman_p[0] + 1e-15
    assert not found.flagged[1]


def test_wrong_input_is_refused():
    delta, prediction, inputs = sample(10)
    with pytest.raises(
        InputError, match=r"delta: must be finite and above zero; wrong at test 1 \(-1\) of 10"
    ):
        trends(np.where(np.arange(10) == 0, -1.0, delta), prediction)
    with pytest.raises(InputError, match="10 values of delta and 9 predictions"):
        trends(delta, prediction[:9])
    with pytest.raises(InputError, match="Input 'strength': 10 tests need 10 values"):
        trends(delta, prediction, {"strength": inputs["strength"][:4]})
    with pytest.raises(InputError, match="at least 4 tests that ended in failure; got 3 and 7 stopped ones"):
        trends(delta, prediction, stopped=np.arange(10) > 2)
    with pytest.raises(InputError, match=r"got 'kendal'\. Did you mean 'kendall'\?"):
        trends(delta, prediction, decide_by="kendal")
    with pytest.raises(InputError, match="between 0 and 1"):
        trends(delta, prediction, level=5.0)
