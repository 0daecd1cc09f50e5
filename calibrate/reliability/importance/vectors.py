"""Importance of the basic variables at the design points, where they may depend on one another."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.conditional import Conditional
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class OmissionFactors:
    """Ratio of the reliability index with a variable held at its median to that with all scatter.

    Attributes
    ----------
    replaced : array (m, n)
        The variable is replaced by its median in the limit state; the others keep the distribution that they have.
        Below 1 where its correlation with others made the scatter of the limit state smaller.
    known : array (m, n)
        The variable is known to be at its median; the others have their distribution given that. Never below 1.
    """

    replaced: Array
    known: Array


def importance_vector(problem: Problem, reliability: Reliability) -> Array:
    """Return the unit vector gamma, (m, n), of the importance of dependent basic variables.

    Parameters
    ----------
    problem : Problem
        Of m variables and n situations.
    reliability : Reliability
        Its design points.

    Returns
    -------
    array (m, n)
        Positive for resistances, like alpha, with which it agrees where the variables are independent; NaN where
        there is no design point.

    Notes
    -----
    With the limit state linearised in x at the design point, and each variable replaced by the normal one of the
    linearised transformation, gamma_i is proportional to dg/dx_i times its standard deviation,
    gamma = alpha J_(u,x) D/|alpha J_(u,x) D| (A. Der Kiureghian, "First- and second-order reliability methods",
    Engineering Design Reliability Handbook, 2005; there with the sign of u*, the opposite one). In the Nataf model it
    is L^-T alpha scaled to length 1. dg/dx_i is that of the limit state itself: a variable which acts on it only
    through those that depend on it has gamma = 0.
    """
    if not problem.dependent:
        return np.array(reliability.alpha)
    with np.errstate(all="ignore"):
        if any(isinstance(law, Conditional) for law in problem.distributions):
            weighted = _by_linear_scatter(problem, reliability)
        else:
            weighted = slopes_by_z(problem.correlation, reliability.alpha)
        return np.asarray(weighted / np.sqrt(dot(weighted, weighted)))


def importance_shares(problem: Problem, reliability: Reliability) -> Array:
    """Return the squares of :func:`importance_vector`, (m, n), which add up to 1 in each situation."""
    gamma = importance_vector(problem, reliability)
    return gamma * gamma


def omission_factors(problem: Problem, reliability: Reliability) -> OmissionFactors:
    """Return what holding one variable at its median makes of the reliability index.

    Parameters
    ----------
    problem : Problem
        Of m variables and n situations.
    reliability : Reliability
        Its design points.

    Returns
    -------
    OmissionFactors
        1 for what does not vary; infinite for the only variable that matters; NaN where there is no design point.

    Notes
    -----
    H. O. Madsen, "Omission sensitivity factors", Structural Safety 5 (1988) 35-45: 1/sqrt(1 - alpha_i^2) for
    independent variables, exact where g is linear in u. With z = L u and a = L^-T alpha the limit state is
    proportional to beta + a^T z, z normal with correlation R = L L^T and a^T R a = 1. Putting z_i = 0 for the
    variable alone leaves the variance 1 - 2 a_i (R a)_i + a_i^2; given z_i = 0 it is 1 - (R a)_i^2, R a = L alpha.
    Both are the squared length of alpha - c L_i, with c = a_i and c = (L alpha)_i for row i of L, in which nothing
    cancels. The median of a conditional variable is that given those on which it depends, and those that depend on
    a variable follow its value.
    """
    alpha, correlation = reliability.alpha, problem.correlation
    with np.errstate(all="ignore"):
        a = slopes_by_z(correlation, alpha)
        along = alpha if correlation is None else correlation.forward(alpha)
        replaced, known = np.empty_like(alpha), np.empty_like(alpha)
        for i in range(problem.m):
            for c, result in ((a[i], replaced), (along[i], known)):
                rest = np.array(alpha)
                for k in (i,) if correlation is None else correlation.pattern[i]:
                    rest[k] -= c if correlation is None else c * correlation.factor[i, k]
                result[i] = 1.0 / np.sqrt(dot(rest, rest))
    return OmissionFactors(replaced, known)


def slopes_by_z(correlation: Correlation | None, alpha: Array) -> Array:
    """Return a = L^-T alpha, (m, n): dg/dz/|dg/du| at the design point for the correlated z = L u."""
    return alpha if correlation is None else correlation.solve_transposed(alpha)


def _by_linear_scatter(problem: Problem, reliability: Reliability) -> Array:
    """Return dg/dx times the standard deviation of the linearised x, (m, n)."""
    x, linear = problem.transform(reliability.u)
    _, by_x = problem.limit_state.gradient(x, None, linear.slopes)
    variance = np.zeros_like(reliability.u)
    for k in problem.random:
        unit = np.zeros_like(reliability.u)
        unit[k] = 1.0
        for i, moved in enumerate(problem.push(linear, unit)):
            variance[i] += moved * moved
    return np.array([by * np.sqrt(v) for by, v in zip(by_x, variance, strict=True)])
