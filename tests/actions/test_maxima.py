"""Fits of block maxima, and a shape pooled over stations."""

import math

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.actions.maxima import fit_maxima, with_detection_limit
from calibrate.actions.pooling import fit_pooled_shape
from calibrate.errors import InputError
from tests.published.test_fits_ozone import OZONE
from tests.published.test_fits_sea_levels import LEVELS

TRUE_SHAPE = 0.12


def drawn(shape=0.1, location=20.0, scale=4.0, n=40, seed=1):
    """Draw from generalised extreme values; scipy's shape has the opposite sign."""
    return stats.genextreme(-shape, location, scale).rvs(n, random_state=np.random.default_rng(seed))


def codes(found):
    return [doubt.code for doubt in found.doubts]


@pytest.fixture(scope="module")
def stations():
    return {f"s{i}": drawn(TRUE_SHAPE, 10.0 * i, 2.0 * i, 60, seed=i) for i in range(1, 7)}


@pytest.fixture(scope="module")
def pooled(stations):
    return fit_pooled_shape(stations)


# One record ------------------------------


def test_sea_levels():
    """Port Pirie; S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, 3.4.1."""
    found = fit_maxima(LEVELS, "gev", blocks_expected=65)
    assert found.fit.parameters == pytest.approx(
        {"location": 3.874750, "scale": 0.198044, "shape": -0.050110}, rel=0, abs=5e-7
    )
    assert (found.blocks, found.missing, found.years) == (65, 0, 65.0)
    assert found.shape_interval == pytest.approx((-0.21, 0.17), abs=0.01)  # printed
    assert codes(found) == ["shape-sign"]


def test_ozone_by_l_moments():
    found = fit_maxima(OZONE, "gev", method="l_moments")
    assert found.fit.parameters == pytest.approx(
        {"location": 25.665472, "scale": 21.178241, "shape": 0.1699995}, rel=0, abs=1e-6
    )
    half = 1.959964 * found.fit.standard_errors["shape"]
    assert found.shape_interval == pytest.approx((0.1699995 - half, 0.1699995 + half), abs=1e-6)


@pytest.mark.parametrize("shape", [-0.2, 0.0, 0.25])
def test_likelihood_against_scipy(shape):
    x = drawn(shape, n=80)
    minus_shape, location, scale = stats.genextreme.fit(x, -shape, loc=20.0, scale=4.0)
    found = fit_maxima(x, "gev").fit
    assert found.parameters == pytest.approx(
        {"location": location, "scale": scale, "shape": -minus_shape}, abs=2e-3
    )
    assert found.log_likelihood >= stats.genextreme(minus_shape, location, scale).logpdf(x).sum()


@pytest.mark.parametrize(
    ("family", "law"),
    [("gumbel", stats.gumbel_r), ("frechet", stats.invweibull), ("lognormal", stats.lognorm)],
)
def test_other_families(family, law):
    x = drawn()
    arguments = law.fit(x) if family == "gumbel" else law.fit(x, floc=0.0)
    best = law(*arguments).logpdf(x).sum()
    assert fit_maxima(x, family).fit.log_likelihood == pytest.approx(best, abs=1e-4)


def test_given_shape():
    x = drawn()

    def cost(p):
        return -stats.genextreme(-0.3, p[0], math.exp(p[1])).logpdf(x).sum()

    best = optimize.minimize(cost, [20.0, 1.5], method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-11})
    found = fit_maxima(x, "gev", shape=0.3)
    assert found.fit.parameters == pytest.approx(
        {"location": best.x[0], "scale": math.exp(best.x[1]), "shape": 0.3}, rel=1e-6
    )
    assert found.shape_interval is None


def test_several_families_are_compared():
    found = fit_maxima(drawn(), ("gumbel", "gev", "lognormal"))
    assert {c.family for c in found.fit.comparison.candidates} == {"gumbel", "gev", "lognormal"}
    assert found.fit.aicc == min(c.aicc for c in found.fit.comparison.candidates)


def test_maximum_of_a_longer_period():
    """Gumbel: the location moves by scale ln n, and monthly blocks make a year of twelve."""
    found = fit_maxima(drawn(), "gumbel", block_years=1 / 12)
    location, scale = found.fit.parameters.values()
    year = found.over(1.0)
    x = np.array([10.0, 25.0, 60.0])
    np.testing.assert_allclose(
        year.logcdf(x), -np.exp(-(x - location - scale * math.log(12)) / scale), rtol=1e-12
    )
    assert found.over(1 / 12) is found.distribution


def test_given_shape_by_l_moments():
    """From a sample of exact quantiles of a known distribution, location and scale come back (bound: its spacing)."""
    law, n = stats.genextreme(-0.15, 30.0, 5.0), 200_000
    found = fit_maxima(law.ppf((np.arange(n) + 0.5) / n), "gev", method="l_moments", shape=0.15)
    expected = {"location": 30.0, "scale": 5.0, "shape": 0.15}
    assert found.fit.parameters == pytest.approx(expected, rel=1e-4)
    assert found.fit.standard_errors["shape"] == 0.0
    assert found.fit.free == ("location", "scale")
    assert found.shape_interval is None


# Incomplete records ------------------------------


def test_missing_blocks_are_counted_and_doubted():
    found = fit_maxima(drawn(n=40), "gumbel", blocks_expected=50)
    assert (found.blocks, found.missing) == (40, 10)
    assert codes(found) == ["missing-blocks"]
    assert "10 of 50 blocks (20 %)" in found.doubts[0].message


def test_blocks_observed_in_part():
    x = drawn(n=40)
    coverage = np.ones(40)
    coverage[:3], coverage[3:7] = 0.5, 0.9
    found = fit_maxima(x, "gumbel", coverage=coverage)
    assert (found.blocks, found.missing) == (37, 3)
    assert found.fit.parameters == fit_maxima(x[3:], "gumbel").fit.parameters
    shift = -found.fit.parameters["scale"] * 4 * math.log(0.9) / 37
    assert codes(found) == ["missing-blocks", "incomplete-blocks"]
    assert f"by about {shift:.3g}." in found.doubts[1].message


def test_shift_of_the_location_by_gaps():
    """The doubt's figure against fits to the maxima of whole years and of nine tenths of them."""
    rng = np.random.default_rng(5)
    daily = rng.gumbel(0.0, 1.0, (4000, 100))
    whole, part = (fit_maxima(daily[:, :k].max(axis=1), "gumbel").fit.parameters for k in (100, 90))
    assert whole["location"] - part["location"] == pytest.approx(-whole["scale"] * math.log(0.9), abs=0.01)


def test_short_record():
    assert codes(fit_maxima(drawn(n=19), "gumbel")) == ["few-blocks"]
    assert codes(fit_maxima(drawn(n=20), "gumbel")) == []


def test_values_below_a_detection_limit():
    x = drawn(0.0, 2.0, 1.0, 60)
    limit = 1.8
    seen = np.where(x < limit, 0.0, x)

    def cost(p):
        law = stats.gumbel_r(p[0], math.exp(p[1]))
        return -(law.logpdf(x[x >= limit]).sum() + np.sum(x < limit) * law.logcdf(limit))

    best = optimize.minimize(cost, [2.0, 0.0], method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-11})
    found = fit_maxima(with_detection_limit(seen, limit), "gumbel")
    assert found.blocks == 60
    assert found.fit.parameters == pytest.approx(
        {"location": best.x[0], "scale": math.exp(best.x[1])}, rel=1e-5
    )


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"family": "weibull"}, "none of block maxima"),
        ({"family": ()}, "No family is named"),
        ({"family": "gumbel", "shape": 0.1}, "only the family 'gev'"),
        ({"family": "gev", "shape": 1.0, "method": "l_moments"}, "a shape of 1 or more has no mean"),
        ({"block_years": 0.0}, "positive number of years"),
        ({"blocks_expected": 39}, "more than the 39 blocks"),
        ({"coverage": [1.0]}, "1 values of coverage for 40 maxima"),
        ({"coverage": np.full(40, 1.2)}, "Coverage 1 is 1.2"),
        ({"coverage": np.full(40, 0.5)}, "No block was observed for at least 80 %"),
        ({"coverage": np.ones(40), "least_coverage": 2.0}, "least coverage"),
    ],
)
def test_refusals(arguments, message):
    with pytest.raises(InputError, match=message):
        fit_maxima(drawn(), **arguments)


@pytest.mark.parametrize(("limit", "message"), [(99.0, "None of the 3 values"), (math.nan, "finite number")])
def test_detection_limits_that_are_refused(limit, message):
    with pytest.raises(InputError, match=message):
        with_detection_limit([1.0, 2.0, 3.0], limit)


# Several stations ------------------------------


def test_one_station_is_a_single_fit():
    x = drawn()
    pooled, single = fit_pooled_shape([x]), fit_maxima(x, "gev")
    assert pooled.shape == pytest.approx(single.fit.parameters["shape"], abs=1e-9)
    assert pooled.standard_error == pytest.approx(single.fit.standard_errors["shape"], rel=1e-8)
    assert pooled.interval == pytest.approx(single.shape_interval, abs=1e-6)
    assert pooled.log_likelihood == pytest.approx(single.fit.log_likelihood, abs=1e-9)
    assert (pooled.freedom, math.isnan(pooled.statistic), math.isnan(pooled.p_value)) == (0, True, True)


def test_pooled_shape_recovers_the_truth(pooled):
    assert abs(pooled.shape - TRUE_SHAPE) < 2.0 * pooled.standard_error
    assert pooled.interval[0] < TRUE_SHAPE < pooled.interval[1]
    alone = [f.standard_errors["shape"] for f in pooled.separate.values()]
    assert pooled.standard_error == pytest.approx(np.sum(np.power(alone, -2.0)) ** -0.5, rel=0.1)


def test_pooled_likelihood_against_a_search_without_gradients(stations, pooled):
    def most(shape):
        parts = []
        for name, x in stations.items():
            start = pooled.fits[name].parameters
            parts.append(
                optimize.minimize(
                    lambda p, x=x: -stats.genextreme.logpdf(x, -shape, p[0], math.exp(p[1])).sum(),
                    [start["location"], math.log(start["scale"])],
                    method="Nelder-Mead",
                ).fun
            )
        return -sum(parts)

    values = [most(pooled.shape + d) for d in (-0.01, 0.0, 0.01)]
    assert pooled.log_likelihood == pytest.approx(values[1], abs=1e-6)
    assert values[1] > max(values[0], values[2])
    assert most(pooled.interval[1]) == pytest.approx(pooled.log_likelihood - 0.5 * 3.841459, abs=1e-5)
    assert pooled.log_likelihood == pytest.approx(
        sum(f.log_likelihood for f in pooled.fits.values()), abs=1e-8
    )


def test_likelihood_ratio(pooled):
    alone = sum(f.log_likelihood for f in pooled.separate.values())
    assert pooled.statistic == pytest.approx(2.0 * (alone - pooled.log_likelihood), abs=1e-9)
    assert pooled.p_value == pytest.approx(stats.chi2.sf(pooled.statistic, 5), rel=1e-9)
    assert codes(pooled) == []


def test_stations_that_differ():
    found = fit_pooled_shape({"a": drawn(-0.3, n=80), "b": drawn(0.4, n=80)})
    assert found.p_value < 1e-3
    assert "stations-differ" in codes(found)


def test_station_without_an_own_fit():
    """Four values whose likelihood grows without bound towards shape -1."""
    found = fit_pooled_shape({"long": drawn(), "short": [1.0, 2.9, 3.0, 3.0001]})
    assert found.fits["short"].converged
    assert not found.separate["short"].converged
    assert math.isnan(found.p_value)
    assert "pooling-not-tested" in codes(found)


def test_pooling_is_free_of_units(stations, pooled):
    scaled = {name: 1000.0 * x for name, x in stations.items()}
    assert fit_pooled_shape(scaled).shape == pytest.approx(pooled.shape, abs=1e-8)


@pytest.mark.parametrize(
    ("samples", "message"),
    [
        ({}, "no station"),
        ({"north": [1.0, 2.0, 3.0]}, "'north' has 3 maxima; at least 4"),
        ({"north": [1.0, math.nan]}, "Station 'north': Value 2 of 2"),
        ({"north": drawn(), "south": np.ones(5)}, "Station 'south' by itself: all values are equal"),
    ],
)
def test_stations_that_are_refused(samples, message):
    with pytest.raises(InputError, match=message):
        fit_pooled_shape(samples)
