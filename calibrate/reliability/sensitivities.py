"""Exact derivatives of beta at the design points."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.conditional import Conditional
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability

Array = npt.NDArray[np.float64]


def beta_slope(reliability: Reliability, g_slope: npt.ArrayLike) -> Array:
    """Return d beta/d p from dg/dp at the design point with u held fixed.

    Parameters
    ----------
    reliability : Reliability
        Of n situations.
    g_slope : array
        dg/dp, in units of g per unit of p; shape () or (..., n).

    Notes
    -----
    As the design point is the nearest one, its own movement changes beta in second order only:
    d beta/d p = (dg/dp at fixed u*) / |grad_u g| (M. Hohenbichler and R. Rackwitz, "Sensitivity and importance
    measures in structural reliability", Civil Engineering Systems 3, 1986).
    """
    return np.asarray(g_slope, dtype=np.float64) / reliability.gradient_norm


def parameter_slopes(reliability: Reliability, problem: Problem) -> dict[str, dict[str, Array]]:
    """Return d beta/d p for every own parameter p of every basic variable.

    Parameters
    ----------
    reliability : Reliability
        Of n situations.
    problem : Problem
        The one it belongs to.

    Returns
    -------
    dict
        ``{variable: {parameter: array (n,)}}``; NaN where there is no design point. Parameters of an
        extreme of a distribution are those of its base; a conditional variable has no entry. The correlation of
        the standard normal variables is held.
    """
    z = problem.z(reliability.u)
    names = reliability.variables
    with np.errstate(all="ignore"):
        by_x = physical_slopes(reliability, problem)
        return {
            name: {
                parameter: np.broadcast_to(beta_slope(reliability, by * dx), (reliability.n,))
                for parameter, dx in law.parameter_slopes(row).items()
            }
            for name, law, row, by in zip(names, problem.distributions, z, by_x, strict=True)
            if not isinstance(law, Conditional)
        }


def physical_slopes(reliability: Reliability, problem: Problem) -> list[Array]:
    """Return dg/dx at the design points, m rows, with what each variable does through those that depend on it."""
    x, linear = problem.transform(reliability.u)
    _, by_x = problem.limit_state.gradient(x, None, linear.slopes)
    return problem.total_slopes(by_x, linear)
