"""The short column of A. Der Kiureghian under correlation: second order and simulation.

Source: chapter "First- and second-order reliability methods" (2005): curvatures -0.155, -0.0399, 0, second order (with
psi) 0.00960, Monte Carlo about 0.0093, from memory. Recomputed for this check in standard normal space with numerically
exact Nataf coefficients: Breitung 9.1485e-3, Hohenbichler and Rackwitz 9.6154e-3, Tvedt 9.4219e-3, exact paraboloid
9.3728e-3; 4e6 samples of plain Monte Carlo 9.3198e-3, coefficient of variation 0.5 %.
"""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.reliability import (
    CorrelatedPair,
    ExpressionLimitState,
    Problem,
    design_points,
    nataf_correlation,
)
from calibrate.reliability.importance import importance_vector
from calibrate.reliability.second_order import second_order
from calibrate.reliability.simulation import simulate

NAMES = ("m1", "m2", "p", "y")
LAWS = (
    distribution("normal", mean=250.0, cov=0.3),
    distribution("normal", mean=125.0, cov=0.3),
    distribution("gumbel", mean=2500.0, cov=0.2),
    distribution("weibull", mean=40000.0, cov=0.1),
)
PAIRS = (CorrelatedPair("m1", "m2", 0.5), CorrelatedPair("m1", "p", 0.3), CorrelatedPair("m2", "p", 0.3))
MONTE_CARLO = 9.3198e-3


@pytest.fixture(scope="module")
def column():
    state = ExpressionLimitState(parse("1 - m1 / (0.03 * y) - m2 / (0.015 * y) - (p / (0.19 * y))**2"), NAMES)
    problem = Problem(state, LAWS, 1, nataf_correlation(PAIRS, NAMES, LAWS, 1))
    return problem, design_points(problem)


def test_second_order(column):
    found = second_order(*column)
    np.testing.assert_allclose(found.curvatures[:, 0], [-0.15474, -0.03990, 0.0], atol=2e-5)
    assert found.breitung[0] == pytest.approx(9.1485e-3, abs=5e-7)
    assert found.hohenbichler_rackwitz[0] == pytest.approx(9.6154e-3, abs=5e-7)
    assert found.tvedt[0] == pytest.approx(9.4219e-3, abs=5e-7)
    assert found.paraboloid[0] == pytest.approx(9.3728e-3, abs=5e-7)
    assert found.sound[0]


@pytest.mark.parametrize("method", ["importance sampling", "directional simulation", "line sampling"])
def test_simulation(column, method):
    problem, reliability = column
    found = simulate(problem, method, seed=3, cov=0.01, reliability=reliability)
    # Three times both standard deviations.
    assert found.probability[0] == pytest.approx(MONTE_CARLO, rel=3.0 * np.hypot(0.01, 0.005))


def test_importance_under_dependence(column):
    """Printed (0.269, 0.269, 0.451, -0.808), along u*; here positive for resistances."""
    gamma = importance_vector(*column)[:, 0]
    np.testing.assert_allclose(gamma, [-0.26843, -0.26843, -0.45114, 0.80769], atol=2e-5)
