"""The solvers against one another: different iterations, the same points."""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution, family_names, maximum_of, minimum_of
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem
from calibrate.reliability.solvers import SOLVERS, solve, solver_names

STANDARD = distribution("normal", mean=0.0, sd=1.0)
USUAL, PROJECTION, SLSQP = solver_names()
# beta is of second order in the error of the point, of which each solver leaves some 1e-6.
WITHIN = 1e-6
LIMIT_STATES = {
    "z * R - E": "RE",
    "z * T * R - E * (D + 0.6 * L)": "TREDL",
    "z * R * exp(-0.8 * T) - 0.3 * (D + L)": "RTDL",
    "z * R - 0.5 * D - 0.3 * L**2 - 0.1 * D * L": "RDL",
}
KINDS = [*family_names(), "maximum of normal", "minimum of lognormal"]


def near_one(kind, rng, n):
    """Return a distribution of n random situations whose values scatter around 1."""
    mean, cov = rng.uniform(0.85, 1.15, n), rng.uniform(0.05, 0.3, n)
    special = {
        "exponential": {"mean": mean},
        "weibull3": {"mean": mean, "cov": cov, "threshold": 0.1},
        "lognormal3": {"mean": mean, "cov": cov, "threshold": 0.2},
        "gev": {"mean": mean, "cov": cov, "shape": rng.uniform(-0.15, 0.15, n)},
        "beta": {"mean": mean, "cov": cov, "lower": 0.1, "upper": 4.0},
        "student_t": {"mean": mean, "cov": cov, "freedom": rng.uniform(6.0, 30.0, n)},
        "log_student_t": {"median": mean, "log_scale": cov, "freedom": rng.uniform(8.0, 30.0, n)},
        "truncated_normal": {"location": mean, "scale": cov, "lower": 0.1},
        "constant": {"value": mean},
    }
    if kind == "maximum of normal":
        return maximum_of(distribution("normal", mean=0.7 * mean, cov=cov), rng.uniform(2.0, 50.0, n))
    if kind == "minimum of lognormal":
        return minimum_of(distribution("lognormal", mean=mean, cov=cov), rng.uniform(0.2, 5.0, n))
    return distribution(kind, **special.get(kind, {"mean": mean, "cov": cov}))


def problems(text, n, seed):
    """Yield problems of n situations; the families are dealt like cards until all have come."""
    rng = np.random.default_rng(seed)
    deal = [str(kind) for kind in rng.permutation(KINDS)]
    names = LIMIT_STATES[text]
    while deal:
        hand = [deal.pop() if deal else str(rng.choice(KINDS)) for _ in names]
        laws = tuple(near_one(kind, rng, n) for kind in hand)
        state = ExpressionLimitState(parse(text), tuple(names), {"z": rng.uniform(1.5, 6.0, n)})
        yield hand, Problem(state, laws, n)


def agrees(hand, usual, other):
    missing = np.isnan(usual.beta)
    np.testing.assert_array_equal(np.isnan(other.beta), missing, err_msg=str(hand))
    np.testing.assert_array_equal(other.status[missing], usual.status[missing], err_msg=str(hand))
    np.testing.assert_allclose(other.beta, usual.beta, atol=WITHIN, err_msg=str(hand))
    single = usual.status == "converged"
    np.testing.assert_allclose(other.u[:, single], usual.u[:, single], atol=1e-4, err_msg=str(hand))
    np.testing.assert_allclose(other.u, -other.beta * other.alpha, atol=1e-12, err_msg=str(hand))


@pytest.mark.parametrize("text", LIMIT_STATES)
def test_gradient_projection_agrees_over_all_families(text):
    for hand, problem in problems(text, 4, 31):
        agrees(hand, solve(problem, USUAL), solve(problem, PROJECTION))


def test_slsqp_agrees_over_all_families():
    for hand, problem in problems("z * R - E", 1, 32):
        agrees(hand, solve(problem, USUAL), solve(problem, SLSQP))


@pytest.mark.parametrize("name", solver_names())
def test_curved_surfaces_with_points_known_in_closed_form(name):
    """A parabola and its two points by hand: u^2 = 6 where curved inwards, the vertex where outwards."""
    k = np.array([0.5, 0.1, -0.5])
    state = ExpressionLimitState(parse("4 - u - k * v**2"), ("u", "v"), {"k": k})
    found = solve(Problem(state, (STANDARD, STANDARD), 3), name)
    np.testing.assert_allclose(found.beta, [math.sqrt(7.0), 4.0, 4.0], atol=WITHIN)
    np.testing.assert_array_equal(found.status, ["several design points", "converged", "converged"])
    np.testing.assert_allclose(found.gradient_norm, [math.sqrt(7.0), 1.0, 1.0], rtol=1e-5)


@pytest.mark.parametrize("name", solver_names())
def test_every_solver_ends_in_the_same_words(name):
    cases = {
        "3 + u - v": "converged",
        "u - v - 3": "converged",
        "20 - u - v": "converged",
        "30 - u - v": "no failure region within reach",
        "u - v - 30": "not converged: no safe region within reach",
        "sqrt(u - 100) + v": "not converged: the limit state is not finite where it was needed",
        "max(3 - u, 4 - v)": None,
    }
    for text, words in cases.items():
        problem = Problem(ExpressionLimitState(parse(text), ("u", "v"), {}), (STANDARD, STANDARD), 1)
        found = solve(problem, name)
        if words is not None:
            assert found.status[0] == words, text
        elif name != USUAL:
            # Only the usual solver follows kinks; the others say that they were stopped by one.
            assert np.isnan(found.beta[0])
            assert found.status[0].startswith("not converged"), found.status
    signed = Problem(ExpressionLimitState(parse("u - v - 3"), ("u", "v"), {}), (STANDARD, STANDARD), 1)
    assert solve(signed, name).beta[0] == pytest.approx(-3.0 / math.sqrt(2.0), abs=WITHIN)


@pytest.mark.parametrize("name", solver_names())
def test_a_start_is_used_and_the_medians_where_it_is_not_finite(name):
    state = ExpressionLimitState(parse("z * R - E"), ("R", "E"), {"z": np.array([2.0, 3.0])})
    law = distribution("lognormal", mean=1.0, cov=0.3)
    problem = Problem(state, (law, law), 2)
    cold = solve(problem, name)
    warm = solve(problem, name, np.array([[-1.5, np.nan], [1.5, np.inf]]))
    np.testing.assert_allclose(warm.beta, cold.beta, atol=WITHIN)
    # ln(z R / E) is normal.
    s = math.sqrt(2.0 * math.log(1.09))
    np.testing.assert_allclose(cold.beta, np.log([2.0, 3.0]) / s, atol=WITHIN)


@pytest.mark.parametrize("name", solver_names())
def test_a_situation_is_the_same_alone_and_among_others(name):
    _, problem = next(problems("z * R - 0.5 * D - 0.3 * L**2 - 0.1 * D * L", 2, 33))
    whole = solve(problem, name)
    single = solve(problem.take(np.array([1]), 1), name)
    for field in ("beta", "u", "x", "alpha", "gradient_norm", "code", "iterations"):
        np.testing.assert_array_equal(getattr(single, field)[..., 0], getattr(whole, field)[..., 1])


def test_no_situation_is_no_trouble():
    state = ExpressionLimitState(parse("3 - u - v"), ("u", "v"), {})
    for name in solver_names():
        assert solve(Problem(state, (STANDARD, STANDARD), 0), name).beta.shape == (0,)


def test_what_does_not_fit_is_refused():
    problem = Problem(ExpressionLimitState(parse("3 - u"), ("u",), {}), (STANDARD,), 1)
    with pytest.raises(InputError, match="Did you mean 'slsqp'"):
        solve(problem, "slsqq")
    with pytest.raises(InputError, match="shape"):
        solve(problem, PROJECTION, np.zeros((2, 1)))
    assert all(solver.source for solver in SOLVERS.values())
