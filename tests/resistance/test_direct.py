"""Direct design values: scipy's t, posterior integration on a grid, and simulated samples of known truth."""

import math

import numpy as np
import pytest
from scipy import optimize, special, stats

from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.fitting.characteristic import EN_1990_TABLE_D2
from calibrate.resistance import Fractiles, Prior, plain_design_value, predictive_design_value

X = np.array([41.2, 38.7, 44.9, 40.3, 42.8, 39.5, 46.1, 43.0])
TAIL = float(special.ndtr(-3.04))
ROUTES = (plain_design_value, predictive_design_value)


def t_interval_end(y, tail):
    return stats.t.ppf(tail, y.size - 1, y.mean(), y.std(ddof=1) * math.sqrt(1 + 1 / y.size))


@pytest.mark.parametrize("route", ROUTES)
def test_both_routes_are_the_prediction_of_a_further_specimen(route):
    # With the computed factor and no prior they are one value (EN 1990:2002, D.7, vague prior, from memory).
    normal = route(X, "normal")
    assert normal.x_k == pytest.approx(t_interval_end(X, 0.05), rel=1e-9)
    assert normal.x_d == pytest.approx(t_interval_end(X, TAIL), rel=1e-9)
    lognormal = route(X)
    assert lognormal.x_k == pytest.approx(math.exp(t_interval_end(np.log(X), 0.05)), rel=1e-9)
    assert lognormal.x_d == pytest.approx(math.exp(t_interval_end(np.log(X), TAIL)), rel=1e-9)
    assert lognormal.gamma_m == pytest.approx(lognormal.x_k / lognormal.x_d, rel=1e-15)
    assert lognormal.mean == pytest.approx(np.log(X).mean(), rel=1e-12)
    assert lognormal.sd == pytest.approx(np.log(X).std(ddof=1), rel=1e-10)
    assert (lognormal.size, lognormal.freedom) == (8.0, 7.0)


@pytest.mark.parametrize("route", ROUTES)
def test_known_scatter(route):
    k = 3.04 * math.sqrt(9 / 8)
    normal = route(X, "normal", known_cov=0.1)
    assert normal.x_d == pytest.approx(X.mean() * (1 - k * 0.1), rel=1e-9)
    assert math.isinf(normal.freedom)
    lognormal = route(X, known_cov=0.1)
    expected = math.exp(np.log(X).mean() - k * math.sqrt(math.log1p(0.01)))
    assert lognormal.x_d == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("route", ROUTES)
def test_one_value_serves_where_the_scatter_is_known(route):
    assert route([50.0], "normal", known_cov=0.1).x_d == pytest.approx(
        50.0 * (1 - 0.304 * math.sqrt(2)), rel=1e-9
    )
    with pytest.raises(InputError, match="at least 2"):
        route([50.0], "normal")


def test_the_printed_factors():
    found = plain_design_value(X, "normal", fractiles=Fractiles(source="table"))
    assert found.k_d_n == EN_1990_TABLE_D2["unknown"][8] == 5.07
    assert found.x_d == pytest.approx(X.mean() - 5.07 * X.std(ddof=1), rel=1e-12)
    # The predictive value has no part in the table and shows what it would have said.
    predictive = predictive_design_value(X, "normal", fractiles=Fractiles(source="table"))
    assert predictive.k_d_n == pytest.approx(4.9229, abs=1e-4)
    assert predictive.factors.printed_k_d_n == 5.07
    assert predictive.factors.source == "formula"


def test_the_closed_form_factor_of_a_known_normal_population():
    # (1 - 1.645 V)/(1 - 3.04 V) of an endless sample (fib Bulletin 80, from memory).
    for v, printed in ((0.05, 1.082252), (0.10, 1.200431), (0.15, 1.384651), (0.20, 1.711735)):
        found = plain_design_value(np.full(1_000_000, 50.0), "normal", known_cov=v)
        assert found.gamma_m == pytest.approx(printed, abs=4e-4)
        exact = (1 - 1.645 * v) / (1 - 3.04 * v)
        assert printed == pytest.approx(exact, abs=1e-6)


@pytest.mark.parametrize("route", ROUTES)
def test_units_and_conversion(route):
    for family in ("normal", "lognormal"):
        plain = route(X, family)
        assert route(1000.0 * X, family).x_d == pytest.approx(1000.0 * plain.x_d, rel=1e-11)
        reduced = route(X, family, conversion=0.8)
        assert (reduced.x_k, reduced.x_d) == pytest.approx((0.8 * plain.x_k, 0.8 * plain.x_d), rel=1e-14)


# Prior knowledge.

PRIOR = Prior(mean=43.0, sd=2.0, size=3.0, freedom=6.0)


def test_the_posterior_against_integration():
    # Normal-inverse-gamma prior and likelihood multiplied on a grid of mean and ln sd, no conjugacy used.
    mean = np.linspace(30.0, 55.0, 1201)[:, None]
    log_sd = np.linspace(-1.2, 3.2, 1201)[None, :]
    sd = np.exp(log_sd)
    density = stats.norm.logpdf(mean, PRIOR.mean, sd / math.sqrt(PRIOR.size))
    # nu' s'²/sigma² is chi-square; per ln sd its density has the factor of the change of variable, 2 times itself.
    q = PRIOR.freedom * PRIOR.sd**2 / sd**2
    density = density + stats.chi2.logpdf(q, PRIOR.freedom) + np.log(q)
    for x in X:
        density = density + stats.norm.logpdf(x, mean, sd)
    weight = np.exp(density - density.max())
    weight /= weight.sum()
    found = predictive_design_value(X, "normal", prior=PRIOR)

    def below(x):
        return float(np.sum(weight * special.ndtr((x - mean) / sd)))

    assert below(found.x_k) == pytest.approx(0.05, rel=1e-6)
    assert below(found.x_d) == pytest.approx(TAIL, rel=1e-5)
    assert optimize.brentq(lambda x: below(x) - 0.05, 20.0, 45.0) == pytest.approx(found.x_k, rel=1e-6)


def test_the_prior_of_logarithms():
    prior = Prior(mean=math.log(43.0), sd=0.06, size=3.0, freedom=6.0)
    logs = predictive_design_value(np.log(X), "normal", prior=prior)
    found = predictive_design_value(X, prior=prior)
    assert found.x_d == pytest.approx(math.exp(logs.x_d), rel=1e-13)
    assert found.factors is None
    assert (found.size, found.freedom) == (11.0, 14.0)


def test_a_prior_that_knows_nothing_is_no_prior():
    empty = Prior(mean=0.0, sd=1.0, size=0.0, freedom=0.0)
    for known in (None, 0.1):
        with_it = predictive_design_value(X, prior=empty, known_cov=known)
        without = predictive_design_value(X, known_cov=known)
        assert with_it.x_d == pytest.approx(without.x_d, rel=1e-11)
        assert with_it.k_d_n == pytest.approx(without.k_d_n, rel=1e-11)


def test_a_prior_that_knows_all_is_the_population():
    sure = Prior(mean=42.0, sd=2.5, size=1e9, freedom=1e9)
    found = predictive_design_value(X, "normal", prior=sure)
    assert found.x_d == pytest.approx(42.0 - 3.04 * 2.5, rel=1e-6)


def test_a_prior_of_the_scatter_helps_a_small_sample():
    scatter_only = Prior(mean=0.0, sd=2.5, size=0.0, freedom=20.0)
    assert (
        predictive_design_value(X[:3], "normal", prior=scatter_only).k_d_n
        < 0.3 * predictive_design_value(X[:3], "normal").k_d_n
    )


# What the value states.


def test_a_further_specimen_falls_below_with_the_stated_probability_and_the_limit_is_unsafe_with_the_stated_chance():
    true, above = [], []
    for i in range(500):
        y = stream(40, "direct", i).normal(3.0, 0.1, 12)
        found = predictive_design_value(np.exp(y))
        true.append(special.ndtr((math.log(found.x_d) - 3.0) / 0.1))
        above.append(found.x_d > math.exp(3.0 - 0.304))
    assert np.mean(true) == pytest.approx(TAIL, abs=4 * np.std(true) / math.sqrt(500))
    k = -stats.t.ppf(TAIL, 11) * math.sqrt(13 / 12)
    chance = 1.0 - stats.nct.cdf(k * math.sqrt(12), 11, 3.04 * math.sqrt(12))
    assert np.mean(above) == pytest.approx(chance, abs=4 * math.sqrt(chance * (1 - chance) / 500))


# Doubts and refusals.


def test_a_normal_design_value_below_zero_is_doubted():
    found = plain_design_value([10.0, 20.0, 30.0, 15.0], "normal")
    assert found.x_d < 0.0
    assert math.isnan(found.gamma_m)
    assert [d.code for d in found.doubts] == ["design-value-not-positive"]


@pytest.mark.parametrize("route", ROUTES)
@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"values": [1.0, -2.0, 3.0]}, "Value 2 is -2; .* finite and above zero"),
        ({"values": [1.0, math.nan, 3.0], "family": "normal"}, "Value 2 is nan"),
        ({"values": [2.0, 2.0, 2.0]}, "no scatter to estimate"),
        ({"values": [[1.0, 2.0]]}, "2 dimensions"),
        ({"values": X, "family": "log-normal"}, "Did you mean 'lognormal'"),
        ({"values": X, "known_cov": 0.0}, "known coefficient of variation is 0"),
        ({"values": X, "conversion": -1.0}, "conversion factor is -1"),
    ],
)
def test_refusals(route, arguments, message):
    with pytest.raises(InputError, match=message):
        route(**arguments)


def test_every_problem_of_a_prior_is_told():
    with pytest.raises(InputError) as caught:
        Prior(mean=math.nan, sd=0.0, size=-1.0, freedom=-1.0)
    assert len(caught.value.problems) == 4
