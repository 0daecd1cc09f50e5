"""The settings of FORM do what they say, and ``form`` refuses arrays that do not fit together."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.reliability import CallableLimitState, ExpressionLimitState, FormSettings, form

STANDARD = distribution("normal", mean=0.0, sd=1.0)
PAIR = (STANDARD, STANDARD)
CURVED = ExpressionLimitState(parse("4 - u - 0.5 * exp(0.3 * u + 0.2 * v)"), ("u", "v"))
# Two points, at 2.90570 and 3.09426 (A. Der Kiureghian and T. Dakessian, Structural Safety 20, 1998; recomputed): the
# further has 0.54 of the probability of the nearer.
PARABOLA = ExpressionLimitState(parse("5 - v - 0.5 * (u - 0.1)**2"), ("u", "v"))
NEARER, FURTHER = 2.90570, 3.09426


def solve(limit_state, start=None, **chosen):
    return form(limit_state, PAIR, 1, start=start, settings=FormSettings(**chosen))


@pytest.mark.parametrize(
    ("several", "status"),
    [(0.1, "several design points"), (0.5, "several design points"), (0.6, "converged")],
)
def test_share_from_which_a_further_point_is_told(several, status):
    result = solve(PARABOLA, several=several)
    assert result.beta == pytest.approx(NEARER, abs=5e-6)
    assert result.status == status


def test_without_verification_the_point_next_to_the_start_is_kept():
    beside = np.array([[2.9], [1.0]])
    assert solve(PARABOLA, beside).beta == pytest.approx(NEARER, abs=5e-6)
    quick = solve(PARABOLA, beside, verify=False)
    assert quick.beta == pytest.approx(FURTHER, abs=5e-6)
    assert quick.evaluations < solve(PARABOLA, beside).evaluations


def test_the_search_takes_over_what_the_fast_iteration_has_no_passes_for():
    fast = solve(CURVED)
    searched = solve(CURVED, passes=1)
    assert searched.beta == pytest.approx(fast.beta[0], abs=1e-10)
    np.testing.assert_allclose(searched.alpha, fast.alpha, atol=1e-6)
    assert searched.evaluations > fast.evaluations


def test_without_passes_enough_there_is_no_beta():
    result = solve(CURVED, passes=1, search_passes=2)
    assert result.status == "not converged: too many iterations"
    assert np.isnan(result.beta)


def test_beta_is_of_second_order_in_the_tolerance():
    exact, coarse = solve(CURVED), solve(CURVED, tolerance=1e-3)
    assert coarse.iterations < exact.iterations
    assert coarse.beta == pytest.approx(exact.beta[0], abs=1e-6)


def test_a_start_beyond_reach_or_not_finite_is_shortened_or_ignored():
    for start in ([[1e6], [1e6]], [[np.inf], [0.0]], [[np.nan], [0.0]]):
        result = solve(CURVED, np.array(start))
        assert result.beta == pytest.approx(solve(CURVED).beta[0], abs=1e-10)


THREE = distribution("normal", mean=np.zeros(3), sd=1.0)


@pytest.mark.parametrize(
    ("distributions", "start", "message"),
    [
        ((), None, "At least one basic variable"),
        ((STANDARD,), None, "2 variables, 1 distributions"),
        ((STANDARD, THREE), None, r"v: parameters have shape \(3,\), expected \(\) or \(2,\)"),
        (PAIR, np.zeros((2, 3)), r"start has shape \(2, 3\), expected \(2, 2\)"),
    ],
)
def test_arrays_that_do_not_fit_together(distributions, start, message):
    with pytest.raises(ValueError, match=message):
        form(CURVED, distributions, 2, start=start)


def test_limit_states_give_the_same_for_chosen_columns():
    """Values and gradients of some situations, by index and by taking them first."""
    rng = np.random.default_rng(5)
    z, x = rng.uniform(1.0, 2.0, 6), rng.uniform(0.5, 2.0, (2, 6))
    at = np.array([4, 1, 1])
    text = ExpressionLimitState(parse("z * u**2 - v"), ("u", "v"), {"z": z})
    function = CallableLimitState(
        lambda u, v, z: z * u**2 - v, ("u", "v"), {"z": z}, lambda u, v, z: {"u": 2 * z * u, "v": -1.0}
    )
    for state in (text, function):
        np.testing.assert_allclose(state.value(x[:, at], at), (z * x[0] ** 2 - x[1])[at], rtol=1e-15)
        for chosen, columns in ((state, at), (state.take(at), None)):
            g, (by_u, by_v) = chosen.gradient(x[:, at], columns)
            np.testing.assert_allclose(g, (z * x[0] ** 2 - x[1])[at], rtol=1e-15)
            np.testing.assert_allclose(by_u, (2.0 * z * x[0])[at], rtol=1e-15)
            assert np.all(np.asarray(by_v) == -1.0)
