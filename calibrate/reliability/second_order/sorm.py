"""Second-order reliability of many situations at once, from their design points.

Chunk by chunk: Hessian at the design point, principal curvatures, the formulas, and a look at the limit state around.
Every operation is elementwise over situations, eigenvalues matrix by matrix.

References
----------
.. [1] B. Fiessler, H.-J. Neumann and R. Rackwitz, "Quadratic limit states in structural reliability", Journal of the
   Engineering Mechanics Division 105 (1979), from memory.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
import numpy.typing as npt

from calibrate.engine import run_chunks
from calibrate.errors import InputError
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot
from calibrate.reliability.second_order.asymptotic import breitung, hazard, hohenbichler_rackwitz, tvedt
from calibrate.reliability.second_order.curvatures import principal_curvatures
from calibrate.reliability.second_order.misfit import misfit
from calibrate.reliability.second_order.paraboloid import paraboloid
from calibrate.reliability.second_order.result import SecondOrder
from calibrate.reliability.second_order.status import (
    BEYOND_LIMIT,
    NEAREST,
    NO_GUIDE,
    NO_INTEGRAL,
    NO_POINT,
    NOT_FINITE,
    SECOND_ORDER,
)
from calibrate.reliability.status import SEVERAL

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

# Situations of a piece of work: few calls, and the evaluations of the limit state stay in the cache.
CHUNK = 4_000
# Estimated factor on the probability, or one over it, from which the paraboloid is no guide. It lies within 1 % of 1
# in ordinary problems, and it understates departures farther out than the points at which it looks.
LARGEST_FACTOR = 1.1


def second_order(problem: Problem, reliability: Reliability, *, workers: int = 1) -> SecondOrder:
    """Return the second-order reliability at the design points of FORM.

    Parameters
    ----------
    problem : Problem
        Limit state and variables of n situations.
    reliability : Reliability
        What FORM found for the same problem.
    workers : int
        Number of threads.

    Returns
    -------
    SecondOrder
        Every situation has a status; numerical trouble is never an exception.

    Raises
    ------
    InputError
        The problem and what FORM found do not fit together.
    """
    if reliability.u.shape != (problem.m, problem.n):
        m, n = reliability.u.shape
        text = f"The design points are of {m} variables in {n} situations"
        raise InputError(f"{text}; the problem has {problem.m} variables and {problem.n} situations.")
    task = _Task(problem, reliability)
    parts = run_chunks(task, problem.n, chunk=CHUNK, workers=workers) if problem.n else [_nothing(problem)]
    return SecondOrder(
        *(np.concatenate([getattr(p, f.name) for p in parts], axis=-1) for f in fields(SecondOrder))
    )


@dataclass(frozen=True, slots=True)
class _Task:
    """The function of a chunk."""

    problem: Problem
    reliability: Reliability

    def __call__(self, piece: slice) -> SecondOrder:
        found = self.reliability
        converged = np.array(found.converged[piece])
        n = converged.size
        # A situation without design point is computed at the origin, where the limit state is defined, and told apart
        # in the end.
        u = np.where(converged, found.u[:, piece], 0.0)
        alpha = np.where(converged, found.alpha[:, piece], 0.0)
        beta = np.where(converged, found.beta[piece], np.nan)
        norm = np.where(converged, found.gradient_norm[piece], np.nan)
        several = found.code[piece] == SEVERAL
        with np.errstate(all="ignore"):
            return _analysed(self.problem.take(piece, n), beta, u, alpha, norm, several)


def _analysed(
    problem: Problem, beta: Array, u: Array, alpha: Array, norm: Array, several: Flags
) -> SecondOrder:
    rows = list(problem.random)
    if not rows:
        kappa, axes = np.zeros((0, problem.n)), np.zeros((problem.m, 0, problem.n))
        turned = np.zeros_like(alpha)
    else:
        whole = problem.hessian(u)
        turned = np.array([dot(row, alpha) for row in whole])
        hessian = whole[np.ix_(rows, rows)]
        kappa, own = principal_curvatures(hessian, np.ascontiguousarray(alpha[rows]), norm)
        axes = np.zeros((problem.m, len(rows) - 1, problem.n))
        axes[rows] = own
    finite = np.all(np.isfinite(kappa), axis=0)
    beyond = np.any(beta * kappa <= -1.0, axis=0)
    beta_here = np.where(finite, beta, np.nan)
    lost = np.isnan(beta_here)
    exact = paraboloid(beta_here, kappa)
    # A limit state need not bear NaN: where there is nothing to look at, it is evaluated near the origin.
    off = misfit(problem, np.where(lost, 0.0, beta), alpha, np.where(lost, 0.0, kappa), axes, norm, turned)
    off = np.where(lost, np.nan, off)
    side = np.where(beta < 0.0, -1.0, 1.0)
    factor = np.exp(-side * off * hazard(np.abs(beta)))
    bad = ~((factor <= LARGEST_FACTOR) & (factor >= 1.0 / LARGEST_FACTOR))
    conditions = [np.isnan(beta), ~finite, np.isnan(exact), beyond, bad, several]
    codes = [NO_POINT, NOT_FINITE, NO_INTEGRAL, BEYOND_LIMIT, NO_GUIDE, NEAREST]
    code = np.select(conditions, codes, SECOND_ORDER).astype(np.int8)
    return SecondOrder(
        np.where(lost, np.nan, kappa), np.where(lost, np.nan, axes), beta,
        breitung(beta_here, kappa), hohenbichler_rackwitz(beta_here, kappa), tvedt(beta_here, kappa),
        exact, off, factor, code,
    )  # fmt: skip


def _nothing(problem: Problem) -> SecondOrder:
    none, count = np.zeros(0), max(len(problem.random) - 1, 0)
    code = np.zeros(0, dtype=np.int8)
    kappa, axes = np.zeros((count, 0)), np.zeros((problem.m, count, 0))
    return SecondOrder(kappa, axes, none, none, none, none, none, none, none, code)
