"""The largest likelihood against scipy's densities and optimisers, which share no formula with the package."""

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.distributions import family
from calibrate.fitting import FITTABLE, fit_family

SEED = 2  # one whose samples have a maximum in every case


def best_of_another_route(case, values):
    """Climb from the true parameters by a simplex on scipy's density; return parameters and log-likelihood."""
    positive = {q.name for q in family(case.family).parameters if q.domain.low == 0.0}

    def parameters(t):
        moved = {n: np.exp(v) if n in positive else v for n, v in zip(case.free, t, strict=True)}
        return {name: moved.get(name, case.parameters[name]) for name in case.parameters}

    def height(t):
        with np.errstate(all="ignore"):
            value = case.log_likelihood(values, parameters(t))
        return -value if np.isfinite(value) else 1e300

    t = np.array([np.log(p) if n in positive else p for n, p in case.parameters.items() if n in case.free])
    options = {"xatol": 1e-8, "fatol": 1e-11, "maxfev": 3000, "maxiter": 3000}
    for _ in range(2):  # a second simplex starts afresh where the first one has grown too flat
        found = optimize.minimize(height, t, method="Nelder-Mead", options=options)
        t = found.x
    return parameters(t), -float(found.fun)


def covariance_by_differences(case, values, found):
    """Invert the Hessian of the negative log-likelihood, by central differences of fourth order."""
    free, errors = found.free, np.array([found.standard_errors[n] for n in found.free])
    offsets, weights = np.array([-2, -1, 1, 2]), np.array([1, -8, 8, -1]) / 12
    step = 0.005

    def height(t):
        moved = dict(zip(free, np.array([found.parameters[n] for n in free]) + t * errors, strict=True))
        return -case.log_likelihood(values, {**found.parameters, **moved})

    unit = np.eye(len(free)) * step
    hessian = np.array(
        [
            [
                sum(
                    wa * wb * height(a * ei + b * ej)
                    for a, wa in zip(offsets, weights, strict=True)
                    for b, wb in zip(offsets, weights, strict=True)
                )
                for ej in unit
            ]
            for ei in unit
        ]
    )
    return np.linalg.inv(hessian / step**2) * np.outer(errors, errors)


def test_every_family_that_can_be_fitted_has_a_case(cases):
    assert {case.family for case in cases.values()} == set(FITTABLE)


@pytest.mark.parametrize("n", [30, 200])
def test_no_other_route_climbs_higher(regular, n):
    values = regular.sample(n, SEED)
    found = regular.fit(values)
    parameters, height = best_of_another_route(regular, values)
    assert found.log_likelihood >= height - 1e-6
    for name in found.free:
        tolerance = 1e-3 * found.standard_errors[name]
        assert found.parameters[name] == pytest.approx(parameters[name], abs=tolerance), name


def test_log_likelihood_is_that_of_the_density(regular):
    values = regular.sample(30, SEED)
    found = regular.fit(values)
    assert found.log_likelihood == pytest.approx(regular.log_likelihood(values, found.parameters), rel=1e-11)


@pytest.mark.parametrize("n", [30, 200])
def test_covariance_is_the_inverse_of_the_observed_information(regular, n):
    values = regular.sample(n, SEED)
    found = regular.fit(values)
    expected = covariance_by_differences(regular, values, found)
    scale = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
    np.testing.assert_allclose(found.covariance / scale, expected / scale, rtol=0, atol=1e-5)
    errors = [found.standard_errors[name] for name in found.free]
    np.testing.assert_allclose(errors, np.sqrt(np.diag(found.covariance)), rtol=1e-14)
    assert all(found.standard_errors[name] == 0.0 for name in regular.given)


@pytest.mark.parametrize("n", [1500, 6000])  # the latter begins its search on a part of the values
def test_known_parameters_are_recovered(regular, n):
    found = regular.fit(regular.sample(n, SEED))
    for name in found.free:
        assert abs(found.parameters[name] - regular.parameters[name]) < 4 * found.standard_errors[name], name


@pytest.mark.parametrize(
    ("name", "law", "own"),
    [
        ("normal", stats.norm, lambda loc, scale: {"location": loc, "scale": scale}),
        ("lognormal", stats.lognorm, lambda s, loc, scale: {"median": scale, "log_sd": s}),
        ("gumbel", stats.gumbel_r, lambda loc, scale: {"location": loc, "scale": scale}),
        ("gumbel_min", stats.gumbel_l, lambda loc, scale: {"location": loc, "scale": scale}),
        ("weibull", stats.weibull_min, lambda c, loc, scale: {"scale": scale, "shape": c}),
        ("frechet", stats.invweibull, lambda c, loc, scale: {"scale": scale, "shape": c}),
        ("gamma", stats.gamma, lambda a, loc, scale: {"shape": a, "scale": scale}),
        ("exponential", stats.expon, lambda loc, scale: {"scale": scale}),
        ("uniform", stats.uniform, lambda loc, scale: {"lower": loc, "upper": loc + scale}),
    ],
)
def test_estimates_of_scipy(name, law, own):
    values = 20.0 + 3.0 * np.random.default_rng(5).standard_normal(80)
    held = {} if name in {"normal", "gumbel", "gumbel_min", "uniform"} else {"floc": 0.0}
    # Scipy's simplex stops at a relative step of 1e-4 in log-likelihood and parameters.
    assert fit_family(values, name).parameters == pytest.approx(own(*law.fit(values, **held)), rel=1e-4)


def test_bounds_of_a_uniform_family_are_the_extreme_values():
    values = np.random.default_rng(3).uniform(-4.0, 11.0, 50)
    found = fit_family(values, "uniform")
    assert found.parameters == {"lower": pytest.approx(values.min()), "upper": pytest.approx(values.max())}
    assert found.log_likelihood == pytest.approx(-50 * np.log(np.ptp(values)), rel=1e-13)


@pytest.mark.parametrize("name", ["lognormal", "weibull", "frechet", "normal", "gumbel"])
def test_scatter_far_below_the_mean(name):
    """The estimates of 1 + s z tend to those of z as s falls: the logarithm of 1 + s z is s z."""
    z = np.random.default_rng(1).standard_normal(40)
    limit = {"lognormal": "normal", "weibull": "gumbel_min", "frechet": "gumbel"}.get(name, name)
    fitted = fit_family(1.0 + 1e-8 * z, name).distribution
    expected = fit_family(z, limit).distribution
    np.testing.assert_allclose(
        (fitted.ppf([0.1, 0.5, 0.9]) - 1.0) / 1e-8, expected.ppf([0.1, 0.5, 0.9]), atol=1e-6
    )
