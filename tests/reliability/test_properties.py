"""What must hold of any reliability index: closed forms, and changes of the question that do not change the answer."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import calibrate
from calibrate.distributions import distribution
from calibrate.reliability import CallableLimitState, form

FEW = settings(max_examples=25)
CLOSE = 1e-8

RESISTANCES = ("normal", "lognormal", "weibull", "gumbel_min", "gamma")
ACTIONS = ("normal", "lognormal", "gumbel", "frechet", "gamma", "uniform")

factors = st.floats(1e-6, 1e6)
covs = st.floats(0.05, 0.3)
sizes = st.integers(1, 6)
seeds = st.integers(0, 2**32 - 1)


@st.composite
def situations(draw):
    """Draw a resistance and two actions of random families and scatter, beta about -3 to 12."""
    kinds = {"R": RESISTANCES, "G": ACTIONS, "Q": ACTIONS}
    variable = draw(st.floats(0.3, 1.5))
    means = {"R": draw(st.floats(0.9, 1.6)) * (1.0 + variable), "G": 1.0, "Q": variable}
    return {
        name: distribution(draw(st.sampled_from(families)), mean=means[name], cov=draw(covs))
        for name, families in kinds.items()
    }


def solve(limit_state, variables, **quantities):
    result = calibrate.form(limit_state, variables, quantities=quantities)
    assert result.status == "converged"
    return result


def assert_same(result, expected, tolerance=CLOSE):
    """Compare reliability index and sensitivity factors."""
    np.testing.assert_allclose(result.beta, expected.beta, atol=tolerance)
    for name, alpha in expected.sensitivity.items():
        # The design point is known to the root of what its distance is known to.
        np.testing.assert_allclose(result.sensitivity[name], alpha, atol=1e3 * tolerance)


# Closed forms ------------------------------


@FEW
@given(seeds, sizes)
def test_linear_with_normal_variables(seed, m):
    rng = np.random.default_rng(seed)
    mean, sd, c = (
        rng.normal(0.0, 2.0, m),
        rng.uniform(0.1, 3.0, m),
        rng.uniform(0.2, 2.0, m) * rng.choice([-1.0, 1.0], m),
    )
    scatter = np.linalg.norm(c * sd)
    beta = rng.uniform(-10.0, 10.0)
    variables = {f"x{i}": distribution("normal", mean=mean[i], sd=sd[i]) for i in range(m)}
    text = "b + " + " + ".join(f"({c[i]}) * x{i}" for i in range(m))
    result = solve(text, variables, b=beta * scatter - c @ mean)
    assert result.beta == pytest.approx(beta, abs=1e-12)
    np.testing.assert_allclose(list(result.sensitivity.values()), c * sd / scatter, atol=1e-12)
    np.testing.assert_allclose(
        list(result.design_point.values()), mean - c * sd**2 / scatter * beta, atol=1e-10
    )
    assert result.gradient_norm == pytest.approx(scatter, rel=1e-12)


@FEW
@given(seeds, sizes)
def test_products_of_powers_of_lognormal_variables(seed, m):
    """ln(z prod x^c) is normal: beta = (ln z + sum c ln median) / |c log_sd|."""
    rng = np.random.default_rng(seed)
    median, spread, c = rng.uniform(0.2, 5.0, m), rng.uniform(0.03, 0.5, m), rng.uniform(-2.0, 2.0, m)
    scatter = np.linalg.norm(c * spread)
    beta = rng.uniform(-8.0, 8.0)
    variables = {f"x{i}": distribution("lognormal", median=median[i], log_sd=spread[i]) for i in range(m)}
    text = "z * " + " * ".join(f"x{i}**({c[i]})" for i in range(m)) + " - 1"
    result = solve(text, variables, z=np.exp(beta * scatter - c @ np.log(median)))
    assert result.beta == pytest.approx(beta, abs=CLOSE)
    np.testing.assert_allclose(list(result.sensitivity.values()), c * spread / scatter, atol=1e-6)
    assert result.status == "converged"


@FEW
@given(st.sampled_from(ACTIONS), covs, st.floats(-7.0, 7.0))
def test_one_variable_has_its_quantile_as_design_point(family, cov, u):
    action = distribution(family, mean=1.0, cov=cov)
    result = solve("limit - S", {"S": action}, limit=action.x(u))
    # The limit is a number with 16 digits: in a bounded tail it says less of u than that.
    resolution = 4e-16 * abs(action.x(u)) / action.x_slope(u)[1]
    assert result.beta == pytest.approx(u, abs=CLOSE + resolution)
    assert result.sensitivity["S"] == -1.0


# Other ways to ask ------------------------------

G = "R - G - Q"


@FEW
@given(situations(), factors)
def test_a_positive_factor_of_the_limit_state_changes_nothing(variables, factor):
    plain = solve(G, variables)
    scaled = solve(f"c * ({G})", variables, c=factor)
    assert_same(scaled, plain)
    np.testing.assert_allclose(scaled.gradient_norm, factor * plain.gradient_norm, rtol=1e-6)


@FEW
@given(situations(), factors)
def test_units_change_nothing(variables, factor):
    plain = solve(G, variables)
    converted = solve(G, {name: d.scaled(factor) for name, d in variables.items()})
    assert_same(converted, plain)
    for name, x in plain.design_point.items():
        np.testing.assert_allclose(converted.design_point[name], factor * x, rtol=1e-5)


@FEW
@given(situations(), factors, factors)
def test_units_of_one_variable_change_nothing_when_the_limit_state_converts(variables, k, l):  # noqa: E741
    plain = solve(G, variables)
    converted = {"R": variables["R"].scaled(k), "G": variables["G"].scaled(l), "Q": variables["Q"]}
    assert_same(solve("R / k - G / l - Q", converted, k=k, l=l), plain)


@FEW
@given(situations())
def test_the_order_of_variables_changes_nothing(variables):
    assert_same(solve(G, dict(reversed(variables.items()))), solve(G, variables))


@FEW
@given(situations())
def test_the_form_of_the_limit_state_changes_nothing(variables):
    plain = solve(G, variables)
    for other in (
        "R >= G + Q",
        "R / 3 - (G + Q) / 3",
        "(R - G - Q) * exp(0.1 * (G + Q))",
        "(R - G - Q)**3 + R - G - Q",
    ):
        assert_same(solve(other, variables), plain)


@FEW
@given(situations())
def test_failure_and_safety_exchanged_turn_the_sign(variables):
    plain, turned = solve(G, variables), solve(f"-({G})", variables)
    np.testing.assert_allclose(turned.beta, -plain.beta, atol=CLOSE)
    for name, alpha in plain.sensitivity.items():
        np.testing.assert_allclose(turned.sensitivity[name], -alpha, atol=1e-5)


@FEW
@given(seeds, st.integers(2, 5))
def test_a_rotation_of_standard_normal_space_turns_the_design_point_with_it(seed, m):
    """A smooth, slightly curved limit state of standard normal variables, looked at from a turned frame."""
    rng = np.random.default_rng(seed)
    turn = np.linalg.qr(rng.normal(size=(m, m)))[0]
    c = rng.normal(size=m)
    b, k = rng.uniform(-4.0, 4.0) * np.linalg.norm(c), 0.02 * np.linalg.norm(c)
    bent = np.linalg.qr(rng.normal(size=(m, m)))[0][0]

    def seen_from(frame):
        names = tuple(f"u{i}" for i in range(m))
        first, second = frame.T @ c, frame.T @ bent

        def g(**u):
            rows = np.array([u[name] for name in names])
            return b + first @ rows + k * (second @ rows) ** 2

        def slopes(**u):
            along = second @ np.array([u[name] for name in names])
            return {name: first[i] + 2.0 * k * along * second[i] for i, name in enumerate(names)}

        standard = (distribution("normal", mean=0.0, sd=1.0),) * m
        return form(CallableLimitState(g, names, {}, slopes), standard, 1)

    straight, turned = seen_from(np.eye(m)), seen_from(turn)
    assert straight.converged.all()
    np.testing.assert_allclose(turned.beta, straight.beta, atol=CLOSE)
    np.testing.assert_allclose(turn @ turned.alpha, straight.alpha, atol=1e-5)
    assert np.sign(straight.beta) == np.sign(b)


# Order ------------------------------


@FEW
@given(situations(), st.floats(1.001, 1.1))
def test_more_resistance_is_safer_and_more_action_is_not(variables, factor):
    beta = solve(G, variables).beta
    for name, sign in (("R", 1.0), ("G", -1.0), ("Q", -1.0)):
        moved = solve(G, variables | {name: variables[name].scaled(factor)}).beta
        assert sign * (moved - beta) > 0.0


@FEW
@given(situations(), st.floats(0.0, 1e-3))
def test_any_safe_amount_added_is_safer(variables, margin):
    plain, more = solve(G, variables), solve(f"{G} + margin", variables, margin=margin)
    assert more.beta >= plain.beta - CLOSE
    # To first order beta grows by margin / gradient_norm.
    assert (more.beta - plain.beta) == pytest.approx(margin / plain.gradient_norm, rel=0.05, abs=2 * CLOSE)
