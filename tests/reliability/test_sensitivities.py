"""Sensitivity factors and exact derivatives of β, against central differences of β itself."""

import numpy as np
import pytest

import calibrate
from calibrate.distributions import distribution, maximum_of
from calibrate.expressions import parse
from calibrate.reliability import (
    CallableLimitState,
    ExpressionLimitState,
    Problem,
    beta_slope,
    form,
    parameter_slopes,
)

TEXT = "z * R * T - E * (D + L**1.2)"
VARIABLES = ("R", "T", "E", "D", "L")
QUANTITIES = {"z": np.array([2.2, 3.0, 4.5, 1.2])}
N = 4
FAMILIES = {
    # own parameters, and the basic variable that has them
    "normal": ({"location": 1.0, "scale": [0.05, 0.1, 0.15, 0.1]}, "R"),
    "lognormal": ({"median": 1.0, "log_sd": [0.05, 0.1, 0.15, 0.1]}, "R"),
    "gumbel_min": ({"location": 1.0, "scale": [0.04, 0.08, 0.1, 0.1]}, "R"),
    "weibull": ({"scale": 1.1, "shape": [8.0, 12.0, 20.0, 9.0]}, "R"),
    "weibull3": ({"threshold": 0.3, "scale": 0.8, "shape": [3.0, 4.0, 5.0, 6.0]}, "R"),
    "lognormal3": ({"threshold": 0.3, "median": 0.7, "log_sd": [0.1, 0.2, 0.15, 0.1]}, "R"),
    "beta": ({"shape_1": [4.0, 5.0, 6.0, 5.0], "shape_2": 3.0, "lower": 0.5, "upper": 1.4}, "R"),
    "truncated_normal": ({"location": 1.0, "scale": [0.1, 0.12, 0.2, 0.1], "lower": 0.4, "upper": 1.8}, "R"),
    "gumbel": ({"location": 0.6, "scale": [0.1, 0.15, 0.2, 0.1]}, "L"),
    "frechet": ({"scale": 0.6, "shape": [5.0, 6.0, 8.0, 9.0]}, "L"),
    "gamma": ({"shape": [6.0, 9.0, 12.0, 9.0], "scale": 0.08}, "L"),
    "exponential": ({"scale": [0.2, 0.3, 0.25, 0.3]}, "L"),
    "uniform": ({"lower": 0.2, "upper": [1.2, 1.6, 2.5, 1.3]}, "L"),
    "gev": ({"location": 0.6, "scale": [0.1, 0.15, 0.12, 0.1], "shape": [-0.1, 0.05, 0.1, 0.1]}, "L"),
    "student_t": ({"location": 0.8, "scale": [0.1, 0.15, 0.12, 0.1], "freedom": [6.0, 9.0, 14.0, 20.0]}, "L"),
}  # fmt: skip


def distributions(**changed):
    usual = {
        "R": distribution("lognormal", mean=1.0, cov=0.1),
        "T": distribution("normal", mean=1.0, sd=0.05),
        "E": distribution("lognormal", mean=1.0, cov=0.08),
        "D": distribution("normal", mean=0.5, cov=0.1),
        "L": distribution("gumbel", mean=0.6, cov=0.3),
    }
    return tuple((usual | changed).values())


def limit_state(quantities=QUANTITIES):
    return ExpressionLimitState(parse(TEXT), VARIABLES, quantities)


def beta_of(changed, quantities=QUANTITIES):
    result = form(limit_state(quantities), distributions(**changed), N)
    assert result.converged.all()
    return result.beta


def difference(function, value, step):
    """Return the central difference of fourth order of function around value."""
    h = step * np.maximum(np.abs(value), 0.1)
    near = function(value + h) - function(value - h)
    far = function(value + 2.0 * h) - function(value - 2.0 * h)
    return (8.0 * near - far) / (12.0 * h)


@pytest.mark.parametrize("family", FAMILIES)
def test_slopes_by_own_parameters(family):
    given, where = FAMILIES[family]
    own = {name: np.broadcast_to(np.asarray(v, dtype=float), (N,)) for name, v in given.items()}
    chosen = distributions(**{where: distribution(family, **own)})
    slopes = parameter_slopes(form(limit_state(), chosen, N), Problem(limit_state(), chosen, N))[where]
    assert set(slopes) == set(own)
    for parameter, value in own.items():

        def moved(v, parameter=parameter):
            return beta_of({where: distribution(family, **{**own, parameter: v})})

        expected = difference(moved, value, 1e-3)
        np.testing.assert_allclose(slopes[parameter], expected, rtol=2e-7, atol=1e-8, err_msg=parameter)


def test_slopes_by_parameters_of_the_base_of_an_extreme():
    location, scale = np.full(N, 0.4), np.array([0.1, 0.12, 0.15, 0.1])

    def action(location, scale):
        return maximum_of(distribution("normal", location=location, scale=scale), 50.0)

    chosen = distributions(L=action(location, scale))
    slopes = parameter_slopes(form(limit_state(), chosen, N), Problem(limit_state(), chosen, N))["L"]
    by_location = difference(lambda v: beta_of({"L": action(v, scale)}), location, 1e-3)
    by_scale = difference(lambda v: beta_of({"L": action(location, v)}), scale, 1e-3)
    np.testing.assert_allclose(slopes["location"], by_location, rtol=2e-7)
    np.testing.assert_allclose(slopes["scale"], by_scale, rtol=2e-7)


def test_every_variable_has_its_slopes_whatever_the_kind_of_limit_state():
    def g(R, T, E, D, L, z):
        return z * R * T - E * (D + L**1.2)

    chosen = distributions()
    result = form(limit_state(), chosen, N)
    exact = parameter_slopes(result, Problem(limit_state(), chosen, N))
    by_differences = parameter_slopes(
        result, Problem(CallableLimitState(g, VARIABLES, QUANTITIES), chosen, N)
    )
    assert list(exact) == list(VARIABLES)
    for name, d in zip(VARIABLES, chosen, strict=True):
        assert set(exact[name]) == set(d.family.parameter_names)
        for parameter, slope in exact[name].items():
            assert slope.shape == (N,)
            np.testing.assert_allclose(by_differences[name][parameter], slope, rtol=1e-7)


def test_slope_by_a_quantity_of_the_limit_state():
    """dg/dz at the design point is R T."""
    result = form(limit_state(), distributions(), N)
    x = dict(zip(VARIABLES, result.x, strict=True))
    exact = beta_slope(result, x["R"] * x["T"])
    expected = difference(lambda z: beta_of({}, {"z": z}), QUANTITIES["z"], 1e-3)
    np.testing.assert_allclose(exact, expected, rtol=2e-8)


def test_several_quantities_at_once():
    result = form(limit_state(), distributions(), N)
    slopes = beta_slope(result, np.ones((3, N)))
    assert slopes.shape == (3, N)
    np.testing.assert_array_equal(slopes[0], 1.0 / result.gradient_norm)
    np.testing.assert_array_equal(beta_slope(result, 2.0), 2.0 / result.gradient_norm)


def test_no_design_point_no_slope():
    state = ExpressionLimitState(parse("z + R**2"), ("R",), {"z": np.array([-0.5, 1.0])})
    chosen = (distribution("normal", mean=0.0, sd=1.0),)
    result = form(state, chosen, 2)
    slopes = parameter_slopes(result, Problem(state, chosen, result.n))["R"]
    assert np.isfinite(slopes["scale"]).tolist() == [True, False]
    assert np.isnan(beta_slope(result, 1.0)).tolist() == [False, True]


# Sensitivity factors ------------------------------

SIGNS = {"R": 1, "T": 1, "E": -1, "D": -1, "L": -1}


@pytest.mark.parametrize("z", [0.6, 1.1, 3.0, 8.0])
def test_resistances_are_positive_and_actions_negative(z):
    result = form(limit_state({"z": z}), distributions(), 1)
    for name, alpha in zip(VARIABLES, result.alpha, strict=True):
        assert np.sign(alpha) == SIGNS[name]
    assert np.sum(result.alpha**2, axis=0) == pytest.approx(1.0, abs=1e-14)
    np.testing.assert_allclose(result.u, -result.beta * result.alpha, rtol=1e-14)
    assert np.linalg.norm(result.u) == pytest.approx(abs(result.beta[0]), rel=1e-14)
    g, gradient = limit_state({"z": z}).gradient(result.x)
    along = [by * d.x_slope(u)[1] for by, d, u in zip(gradient, distributions(), result.u, strict=True)]
    norm = np.linalg.norm(along, axis=0)
    np.testing.assert_allclose(np.array(along) / norm, result.alpha, atol=1e-7)
    np.testing.assert_allclose(norm, result.gradient_norm, rtol=1e-6)
    assert abs(g) <= 1e-10 * norm


def test_the_design_value_is_the_quantile_at_minus_alpha_beta():
    result = form(limit_state(), distributions(), N)
    for d, u, x in zip(distributions(), -result.alpha * result.beta, result.x, strict=True):
        np.testing.assert_allclose(d.x(u), x, rtol=1e-9)


def test_alpha_is_the_slope_of_beta_by_a_shift_in_standard_normal_space():
    """The mean of a normal variable in units of its sd: d beta/d (mean/sd) = alpha."""
    mean = np.full(N, 1.0)
    result = form(limit_state(), distributions(), N)
    shift = difference(lambda m: beta_of({"T": distribution("normal", mean=m, sd=0.05)}), mean, 1e-3) * 0.05
    np.testing.assert_allclose(result.alpha[1], shift, rtol=1e-7)


@pytest.mark.parametrize("text", ["R - S", "R / S - 1", "R**2 - S**2"])
def test_factors_and_slopes_are_defined_at_beta_zero(text):
    """Equal medians of lognormals: beta = ln(mR/mS)/s in closed form, with its slopes."""
    variables = {
        name: calibrate.distribution("lognormal", median=2.0, log_sd=s)
        for name, s in [("R", 0.3), ("S", 0.4)]
    }
    result = calibrate.form(text, variables)
    assert result.beta == pytest.approx(0.0, abs=1e-15)
    assert result.sensitivity["R"] == pytest.approx(0.6, abs=1e-12)
    assert result.sensitivity["S"] == pytest.approx(-0.8, abs=1e-12)
    assert result.failure_probability == pytest.approx(0.5, abs=1e-15)
    state = ExpressionLimitState(parse(text), ("R", "S"), {})
    chosen = tuple(variables.values())
    slopes = parameter_slopes(form(state, chosen, 1), Problem(state, chosen, 1))
    assert slopes["R"]["median"] == pytest.approx(1.0 / (2.0 * 0.5), rel=1e-12)
    assert slopes["S"]["median"] == pytest.approx(-1.0 / (2.0 * 0.5), rel=1e-12)
    assert slopes["R"]["log_sd"] == pytest.approx(0.0, abs=1e-12)


def test_a_constant_has_no_share():
    variables = {
        "R": calibrate.distribution("normal", mean=350.0, sd=35.0),
        "S": calibrate.distribution("constant", value=200.0),
    }
    result = calibrate.form("R - S", variables)
    assert result.beta == pytest.approx(150.0 / 35.0, rel=1e-14)
    assert result.sensitivity["S"] == 0.0
    assert result.design_point["S"] == 200.0
