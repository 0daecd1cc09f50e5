"""A system as one limit state, against its components and against an integral of the four-branch system."""

import numpy as np
import pytest
from scipy import integrate, special

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import CallableLimitState, ExpressionLimitState, form
from calibrate.reliability.problem import Problem
from calibrate.reliability.systems import (
    failure_logic,
    series,
    system_limit_state,
    system_probability,
)

N = 6


def expression(text, variables, **values):
    return ExpressionLimitState(parse(text), variables, values)


def frame():
    z = np.linspace(2.0, 3.0, N)
    components = {
        "yielding": expression("z * R - S", ("R", "S"), z=z),
        "slip": expression("m * N - S**2 / 8", ("m", "N", "S")),
        "rupture": expression("max(R - 0.4 * S, m - z)", ("S", "m", "R"), z=z),
    }
    return system_limit_state(failure_logic("yielding or (slip and rupture)"), components)


def points(state, n=N, seed=0):
    return np.random.default_rng(seed).uniform(0.5, 4.0, (len(state.variables), n))


def test_variables_are_the_union_in_order_of_appearance():
    state = frame()
    assert state.variables == ("R", "S", "m", "N")
    assert state.rows == ((0, 1), (2, 3, 1), (1, 2, 0))
    assert state.kinks == 1 + 2
    assert not state.affine


def test_value_by_hand():
    state = frame()
    R, S, m, n = x = points(state)
    z = np.linspace(2.0, 3.0, N)
    expected = np.minimum(z * R - S, np.maximum(m * n - S**2 / 8, np.maximum(R - 0.4 * S, m - z)))
    np.testing.assert_allclose(state.value(x), expected, rtol=1e-14)


def test_gradient_and_hessian_against_differences():
    columns = np.arange(120) % N
    state = frame().take(columns)
    x = points(state, 120)
    g, by_x = state.gradient(x)
    first, second = state.hessian(x)
    np.testing.assert_array_equal(g, state.value(x))
    np.testing.assert_array_equal(first, by_x)
    step = 1e-5
    for i in range(4):
        move = np.zeros((4, 1))
        move[i] = step
        above, below = state.gradient(x + move), state.gradient(x - move)
        # Random points lie that close to a change of component only by rare chance, which this seed does not give.
        np.testing.assert_allclose((above[0] - below[0]) / (2 * step), by_x[i], rtol=1e-7, atol=1e-8)
        for j in range(4):
            bend = (np.asarray(above[1][j]) - below[1][j]) / (2 * step)
            np.testing.assert_allclose(second[i][j], bend, rtol=1e-6, atol=1e-6)


def test_all_components_become_active():
    state = frame().take(np.arange(120) % N)
    active = state.logic.active(list(state.component_values(points(state, 120))))[1]
    assert set(active.tolist()) == {0, 1, 2}


def test_take_and_columns_agree():
    state = frame()
    x = points(state)
    chosen = np.array([4, 1, 1])
    expected = state.gradient(x)
    for found in (state.take(chosen).gradient(x[:, chosen]), state.gradient(x[:, chosen], chosen)):
        np.testing.assert_array_equal(found[0], expected[0][chosen])
        np.testing.assert_array_equal(found[1], np.asarray(expected[1])[:, chosen])
    np.testing.assert_array_equal(state.value(x[:, chosen], chosen), expected[0][chosen])


def test_unknown_second_derivatives_stay_unknown():
    hidden = CallableLimitState(lambda R, S: R - S, ("R", "S"))
    state = system_limit_state(series(("a", "b")), {"a": hidden, "b": expression("R - 2 * S", ("R", "S"))})
    x = np.ones((2, 3))
    assert state.hessian(x) is None
    slopes = state.gradient(x, None, np.ones((2, 3)))[1]
    np.testing.assert_allclose(slopes, [[1.0] * 3, [-2.0] * 3])


def test_given_order_of_variables_and_embedding():
    components = {"a": expression("R - S", ("R", "S")), "b": expression("S + T", ("T", "S"))}
    state = system_limit_state(series(("a", "b")), components, ("extra", "T", "S", "R"))
    assert state.rows == ((3, 2), (1, 2))
    np.testing.assert_array_equal(state.embedded(0, [[0.6], [-0.8]])[:, 0], [0.0, 0.0, -0.8, 0.6])
    _, by_x = state.gradient(np.array([[0.0], [5.0], [1.0], [2.0]]))
    np.testing.assert_array_equal(np.asarray(by_x)[:, 0], [0.0, 0.0, -1.0, 1.0])
    with pytest.raises(InputError, match="expected 2 variables"):
        state.embedded(0, [[0.6]])


def test_what_is_missing_is_told():
    components = {"slip": expression("R - S", ("R", "S"))}
    with pytest.raises(InputError, match="Did you mean 'slip'"):
        system_limit_state(series(("slop",)), components)
    with pytest.raises(InputError, match="need the variables S as well"):
        system_limit_state(series(("slip",)), components, ("R",))


# ---------------------------------------------------------------------------- the four-branch system
# P. H. Waarts, "Structural reliability using finite element methods", Delft (2000).

BRANCHES = {
    "b1": "3 + 0.1 * (x1 - x2)**2 - (x1 + x2) / sqrt(2)",
    "b2": "3 + 0.1 * (x1 - x2)**2 + (x1 + x2) / sqrt(2)",
    "b3": "(x1 - x2) + 7 / sqrt(2)",
    "b4": "(x2 - x1) + 7 / sqrt(2)",
}
EXACT = 2.2227951e-3


def four_branches():
    components = {name: expression(text, ("x1", "x2")) for name, text in BRANCHES.items()}
    return system_limit_state(series(tuple(BRANCHES)), components)


def standard():
    return (distribution("normal", mean=0.0, sd=1.0), distribution("normal", mean=0.0, sd=1.0))


def test_four_branches_exactly():
    """With v = (x1 - x2) / sqrt 2 and w = (x1 + x2) / sqrt 2 failure is |w| > 3 + 0.2 v^2 or |v| > 3.5."""
    inner = integrate.quad(
        lambda v: 2.0 * special.ndtr(-3.0 - 0.2 * v * v) * np.exp(-0.5 * v * v) / np.sqrt(2.0 * np.pi), -3.5, 3.5,
        epsabs=0.0, epsrel=1e-12,
    )[0]  # fmt: skip
    assert inner + 2.0 * special.ndtr(-3.5) == pytest.approx(EXACT, rel=2e-8)


def test_planes_of_four_branches_neglect_their_curvature():
    state = four_branches()
    found = [form(component, standard(), 1) for component in state.components]
    beta = np.array([f.beta for f in found])
    np.testing.assert_allclose(beta[:, 0], [3.0, 3.0, 3.5, 3.5], atol=1e-9)
    alpha = np.array([state.embedded(i, f.alpha) for i, f in enumerate(found)])
    system = system_probability(beta, state.logic, alpha=alpha, slopes=False)
    # Pairs of opposite planes, each pair independent of the other.
    planes = 1.0 - (1.0 - 2.0 * special.ndtr(-3.0)) * (1.0 - 2.0 * special.ndtr(-3.5))
    assert system.probability[0] == pytest.approx(planes, rel=1e-6)
    # Two of the branches bend away from the origin: the planes overestimate by two fifths, 0.11 in beta.
    assert system.probability[0] / EXACT == pytest.approx(1.4233, abs=5e-4)
    assert system.beta[0] - (-special.ndtri(EXACT)) == pytest.approx(-0.1145, abs=5e-4)


def test_four_branches_by_importance_sampling():
    """Centres at the four design points, as weighted mixture: the true limit state brings back the exact value."""
    n = 40_000
    problem = Problem(four_branches(), standard(), n)
    rng = np.random.default_rng(7)
    s = np.sqrt(0.5)
    centres = np.array([[3 * s, 3 * s], [-3 * s, -3 * s], [-3.5 * s, 3.5 * s], [3.5 * s, -3.5 * s]])
    u = centres[np.arange(n) % 4].T + rng.normal(size=(2, n))
    # phi(u - c) / phi(u) = exp(c u - c c / 2)
    mixture = np.mean([np.exp(c @ u - 0.5 * (c @ c)) for c in centres], axis=0)
    weight = np.where(problem.value(u) < 0.0, 1.0 / mixture, 0.0)
    error = np.std(weight) / np.sqrt(n)
    assert error < 0.015 * EXACT
    # Four standard errors; the seed is fixed.
    assert abs(np.mean(weight) - EXACT) < 4.0 * error


def test_linear_system_by_sampling():
    """Of planes the first-order probability is exact: a mixed system by crude sampling of its limit state."""
    n = 200_000
    components = {
        "a": expression("2.2 - x - 0.5 * y", ("x", "y")),
        "b": expression("1.4 + y + 0.3 * z", ("y", "z")),
        "c": expression("1.1 - z + 0.6 * x", ("z", "x")),
    }
    state = system_limit_state(failure_logic("a or (b and c)"), components)
    norm = distribution("normal", mean=0.0, sd=1.0)
    found = [form(component, (norm, norm), 1) for component in state.components]
    alpha = np.array([state.embedded(i, f.alpha) for i, f in enumerate(found)])
    system = system_probability(np.array([f.beta for f in found]), state.logic, alpha=alpha)
    u = np.random.default_rng(5).normal(size=(3, n))
    p = float(np.mean(Problem(state, (norm,) * 3, n).value(u) < 0.0))
    assert p == pytest.approx(system.probability[0], abs=4.0 * np.sqrt(p / n))
