"""Importance under dependence and omission: a published column, normal closed forms, FORM with a variable replaced."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.reliability import (
    Conditional,
    CorrelatedPair,
    ExpressionLimitState,
    Problem,
    design_points,
    nataf_correlation,
)
from calibrate.reliability.importance import importance_shares, importance_vector, omission_factors


def problem_of(text, laws, pairs=(), n=1, quantities=None):
    names = tuple(laws)
    state = ExpressionLimitState(parse(text), names, quantities or {})
    pairs = [CorrelatedPair(*pair) for pair in pairs]
    return Problem(state, tuple(laws.values()), n, nataf_correlation(pairs, names, tuple(laws.values()), n))


def normal(mean, sd):
    return distribution("normal", mean=mean, sd=sd)


class LinearGiven(Conditional):
    """A normal variable whose mean is a + b times its parent."""

    shape = ()

    def __init__(self, parent, a, b, sd):
        self.parents, self.a, self.b, self.sd = (parent,), a, b, sd

    def take(self, columns):
        return self

    def given(self, parents):
        return normal(self.a + self.b * parents[0], self.sd)

    def x_slopes(self, z, parents):
        x, slope = self.given(parents).x_slope(z)
        return x, slope, (np.full_like(z, self.b),)


# Importance vector ------------------------------

COLUMN = "1 - m1/(0.030*y) - m2/(0.015*y) - (p/(0.190*y))**2"
COLUMN_LAWS = {
    "m1": distribution("normal", mean=250.0, cov=0.3),
    "m2": distribution("normal", mean=125.0, cov=0.3),
    "p": distribution("gumbel", mean=2500.0, cov=0.2),
    "y": distribution("weibull", mean=40000.0, cov=0.1),
}
COLUMN_PAIRS = [("m1", "m2", 0.5), ("m1", "p", 0.3), ("m2", "p", 0.3)]


def test_short_column():
    """A. Der Kiureghian (2005): gamma = (0.269, 0.269, 0.451, -0.808) along u*; five digits recomputed with scipy."""
    problem = problem_of(COLUMN, COLUMN_LAWS, COLUMN_PAIRS)
    found = design_points(problem)
    assert found.beta[0] == pytest.approx(2.46602, abs=5e-5)
    gamma = importance_vector(problem, found)[:, 0]
    np.testing.assert_allclose(gamma, [-0.269, -0.269, -0.451, 0.808], atol=7e-4)
    np.testing.assert_allclose(gamma, [-0.26843, -0.26843, -0.45114, 0.80769], atol=2e-5)
    np.testing.assert_allclose(importance_shares(problem, found)[:, 0], gamma**2)


def test_the_order_of_the_variables_does_not_matter():
    """Unlike alpha, which belongs to the triangular factor."""
    problem = problem_of(COLUMN, COLUMN_LAWS, COLUMN_PAIRS)
    turned = problem_of(COLUMN, dict(reversed(COLUMN_LAWS.items())), COLUMN_PAIRS)
    one, other = (importance_vector(p, design_points(p)) for p in (problem, turned))
    np.testing.assert_allclose(one, other[::-1], atol=1e-7)


def test_independent_variables_have_alpha():
    problem = problem_of(COLUMN, COLUMN_LAWS)
    found = design_points(problem)
    np.testing.assert_array_equal(importance_vector(problem, found), found.alpha)
    assert importance_shares(problem, found).sum() == pytest.approx(1.0, abs=1e-14)


def test_linear_normal():
    """gamma_i = c_i sd_i/|c sd|, whatever the correlation."""
    laws = {"R": normal(10.0, 2.0), "S": normal(2.0, 1.0), "T": normal(1.0, 0.5)}
    problem = problem_of("R - S - 2*T", laws, [("R", "S", 0.6), ("S", "T", -0.4)])
    expected = np.array([2.0, -1.0, -1.0]) / np.sqrt(6.0)
    np.testing.assert_allclose(importance_vector(problem, design_points(problem))[:, 0], expected, atol=1e-12)


def test_conditional_normal_variables_are_correlated_ones():
    """S given R of mean 1 + 0.3 R is a normal pair; once as a model, once as a correlation."""
    sd = np.sqrt((0.3 * 2.0) ** 2 + 1.0)
    laws = {"R": normal(10.0, 2.0), "T": normal(1.0, 0.5), "S": LinearGiven(0, 1.0, 0.3, 1.0)}
    problem = problem_of("R - S - 2*T", laws)
    joint = problem_of("R - S - 2*T", laws | {"S": normal(4.0, sd)}, [("R", "S", 0.6 / sd)])
    found, same = design_points(problem), design_points(joint)
    assert found.beta[0] == pytest.approx(same.beta[0], rel=1e-12)
    gamma = importance_vector(problem, found)[:, 0]
    np.testing.assert_allclose(gamma, importance_vector(joint, same)[:, 0], atol=1e-10)
    np.testing.assert_allclose(gamma * np.linalg.norm([2.0, 1.0, sd]), [2.0, -1.0, -sd], atol=1e-10)


def test_what_acts_through_another_variable_only():
    laws = {"H": normal(1.0, 0.2), "R": normal(9.0, 1.0), "S": LinearGiven(0, 0.0, 2.0, 0.5)}
    problem = problem_of("R - S + 0*H", laws)
    found = design_points(problem)
    gamma = importance_vector(problem, found)[:, 0]
    assert gamma[0] == 0.0
    assert abs(found.alpha[0, 0]) > 0.1
    assert np.sum(gamma**2) == pytest.approx(1.0, abs=1e-14)


def test_correlated_parents_of_a_conditional_variable():
    """Normal variables throughout: gamma is c_i sd_i with the standard deviations of the joint distribution."""
    laws = {"R": normal(20.0, 2.0), "H": normal(3.0, 1.0), "S": LinearGiven(1, 0.5, 1.5, 0.7)}
    problem = problem_of("R - S - H", laws, [("R", "H", 0.5)])
    expected = np.array([2.0, -1.0, -np.hypot(1.5, 0.7)])
    gamma = importance_vector(problem, design_points(problem))[:, 0]
    np.testing.assert_allclose(gamma, expected / np.linalg.norm(expected), atol=1e-10)


# Omission ------------------------------

LINEAR = {"R": normal(10.0, 1.5), "S": normal(3.0, 1.0), "T": normal(2.0, 0.8)}


def test_omission_of_independent_variables():
    """H. O. Madsen (1988): 1/sqrt(1 - alpha^2), exact for a linear limit state."""
    problem = problem_of("R - S - T", LINEAR)
    found = design_points(problem)
    factors = omission_factors(problem, found)
    np.testing.assert_allclose(factors.replaced, 1.0 / np.sqrt(1.0 - found.alpha**2), rtol=1e-13)
    np.testing.assert_array_equal(factors.replaced, factors.known)
    for i, name in enumerate(LINEAR):
        fixed = LINEAR | {name: distribution("constant", value=float(LINEAR[name].mean))}
        again = design_points(problem_of("R - S - T", fixed)).beta / found.beta
        assert factors.replaced[i, 0] == pytest.approx(again[0], rel=1e-12)


PAIRS = [("R", "S", 0.4), ("S", "T", -0.5), ("R", "T", 0.2)]
R = np.array([[1.0, 0.4, 0.2], [0.4, 1.0, -0.5], [0.2, -0.5, 1.0]])


@pytest.mark.parametrize("i", range(3))
def test_omission_of_correlated_normal_variables(i):
    problem = problem_of("R - S - T", LINEAR, PAIRS)
    found = design_points(problem)
    factors = omission_factors(problem, found)
    names = list(LINEAR)
    # Replaced in the limit state, the others as they were.
    fixed = LINEAR | {names[i]: distribution("constant", value=float(LINEAR[names[i]].mean))}
    left = [pair for pair in PAIRS if names[i] not in pair]
    again = design_points(problem_of("R - S - T", fixed, left)).beta / found.beta
    assert factors.replaced[i, 0] == pytest.approx(again[0], rel=1e-12)
    # Known: the conditional normal distribution of the others, whose means stay at the medians.
    sd = np.array([float(d.sd) for d in LINEAR.values()])
    others = [k for k in range(3) if k != i]
    rest = R[np.ix_(others, others)] - np.outer(R[others, i], R[others, i])
    scatter = np.sqrt(np.diag(rest))
    laws = {
        name: normal(float(LINEAR[name].mean), sd[k] * scatter[others.index(k)]) if k != i else fixed[name]
        for k, name in enumerate(names)
    }
    pair = (names[others[0]], names[others[1]], rest[0, 1] / (scatter[0] * scatter[1]))
    again = design_points(problem_of("R - S - T", laws, [pair])).beta / found.beta
    assert factors.known[i, 0] == pytest.approx(again[0], rel=1e-12)
    assert factors.known[i, 0] >= 1.0


def test_omission_where_correlation_reduces_the_scatter():
    laws = {"R": normal(10.0, 1.0), "S": normal(3.0, 1.0)}
    problem = problem_of("R - S", laws, [("R", "S", 0.8)])
    factors = omission_factors(problem, design_points(problem))
    np.testing.assert_allclose(factors.replaced[:, 0], np.sqrt(0.4), rtol=1e-12)
    np.testing.assert_allclose(factors.known[:, 0], np.sqrt(0.4) / 0.6, rtol=1e-12)


def test_omission_of_lognormal_variables_in_a_product():
    """ln g is linear in u: exact, with the median in place of the variable."""
    laws = {name: distribution("lognormal", median=m, log_sd=c)
            for name, m, c in [("R", 9.0, 0.2), ("S", 3.0, 0.3), ("M", 1.1, 0.1)]}  # fmt: skip
    problem = problem_of("M*R - S", laws)
    found = design_points(problem)
    factors = omission_factors(problem, found).replaced[:, 0]
    total = np.array([0.2, 0.3, 0.1])
    np.testing.assert_allclose(factors, np.sqrt(0.14 / (0.14 - total**2)), rtol=1e-9)


def test_what_does_not_vary_and_what_alone_varies():
    laws = {"R": normal(10.0, 1.0), "S": distribution("constant", value=4.0)}
    problem = problem_of("R - S", laws)
    factors = omission_factors(problem, design_points(problem))
    assert factors.replaced[:, 0].tolist() == factors.known[:, 0].tolist() == [np.inf, 1.0]


# Batches ------------------------------


def several(order):
    mean = np.array([6.0, 9.0, 4.0, -50.0, 12.0])[order]
    laws = {
        "R": distribution("normal", mean=mean, sd=1.0),
        "S": distribution("gumbel", mean=3.0, cov=np.array([0.3, 0.2, 0.1, 0.3, 0.25])[order]),
        "T": distribution("lognormal", mean=1.0, cov=0.2),
    }
    # The fourth never fails.
    text = "where(R <= -20, 9 + R**2*0.001, R - S - T)"
    return problem_of(text, laws, [("R", "S", 0.4), ("S", "T", 0.3)], len(order))


def test_a_situation_is_the_same_in_any_batch_and_nan_without_a_design_point():
    problem = several(np.arange(5))
    found = design_points(problem)
    assert found.converged.tolist() == [True, True, True, False, True]
    whole = [
        importance_vector(problem, found),
        *(getattr(omission_factors(problem, found), k) for k in ("replaced", "known")),
    ]
    for array in whole:
        np.testing.assert_array_equal(np.isnan(array).all(axis=0), ~found.converged)
        np.testing.assert_array_equal(np.isnan(array).any(axis=0), ~found.converged)
    for i in range(5):
        alone = several(np.array([i]))
        one = design_points(alone)
        factors = omission_factors(alone, one)
        for array, single in zip(
            whole, (importance_vector(alone, one), factors.replaced, factors.known), strict=True
        ):
            np.testing.assert_array_equal(array[:, [i]], single)
