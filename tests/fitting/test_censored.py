"""Likelihood of bounds and of truncated samples against scipy's own censored fits and the textbook formula."""

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.distributions import distribution
from calibrate.fitting import fit_family
from calibrate.fitting.censored import censored_likelihood, log_likelihood, search_of
from calibrate.fitting.registry import model_of
from calibrate.records.observations import Observations

SEED = 2
INF = np.inf


def observed(values, kind):
    """Return the values as observations of which about a third is known by bounds only."""
    low, middle, high = np.quantile(values, [0.3, 0.5, 0.7])
    lower, upper = values.copy(), values.copy()
    if kind in {"right", "mixed"}:
        lower, upper = np.minimum(lower, high), np.where(values > high, INF, upper)
    if kind in {"left", "mixed"}:
        lower, upper = np.where(values < low, -INF, lower), np.maximum(upper, low)
    if kind in {"interval", "mixed"}:
        inside = (values > low) & (values < middle)
        lower, upper = np.where(inside, low, lower), np.where(inside, middle, upper)
    return Observations(lower, upper)


KINDS = ["right", "left", "interval", "mixed"]


def test_complete_samples_have_the_complete_likelihood(regular):
    values = regular.sample(30, SEED)
    expected = regular.fit(values)
    fixed = {**model_of(regular.family).preset, **regular.fixed}
    found = censored_likelihood(Observations.of(values), model_of(regular.family), fixed, regular.free)
    assert not found.reason
    errors = expected.standard_errors
    for name in regular.free:
        assert found.parameters[name] == pytest.approx(expected.parameters[name], abs=1e-6 * errors[name]), (
            name
        )
    assert found.log_likelihood == pytest.approx(expected.log_likelihood, rel=1e-10, abs=1e-8)
    scale = np.sqrt(np.outer(np.diag(expected.covariance), np.diag(expected.covariance)))
    np.testing.assert_allclose(found.covariance / scale, expected.covariance / scale, rtol=0, atol=1e-6)


@pytest.mark.parametrize("kind", ["mixed", "interval"])
def test_gradient_is_that_of_differences(regular, kind):
    values = regular.sample(40, SEED)
    seen = observed(values, kind)
    search = search_of(seen, regular.family, regular.fixed, regular.free)
    inner = {r.name: search.data.inward(r.kind, regular.parameters[r.name]) for r in search.free}
    t = search.coordinates(inner)
    for i, slope in enumerate(search.first(t)[1]):
        step = 1e-5 * np.eye(t.size)[i]
        rise = (search.first(t + step)[0] - search.first(t - step)[0]) / 2e-5
        assert slope == pytest.approx(rise, rel=1e-6, abs=1e-8)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("family", "law", "own"),
    [
        ("weibull", stats.weibull_min, lambda c, loc, scale: {"scale": scale, "shape": c}),
        ("lognormal", stats.lognorm, lambda s, loc, scale: {"median": scale, "log_sd": s}),
        ("gamma", stats.gamma, lambda a, loc, scale: {"shape": a, "scale": scale}),
        ("normal", stats.norm, lambda loc, scale: {"location": loc, "scale": scale}),
        ("gumbel", stats.gumbel_r, lambda loc, scale: {"location": loc, "scale": scale}),
    ],
)
def test_censored_fits_of_scipy(family, law, own, kind):
    values = 20.0 + 5.0 * np.random.default_rng(7).standard_normal(60)
    seen = observed(values, kind)
    found = fit_family(seen, family)
    data = stats.CensoredData(
        uncensored=seen.lower[seen.exact],
        left=seen.upper[seen.left],
        right=seen.lower[seen.right],
        interval=np.column_stack([seen.lower[seen.interval], seen.upper[seen.interval]]),
    )
    held = {} if family in {"normal", "gumbel"} else {"floc": 0.0}
    # Scipy's simplex stops at relative steps of 1e-4.
    assert found.parameters == pytest.approx(own(*law.fit(data, **held)), rel=2e-4)


def truncated_likelihood(law, values, above, below):
    """Return the textbook log-likelihood of a sample of what lies between two limits."""
    return np.sum(law.logpdf(values)) - values.size * np.log(law.cdf(below) - law.cdf(above))


TRUNCATED = {
    "weibull": lambda t: stats.weibull_min(np.exp(t[1]), scale=np.exp(t[0])),
    "lognormal": lambda t: stats.lognorm(np.exp(t[1]), scale=np.exp(t[0])),
    "normal": lambda t: stats.norm(t[0], np.exp(t[1])),
    "gumbel": lambda t: stats.gumbel_r(t[0], np.exp(t[1])),
}


@pytest.mark.parametrize(("above", "below"), [(17.0, INF), (15.0, 26.0)])
@pytest.mark.parametrize("family", TRUNCATED)
def test_truncated_samples_against_the_textbook_formula(family, above, below):
    values = 20.0 + 4.0 * np.random.default_rng(5).standard_normal(300)
    values = values[(values > above) & (values < below)]
    found = fit_family(Observations(values, values, above, below), family)

    def depth(t):
        return -truncated_likelihood(TRUNCATED[family](t), values, above, below)

    own_names = list(found.parameters)
    logarithmic = [n in {"scale", "shape", "median", "log_sd"} for n in own_names]
    own_values = np.array(list(found.parameters.values()))
    start = np.where(logarithmic, np.log(own_values), own_values)
    options = {"xatol": 1e-8, "fatol": 1e-10, "maxfev": 2000}
    best = optimize.minimize(depth, start + 0.1, method="Nelder-Mead", options=options)
    assert found.log_likelihood == pytest.approx(-best.fun, abs=1e-6)
    np.testing.assert_allclose(start, best.x, rtol=0, atol=2e-5)


def test_a_truncated_normal_sample_is_the_truncated_normal_family():
    values = distribution("truncated_normal", location=1.0, scale=2.0, lower=0.0, upper=np.inf).sample(
        np.random.default_rng(4), 200
    )
    found = fit_family(Observations(values, values, above=0.0), "normal")
    expected = fit_family(values, "truncated_normal", fixed={"lower": 0.0, "upper": INF})
    assert found.parameters == pytest.approx({k: expected.parameters[k] for k in found.parameters}, rel=1e-6)
    assert found.log_likelihood == pytest.approx(expected.log_likelihood, rel=1e-9)
    np.testing.assert_allclose(found.covariance, expected.covariance, rtol=1e-5)


def test_reported_likelihood_is_that_of_the_distribution(regular):
    seen = observed(regular.sample(200, SEED), "mixed")
    found = regular.fit(seen)
    law = found.distribution
    exact = seen.exact
    lower, upper = law.cdf(seen.lower[~exact]), law.cdf(seen.upper[~exact])
    expected = np.sum(law.logpdf(seen.lower[exact])) + np.sum(np.log(upper - lower))
    assert found.log_likelihood == pytest.approx(expected, rel=1e-9)
    assert log_likelihood(law, seen) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    "name", ["weibull", "gamma, scale given", "gev", "weibull3, estimated", "truncated_normal"]
)
def test_the_unit_does_not_matter(cases, name):
    regular, factor = cases[name], 25.4e-3
    seen = observed(regular.sample(200, SEED), "right")
    found = regular.fit(seen)
    fixed = {name: regular.scaled(regular.fixed, factor)[name] for name in regular.given}
    other = fit_family(seen.scaled(factor), regular.family, fixed=fixed, estimate=regular.estimate)
    assert other.parameters == pytest.approx(regular.scaled(found.parameters, factor), rel=1e-6)
    assert other.log_likelihood == pytest.approx(
        found.log_likelihood - seen.n_exact * np.log(factor), rel=1e-9
    )


def test_random_censoring_does_not_bias():
    family, truth = "weibull", {"scale": 40.0, "shape": 3.0}
    rng = np.random.default_rng(11)
    law, count, n = distribution(family, **truth), 100, 60
    estimates, errors, censored = [], [], []
    for _ in range(count):
        # The limit has the life's own distribution, raised so that it comes first in about 40 of 100.
        life, limit = law.sample(rng, n), law.sample(rng, n) * 1.09
        upper = np.where(life > limit, INF, life)
        found = fit_family(Observations(np.minimum(life, limit), upper), family)
        estimates.append(list(found.parameters.values()))
        errors.append(list(found.standard_errors.values()))
        censored.append(np.mean(np.isinf(upper)))
    assert np.mean(censored) == pytest.approx(0.4, abs=0.05)
    estimates, errors = np.array(estimates), np.array(errors)
    scatter = np.std(estimates, axis=0, ddof=1)
    true = np.array(list(truth.values()))
    # The likelihood's own bias is of the order of the scatter over sqrt(n).
    assert np.all(np.abs(estimates.mean(axis=0) - true) < 4 * scatter / np.sqrt(count) + scatter / np.sqrt(n))
    np.testing.assert_allclose(errors.mean(axis=0), scatter, rtol=4 / np.sqrt(2 * count))


def test_what_bounds_cannot_tell_is_a_failed_fit_with_a_reason():
    bounds = np.arange(1.0, 7.0)
    never = np.full(6, INF)
    once = np.array([INF, INF, INF, INF, INF, 6.0])
    cases = [
        (Observations(bounds, never), "every specimen is only known to lie above its bound"),
        (Observations(-never, bounds), "every specimen is only known to lie below its bound"),
        (Observations(bounds, once), "all values observed exactly are 6, which every bound allows"),
        (Observations(bounds * 0 + 1.0, bounds * 0 + 2.0), "the bounds alone do not determine"),
        (Observations([5.0, 5.0, -INF, -INF], [INF, INF, 5.0, 5.0]), "the bounds alone do not determine"),
        (Observations([1.0, 2.0, -INF, -INF], [INF, INF, 4.0, 5.0]), "the bounds alone do not determine"),
        (Observations([5.0, 5.0, 5.0], [5.0, INF, INF]), "all values are equal"),
    ]
    for seen, words in cases:
        for family in ("normal", "weibull", "gumbel"):
            found = fit_family(seen, family)
            assert found.status == "failed", (family, words)
            assert words in found.reason, (family, found.reason)


def test_bounds_on_both_sides_alone_can_tell():
    # A probit analysis: 60 specimens, each tried at one load; scipy's maximum beside it.
    rng = np.random.default_rng(8)
    loads, strength = rng.uniform(10.0, 30.0, 60), rng.normal(20.0, 4.0, 60)
    broken = strength < loads
    found = fit_family(Observations(np.where(broken, -INF, loads), np.where(broken, loads, INF)), "normal")
    data = stats.CensoredData(left=loads[broken], right=loads[~broken])
    location, scale = stats.norm.fit(data)
    assert found.parameters == pytest.approx({"location": location, "scale": scale}, rel=2e-4)
    assert [d.code for d in found.doubts] == ["few-exact-values"]


def test_a_family_that_is_its_extremes_takes_complete_samples_only():
    found = fit_family(Observations([1.0, 2.0, 3.0], [1.0, 2.0, INF]), "uniform")
    assert "complete samples only" in found.reason


def test_standard_errors_are_withheld_where_the_theory_gives_none():
    values = stats.weibull_min(1.5).rvs(400, random_state=1)
    found = fit_family(observed(values, "right"), "weibull3", estimate=["threshold"])
    assert found.converged
    assert np.all(np.isnan(found.covariance))
    assert "not-regular" in [d.code for d in found.doubts]
