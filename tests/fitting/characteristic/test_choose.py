"""Which route answers, what every route refuses, and that units do not matter."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting.characteristic import characteristic_value
from calibrate.records.observations import Observations

STRENGTHS = np.random.default_rng(4).normal(500.0, 40.0, 30)
CENSORED = Observations(np.array([480.0, 500.0, 512.0]), np.array([480.0, 500.0, np.inf]))
TRUNCATED = Observations(STRENGTHS, STRENGTHS, above=300.0)


def refit_gamma(observations):
    x = observations.values
    return distribution("gamma", mean=x.mean(), cov=x.std() / x.mean())


@pytest.mark.parametrize(
    ("family", "options", "route"),
    [
        ("normal", {}, "point"),
        ("weibull", {}, "point"),
        ("normal", {"confidence": 0.75}, "tolerance"),
        ("exponential", {"confidence": 0.75}, "tolerance"),
        ("normal", {"known_cov": 0.1}, "prediction_known"),
        ("lognormal", {"known_cov": 0.1, "confidence": 0.9}, "tolerance_known"),
        (None, {"confidence": 0.75}, "order_statistic"),
        ("gumbel", {"confidence": 0.75, "route": "order_statistic"}, "order_statistic"),
    ],
)
def test_route(family, options, route):
    assert characteristic_value(STRENGTHS, family, **options).route == route


CASES = [
    *(
        (family, {"confidence": 0.75})
        for family in ("normal", "lognormal", "gumbel", "gumbel_min", "weibull")
    ),
    *((family, {"confidence": 0.75}) for family in ("frechet", "exponential", "gamma", None)),
    *(
        (family, {"route": "prediction"})
        for family in ("normal", "lognormal", "gumbel", "weibull", "exponential")
    ),
    *((family, {"least_cov": 0.3}) for family in ("normal", "lognormal", "gumbel", "weibull")),
    ("lognormal", {"known_cov": 0.1}),
]


@pytest.mark.parametrize("fractile", [0.05, 0.95])
@pytest.mark.parametrize(("family", "options"), CASES, ids=lambda v: str(v))
def test_units_do_not_matter(family, options, fractile):
    def value(unit):
        rng = np.random.default_rng(5)
        return characteristic_value(unit * STRENGTHS, family, fractile, rng=rng, refit=refit_gamma, **options)

    one, other = value(1.0), value(1e-3)
    for name in ("value", "point_estimate", "mean"):
        assert getattr(other, name) == pytest.approx(1e-3 * getattr(one, name), rel=1e-9)
    assert other.cov == pytest.approx(one.cov, rel=1e-12)
    assert (one.cov_used is None) == (family is None)
    assert (other.cov_used or 0.0) == pytest.approx(one.cov_used or 0.0, rel=1e-9)


@pytest.mark.parametrize("family", ["normal", "lognormal", "gumbel", "gumbel_min", "weibull", "frechet"])
@pytest.mark.parametrize("route", ["tolerance", "prediction"])
def test_limits_lie_on_the_safe_side(family, route):
    confidence = 0.75 if route == "tolerance" else None
    for fractile, side in ((0.05, -1.0), (0.95, 1.0)):
        found = characteristic_value(
            STRENGTHS, family, fractile, confidence, route, rng=np.random.default_rng(5)
        )
        assert side * (found.value - found.point_estimate) > 0.0


@pytest.mark.parametrize(
    ("values", "family", "options", "message"),
    [
        ([500.0], "normal", {}, "needs at least two values; there is 1"),
        ([], "lognormal", {"known_cov": 0.1}, "needs at least one value; there are 0"),
        ([500.0, np.nan], "normal", {}, "not a number"),
        ([500.0, "strong"], "normal", {}, "must be numbers"),
        ([[500.0, 510.0]], "normal", {}, "one row of numbers; they have 2 dimensions"),
        ([-1.0, 2.0], "lognormal", {}, "Value 1 is -1; the family 'lognormal' needs values above zero"),
        ([2.0, 0.0], "weibull", {}, "Value 2 is 0; the family 'weibull' needs values above zero"),
        ([2.0, -1.0], "exponential", {}, "needs values not below zero"),
        ([5.0, 5.0, 5.0], "gumbel", {}, "All 3 values are equal"),
        ([0.0, 0.0], "exponential", {}, "All 2 values are equal"),
        (STRENGTHS, "normal", {"fractile": 0.0}, "The fractile is 0; it must lie between 0 and 1"),
        (STRENGTHS, "normal", {"confidence": 1.0}, "The confidence is 1; it must lie between 0 and 1"),
        (STRENGTHS, "normal", {"confidence": 75.0}, "The confidence is 75; it must lie"),
        (STRENGTHS, "log-normal", {}, "no family 'log-normal'.*Did you mean 'lognormal'"),
        (STRENGTHS, "constant", {}, "no family 'constant' with a characteristic value"),
        (STRENGTHS, "normal", {"route": "tolerence"}, "no route 'tolerence'.*Did you mean 'tolerance'"),
        (STRENGTHS, "normal", {"route": "tolerance"}, "needs a confidence"),
        (STRENGTHS, "normal", {"route": "prediction", "confidence": 0.75}, "knows no confidence; 0.75"),
        (STRENGTHS, None, {"route": "point"}, "The route 'point' needs a family"),
        (STRENGTHS, None, {}, "The route 'order_statistic' needs a confidence"),
        (STRENGTHS[:20], None, {"confidence": 0.75}, "at least 28 values; there are 20"),
        (STRENGTHS, None, {"confidence": 0.75, "least_cov": 0.1}, "has no cov, so a least cov of 0.1"),
        (STRENGTHS, "normal", {"route": "prediction_known"}, "needs a known cov"),
        (STRENGTHS, "normal", {"route": "prediction", "known_cov": 0.1}, "would ignore the known cov 0.1"),
        (STRENGTHS, "normal", {"known_cov": -0.1}, "The known cov is -0.1; it must be a number above zero"),
        (STRENGTHS, "normal", {"least_cov": np.inf}, "The least cov is inf"),
        (STRENGTHS, "weibull", {"known_cov": 0.1}, "normal and lognormal only, not for 'weibull'"),
        (STRENGTHS, "weibull", {"confidence": 0.75}, r"simulated and need a generator \(rng\)"),
        (STRENGTHS, "gumbel", {"least_cov": 3.0}, "more than the family 'gumbel' can have"),
        (STRENGTHS, "exponential", {"least_cov": 1.5}, "an exponential population has a cov of 1"),
        (STRENGTHS, "gamma", {}, r"needs a fit that can be repeated \(refit\)"),
        (STRENGTHS, "gamma", {"refit": refit_gamma, "confidence": 0.75}, r"need a generator \(rng\)"),
        (STRENGTHS, "gamma", {"refit": refit_gamma, "route": "prediction"}, "offered: point, tolerance"),
        (
            STRENGTHS,
            "gamma",
            {"refit": refit_gamma, "least_cov": 0.1},
            "no floor of the cov for the family 'gamma'",
        ),
        (
            CENSORED,
            "normal",
            {},
            "1 of 3 values are known by bounds only, which the route 'point' cannot honour",
        ),
        (CENSORED, "normal", {"route": "prediction"}, "not offered for samples with bounds"),
        (CENSORED, None, {"confidence": 0.75}, "known by bounds only"),
        (TRUNCATED, "lognormal", {"confidence": 0.75}, "The sample is truncated"),
    ],
)
def test_refusals(values, family, options, message):
    with pytest.raises(InputError, match=message):
        characteristic_value(values, family, **options)
