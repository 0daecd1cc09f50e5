"""Normal and lognormal characteristic values against their formulas."""

import math

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.fitting.characteristic import (
    characteristic_value,
    prediction_factor,
    prediction_factor_known,
    tolerance_factor,
    tolerance_factor_known,
)

STRENGTHS = np.array([512.0, 498.0, 530.0, 521.0, 507.0, 515.0])
Z = 1.6448536269514722
V = 0.08

ROUTES = [  # route, options, factor
    ("point", {}, Z),
    ("tolerance", {"confidence": 0.75}, tolerance_factor(6, 0.05, 0.75)),
    ("prediction", {}, prediction_factor(6, 0.05)),
    ("tolerance_known", {"confidence": 0.75, "known_cov": V}, tolerance_factor_known(6, 0.05, 0.75)),
    ("prediction_known", {"known_cov": V}, prediction_factor_known(6, 0.05)),
]


@pytest.mark.parametrize(("route", "options", "k"), ROUTES, ids=[r[0] for r in ROUTES])
@pytest.mark.parametrize(("fractile", "sign"), [(0.05, -1.0), (0.95, 1.0)])
class TestRoutes:
    def test_normal(self, route, options, k, fractile, sign):
        found = characteristic_value(STRENGTHS, "normal", fractile, route=route, **options)
        mean = STRENGTHS.mean()
        sd = V * mean if "known_cov" in options else STRENGTHS.std(ddof=1)
        assert found.value == pytest.approx(mean + sign * k * sd, rel=1e-12)
        assert found.factor == pytest.approx(k, rel=1e-9)
        assert found.cov_used == pytest.approx(sd / mean, rel=1e-12)
        assert (found.route, found.fractile, found.n, found.floored) == (route, fractile, 6, False)

    def test_lognormal(self, route, options, k, fractile, sign):
        found = characteristic_value(STRENGTHS, "lognormal", fractile, route=route, **options)
        logs = np.log(STRENGTHS)
        sd = math.sqrt(math.log1p(V**2)) if "known_cov" in options else logs.std(ddof=1)
        assert found.value == pytest.approx(math.exp(logs.mean() + sign * k * sd), rel=1e-12)
        assert found.point_estimate == pytest.approx(math.exp(logs.mean() + sign * Z * sd), rel=1e-12)
        assert found.mean == pytest.approx(STRENGTHS.mean())
        assert found.cov == pytest.approx(STRENGTHS.std(ddof=1) / STRENGTHS.mean())

    def test_interval_encloses_the_point_estimate(self, route, options, k, fractile, sign):
        found = characteristic_value(STRENGTHS, "lognormal", fractile, route=route, **options)
        low, high = found.interval
        assert low < found.point_estimate < high


def test_interval_is_a_pair_of_limits():
    found = characteristic_value(STRENGTHS, "normal", 0.05)
    limits = [characteristic_value(STRENGTHS, "normal", 0.05, c).value for c in (0.975, 0.025)]
    assert found.interval == pytest.approx(limits, rel=1e-12)
    assert found.interval_level == 0.95


@pytest.mark.parametrize(
    ("options", "expected"),
    [
        ({"confidence": 0.75}, "5 % fractile at 75 % confidence, lognormal, n = 6, k = 2.34"),
        ({}, "5 % fractile as point estimate, lognormal, n = 6, k = 1.64"),
        ({"route": "prediction"}, "predictive 5 % fractile, lognormal, n = 6, k = 2.18"),
        ({"known_cov": 0.1}, "predictive 5 % fractile, lognormal, cov 0.1 taken as known, n = 6, k = 1.78"),
        (
            {"confidence": 0.75, "least_cov": 0.05},
            "5 % fractile at 75 % confidence, lognormal, cov raised to 0.05, n = 6, k = 2.34",
        ),
    ],
)
def test_statement(options, expected):
    assert characteristic_value(STRENGTHS, "lognormal", **options).statement == expected


@pytest.mark.parametrize("family", ["normal", "lognormal"])
class TestFloor:
    def test_raises_the_scatter_alone(self, family):
        plain = characteristic_value(STRENGTHS, family, 0.05, 0.75)
        raised = characteristic_value(STRENGTHS, family, 0.05, 0.75, least_cov=0.05)
        assert raised.floored
        assert raised.cov_used == pytest.approx(0.05, rel=1e-12)
        assert (raised.factor, raised.cov) == (plain.factor, plain.cov)
        assert raised.value < plain.value
        assert raised.point_estimate == plain.point_estimate
        assert raised.interval is None

    def test_below_the_scatter_changes_nothing(self, family):
        plain = characteristic_value(STRENGTHS, family, 0.05, 0.75)
        same = characteristic_value(STRENGTHS, family, 0.05, 0.75, least_cov=0.01)
        assert (same.value, same.floored, same.statement) == (plain.value, False, plain.statement)

    def test_gives_equal_values_a_scatter(self, family):
        equal = [0.1] * 5  # their mean is not 0.1 to the last bit
        with pytest.raises(InputError, match="All 5 values are equal"):
            characteristic_value(equal, family, 0.05, 0.75)
        assert characteristic_value(equal, family, 0.05, 0.75, least_cov=0.1).value < 0.09

    def test_holds_for_a_known_cov_too(self, family):
        raised = characteristic_value(STRENGTHS, family, known_cov=0.02, least_cov=0.05)
        assert raised.value == pytest.approx(characteristic_value(STRENGTHS, family, known_cov=0.05).value)


def test_one_test_suffices_if_the_cov_is_known():
    found = characteristic_value([500.0], "normal", known_cov=0.1)
    assert found.value == pytest.approx(500.0 * (1.0 - Z * math.sqrt(2.0) * 0.1))
    assert math.isnan(found.cov)


def test_lognormal_keeps_a_tiny_scatter():
    x = 1e6 + np.array([0.0, 1e-6, 2e-6, 3e-6])
    found = characteristic_value(x, "lognormal", 0.05, 0.75)
    as_normal = characteristic_value(x, "normal", 0.05, 0.75)
    assert found.cov_used == pytest.approx(as_normal.cov_used, rel=1e-6)


def test_doubts():
    scattered = [1.0, 9.0, 2.0, 7.0]
    codes = [d.code for d in characteristic_value(scattered, "normal", 0.05, 0.75).doubts]
    assert codes == ["negative-characteristic"]
    assert characteristic_value(scattered, "lognormal", 0.05, 0.75).doubts == ()
    far = characteristic_value(STRENGTHS, "lognormal", 0.001, route="prediction")
    assert [d.code for d in far.doubts] == ["far-fractile"]
    assert "0.1 % fractile lies far beyond the smallest of 6 values" in far.doubts[0].message
