"""Simulated pivots: the fits behind them, and their factors where exact ones exist."""

import math

import numpy as np
import pytest

from calibrate.fitting.characteristic import characteristic_value, pivots, prediction_factor, tolerance_factor
from calibrate.fitting.characteristic.pivots import gumbel_rows, simulated
from calibrate.fitting.tools import gumbel_fit

MEMBERS = {  # family: its values from standard Gumbel values of maxima
    "gumbel": lambda y: 100.0 + 10.0 * y,
    "gumbel_min": lambda y: 100.0 - 10.0 * y,
    "weibull": lambda y: 100.0 * np.exp(-0.1 * y),
    "frechet": lambda y: 100.0 * np.exp(0.1 * y),
}


@pytest.mark.parametrize("n", [2, 3, 10, 200])
def test_rows_are_fitted_like_single_samples(n):
    y = np.random.default_rng(n).gumbel(3.0, 2.0, size=(50, n))
    location, scale = gumbel_rows(y)
    expected = np.array([gumbel_fit(row) for row in y])
    np.testing.assert_allclose(location, expected[:, 0], rtol=1e-12)
    np.testing.assert_allclose(scale, expected[:, 1], rtol=1e-12)


@pytest.mark.parametrize("n", [3, 10, 1_000])
@pytest.mark.parametrize("level", [0.05, 0.75, 0.95])
def test_normal_pivots_agree_with_non_central_t(n, level):
    k, error = simulated(n, np.random.default_rng(1), normal=True).tolerance(n, 0.05, False, level)
    assert k == pytest.approx(float(tolerance_factor(n, 0.05, level)), abs=4.0 * error)
    assert error < 0.05 * k


@pytest.mark.parametrize("n", [3, 10, 1_000])
@pytest.mark.parametrize("upper", [False, True])
def test_normal_predictions_agree_with_student_t(n, upper):
    k, error = simulated(n, np.random.default_rng(1), normal=True).prediction(n, 0.05, upper)
    expected = float(prediction_factor(n, 0.05)) * (-1.0 if upper else 1.0)
    assert k == pytest.approx(expected, abs=4.0 * error)
    assert error < 0.02 * abs(k)


@pytest.mark.parametrize("normal", [True, False], ids=["normal", "gumbel"])
def test_extrapolation_meets_direct_simulation(monkeypatch, normal):
    def factors(seed):
        found = simulated(120, np.random.default_rng(seed), normal=normal)
        return found.n, *found.tolerance(120, 0.05, True, 0.25), *found.prediction(120, 0.05, True)

    direct = factors(2)
    monkeypatch.setattr(pivots, "LARGEST", 40)
    extrapolated = factors(3)
    assert (direct[0], extrapolated[0]) == (120, 40)
    for k, k_error, beyond, beyond_error in zip(
        direct[1::2], direct[2::2], extrapolated[1::2], extrapolated[2::2], strict=True
    ):
        assert k == pytest.approx(beyond, abs=4.0 * math.hypot(k_error, beyond_error))


def test_blocks_do_not_show(monkeypatch):
    whole = simulated(10, np.random.default_rng(4), replicates=500)
    monkeypatch.setattr(pivots, "_BLOCK", 700)
    pieces = simulated(10, np.random.default_rng(4), replicates=500)
    np.testing.assert_allclose(pieces.location, whole.location, rtol=1e-12)
    np.testing.assert_allclose(pieces.scale, whole.scale, rtol=1e-12)


@pytest.mark.parametrize("family", MEMBERS)
@pytest.mark.parametrize("fractile", [0.05, 0.95])
def test_limits_of_all_members_are_one(family, fractile):
    y = np.random.default_rng(6).gumbel(size=12)
    gumbel_side = fractile if family in ("gumbel", "frechet") else 1.0 - fractile
    options = {"confidence": 0.75, "rng": np.random.default_rng(7)}
    found = characteristic_value(MEMBERS[family](y), family, fractile, **options)
    options["rng"] = np.random.default_rng(7)
    base = characteristic_value(y, "gumbel", gumbel_side, **options)
    assert found.value == pytest.approx(float(MEMBERS[family](np.array(base.value))), rel=1e-9)
    assert found.interval == pytest.approx(sorted(MEMBERS[family](np.array(base.interval))), rel=1e-9)
    assert found.factor == pytest.approx(base.factor, rel=1e-9)


def test_factor_is_the_one_of_the_statement():
    x = MEMBERS["weibull"](np.random.default_rng(6).gumbel(size=12))
    found = characteristic_value(x, "weibull", 0.05, 0.75, rng=np.random.default_rng(7))
    location, scale = (float(a[0]) for a in gumbel_rows(-np.log(x)[None, :]))
    assert found.value == pytest.approx(math.exp(-location - found.factor * scale), rel=1e-9)
    assert found.statement == f"5 % fractile at 75 % confidence, weibull, n = 12, k = {found.factor:.2f}"
    assert "20000 simulated samples of 12 values" in found.notes[0]
    assert 0.0 < found.monte_carlo_error < 0.005 * found.value


# 2 n mean/scale is chi-squared with 2 n degrees of freedom: 23.8277 and 15.4518 are its 75 % and 25 % points for 20
# (common tables).
@pytest.mark.parametrize(("fractile", "chi_squared"), [(0.05, 23.8277), (0.95, 15.4518)])
def test_exponential_limits(fractile, chi_squared):
    x = np.arange(1.0, 11.0)
    found = characteristic_value(x, "exponential", fractile, 0.75)
    assert found.value == pytest.approx(-math.log(1.0 - fractile) * 20.0 * 5.5 / chi_squared, rel=1e-5)
    low, high = found.interval
    assert low < found.point_estimate < high


@pytest.mark.parametrize("family", [*MEMBERS, "exponential"])
@pytest.mark.parametrize("fractile", [0.05, 0.98])
def test_predictions_hold_their_share_of_further_values(family, fractile):
    rng = np.random.default_rng(9)
    n, samples = 6, 4_000
    if family == "exponential":
        unit = characteristic_value(np.ones(n), family, fractile, route="prediction").value
        limits = unit * rng.standard_exponential((samples, n)).mean(axis=1)
        beyond = rng.standard_exponential(samples)
    else:
        one = characteristic_value(
            MEMBERS[family](rng.gumbel(size=n)), family, fractile, route="prediction", rng=rng
        )
        sign = -1.0 if family in ("weibull", "gumbel_min") else 1.0
        location, scale = gumbel_rows(rng.gumbel(size=(samples, n)))
        side = -1.0 if fractile < 0.5 else 1.0
        limits, beyond = sign * location + side * one.factor * scale, sign * rng.gumbel(size=samples)
    share = np.mean(beyond < limits)
    assert share == pytest.approx(fractile, abs=3.0 * math.sqrt(fractile * (1.0 - fractile) / samples))


@pytest.mark.parametrize("family", MEMBERS)
def test_floor_raises_the_scatter(family):
    x = MEMBERS[family](np.random.default_rng(6).gumbel(size=12))
    plain = characteristic_value(x, family, 0.05, 0.75, rng=np.random.default_rng(7))
    raised = characteristic_value(x, family, 0.05, 0.75, least_cov=0.3, rng=np.random.default_rng(7))
    assert raised.cov_used == pytest.approx(0.3, rel=1e-9)
    assert (raised.floored, plain.floored) == (True, False)
    assert raised.value < plain.value
    assert raised.interval is None
