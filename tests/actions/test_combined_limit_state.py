"""FORM with the exact maximum of combined actions: against scalar quadrature, search, simulation and differences."""

import dataclasses

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.special import ndtr

from calibrate.actions import Action, fbc_maximum
from calibrate.actions.combined_limit_state import combined_limit_state
from calibrate.actions.pulse_sum import pulse_sum
from calibrate.actions.slopes import standard_normal
from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.expressions import parse_comparison
from calibrate.reliability import FormSettings, form

SLOW = Action(distribution("gumbel", mean=1.0, cov=0.3), 5, 1.0, "Q")
FAST = Action(distribution("gumbel", mean=0.5, cov=0.4), 50, 1.0, "W")
RARE = Action(distribution("lognormal", mean=0.9, cov=0.5), 10, 0.3, "Q")
SELDOM = Action(distribution("lognormal", mean=0.6, cov=0.4), 100, 0.2, "W")
SHORT = Action(distribution("lognormal", mean=0.5, cov=0.5), 500, 0.3, "D")

R = distribution("lognormal", mean=6.0, cov=0.1)
C = distribution("lognormal", mean=1.0, cov=0.15)
STANDARD = distribution("normal", location=0.0, scale=1.0)
PAIRS = pytest.mark.parametrize(
    "actions",
    [(SLOW, FAST), (RARE, FAST), (SLOW, SELDOM), (RARE, SELDOM)],
    ids=lambda a: "-".join(x.name for x in a),
)


def state(actions, text="R >= c*Q + C*W", others=("R", "C"), **values):
    return combined_limit_state(parse_comparison(text).margin, others, actions, values)


@PAIRS
def test_slopes_of_the_maximum_against_central_differences(actions):
    rng = np.random.default_rng(3)
    n = 40
    weights = rng.uniform(0.2, 2.0, (2, n))
    x = rng.uniform(1.0, 7.0, n)

    def u(x, weights):
        return standard_normal(pulse_sum(actions, weights).slopes(x))[0]

    value, by_value, by_weight = standard_normal(pulse_sum(actions, weights).slopes(x))
    h = 1e-5
    np.testing.assert_allclose(
        by_value, (u(x + h, weights) - u(x - h, weights)) / (2 * h), rtol=1e-6, atol=1e-8
    )
    for k in range(2):
        step = h * np.eye(2)[k][:, None]
        sides = u(x, weights + step) - u(x, weights - step)
        np.testing.assert_allclose(by_weight[k], sides / (2 * h), rtol=1e-6, atol=1e-8)
    assert np.isfinite(value).all()


@PAIRS
def test_weights_are_scales_of_the_actions(actions):
    weights = (1.7, 0.4)
    x = np.linspace(0.5, 9.0, 12)
    scaled = [
        dataclasses.replace(a, distribution=a.distribution.scaled(b))
        for a, b in zip(actions, weights, strict=True)
    ]
    low, high = pulse_sum(actions, weights).tails(x)
    np.testing.assert_allclose(np.exp(low), fbc_maximum(scaled).cdf(x), rtol=1e-9)
    np.testing.assert_allclose(np.exp(high), fbc_maximum(scaled).sf(x), rtol=1e-9)


@PAIRS
def test_many_situations_are_each_one_alone(actions):
    c = np.array([0.0, 0.3, 1.0, 2.5])
    whole = form(state(actions, c=c), (R, C, STANDARD), 4)
    alone = [form(state(actions, c=v), (R, C, STANDARD), 1).beta[0] for v in c]
    assert whole.converged.all()
    np.testing.assert_allclose(whole.beta, alone, atol=1e-9)


def test_without_other_scatter_beta_is_that_of_the_maximum():
    """Closed: failure is the maximum above a fixed value."""
    x = np.array([2.0, 3.0, 4.5])
    only = combined_limit_state(parse_comparison("r + 0*R >= Q + W").margin, ("R",), (SLOW, FAST), {"r": x})
    found = form(only, (R, STANDARD), 3)
    np.testing.assert_allclose(found.beta, fbc_maximum([SLOW, FAST]).u(x), atol=1e-9)


@PAIRS
def test_design_point_against_a_search_along_the_surface(actions):
    """The surface R = S(u), S of the scalar quadrature; its nearest point by scipy."""
    whole = fbc_maximum(actions)
    r = distribution("normal", mean=7.0, cov=0.15)

    def distance(u):
        return float(np.hypot(u, whole.u(r.x(u))))

    best = minimize_scalar(distance, bounds=(-5.0, 0.0), method="bounded", options={"xatol": 1e-7})
    found = form(
        combined_limit_state(parse_comparison("R >= Q + W").margin, ("R",), actions, {}), (r, STANDARD), 1
    )
    assert found.beta[0] == pytest.approx(best.fun, abs=2e-6)


def test_failure_probability_against_simulated_pulses():
    """Total probability over R and C of the conditional probability, against 400,000 simulated lives (seeded).

    The tolerance is four standard errors of the simulation.
    """
    actions = (RARE, FAST)
    nodes, weights = np.polynomial.hermite_e.hermegauss(24)
    u, v = (a.ravel() for a in np.meshgrid(nodes, nodes))
    w = np.outer(weights, weights).ravel() / (2.0 * np.pi)
    r, c = distribution("lognormal", mean=4.0, cov=0.1), distribution("lognormal", mean=1.0, cov=0.1)
    g, _ = state(actions, text="R >= Q + C*W").gradient([r.x(u), c.x(v), np.zeros(u.size)])
    exact = float(w @ ndtr(-g))

    rng = np.random.default_rng(88)
    failed = 0
    for _ in range(40):
        n = 10_000
        slow = np.where(rng.random((n, 10)) < 0.3, RARE.distribution.sample(rng, (n, 10)), 0.0)
        fast = FAST.distribution.sample(rng, (n, 10, 5)).max(axis=2)
        most = (slow + c.sample(rng, n)[:, None] * fast).max(axis=1)
        failed += int(np.sum(r.sample(rng, n) < most))
    p = failed / 400_000
    assert failed > 500
    assert abs(p - exact) < 4.0 * np.sqrt(p / 400_000)


def test_an_action_with_coefficient_zero_does_not_act():
    found = form(state((SLOW, FAST), c=0.0), (R, C, STANDARD), 1)
    alone = form(
        combined_limit_state(parse_comparison("R >= C*W").margin, ("R", "C"), (FAST,), {}),
        (R, C, STANDARD),
        1,
    )
    assert found.beta[0] == pytest.approx(alone.beta[0], abs=1e-7)
    assert (state((SLOW, FAST), c=-1.0).weights([np.ones(1), np.ones(1), np.ones(1)])[0] == -1.0).all()


def test_three_actions_in_a_table_against_the_full_quadrature():
    names = "R >= c*Q + C*W + 0.7*D"
    c = np.array([0.2, 1.0])
    table = combined_limit_state(parse_comparison(names).margin, ("R", "C"), (SLOW, FAST, SHORT), {"c": c})
    full = dataclasses.replace(table, pulses=dataclasses.replace(table.pulses, tabulated=False))
    x = [R.x(np.array([-1.0, -2.0])), C.x(np.array([0.5, 1.5])), np.zeros(2)]
    g, slopes = table.gradient(x)
    exact, exact_slopes = full.gradient(x)
    np.testing.assert_allclose(g, exact, atol=2e-5)
    np.testing.assert_allclose(slopes, exact_slopes, rtol=1e-3)
    found = form(table, (R, C, STANDARD), 2, settings=FormSettings(verify=False))
    assert found.converged.all()


@pytest.mark.parametrize(
    ("text", "actions", "words"),
    [
        ("R >= Q * W", (SLOW, FAST), "not a sum in which Q, W"),
        ("R >= max(Q, W)", (SLOW, FAST), "not a sum"),
        ("R >= sqrt(Q) + W", (SLOW, FAST), "not a sum"),
        ("R >= Q + W", (SLOW, FAST, SHORT, SHORT), "1 to 3 variable actions; got 4"),
    ],
)
def test_refusals(text, actions, words):
    with pytest.raises(InputError, match=words):
        combined_limit_state(parse_comparison(text).margin, ("R",), actions, {})
