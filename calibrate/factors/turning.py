"""How sensitivity factors turn when factors change: what the correlation of the components of a system depends on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.factors.model import RuleModel
from calibrate.reliability import Problem, Reliability
from calibrate.reliability.rows import add_rows, dot
from calibrate.situations import Sizing

Array = npt.NDArray[np.float64]


def alpha_slopes(
    rule: RuleModel,
    problem: Problem,
    reliability: Reliability,
    values: Mapping[str, Any],
    sizing: Sizing,
    free: Sequence[str],
    check_free: Sequence[str],
    jacobian: Array,
) -> Array:
    """Return d alpha/d gamma, shape (f, m, n), in the standard normal space of the rule.

    Parameters
    ----------
    rule : RuleModel
    problem : Problem
        Its limit state.
    reliability : Reliability
        Its design points.
    values : mapping
        Everything but the basic variables, the size among it.
    sizing : Sizing
        With the derivatives of the size by the factors of the design check.
    free, check_free : sequence of str
        Free factors, and those in the design check.
    jacobian : array (f, n)
        d beta/d gamma.

    Notes
    -----
    With a = grad_u g, alpha = a/|a|, u* = -beta alpha and P = I - alpha alpha^T,

        (I + beta/|a| P H P) d alpha = 1/|a| P (a_gamma - d beta H alpha),

    where a_gamma is the change of a at fixed u. That the models of basic variables may depend on the size is left out
    of a_gamma: their own turning is not known. It changes the correlation of components only, not their beta.
    """
    m, n = problem.m, problem.n
    beta, alpha, norm = reliability.beta, reliability.alpha, reliability.gradient_norm
    names = tuple(v.name for v in rule.variables)
    size = rule.size_name
    direct = tuple(f for f in free if rule.limit_state.depends_on(f))
    by = (*names, *([size] if size is not None else []), *direct)
    point = {**values, **dict(zip(names, reliability.x, strict=True))}
    with np.errstate(all="ignore"):
        _, _, bends = rule.limit_state.program(by, 2)(point)
        _, linear = problem.transform(reliability.u)
        h = problem.hessian(reliability.u)
        along = np.array([dot(row, alpha) for row in h])
        # P H P / |a| on the whole space, and the identity along alpha.
        across = _projected(_projected(h, alpha).swapaxes(0, 1), alpha)
        matrix = np.moveaxis(np.eye(m)[:, :, None] + (beta / norm) * across, 2, 0)
        turned = np.zeros((len(free), m, n))
        for f, name in enumerate(free):
            by_x: list[Any] = [np.zeros(n) for _ in names]
            if name in direct:
                by_x = [row + bends[i][by.index(name)] for i, row in enumerate(by_x)]
            if size is not None and name in check_free:
                moved = sizing.slopes[list(check_free).index(name)]
                by_x = [row + bends[i][by.index(size)] * moved for i, row in enumerate(by_x)]
            a = np.empty((m, n))
            problem.pull(by_x, linear, a)
            right = _projected((a - jacobian[f] * along) / norm, alpha)
            usable = np.all(np.isfinite(right), axis=0) & np.all(np.isfinite(matrix), axis=(1, 2))
            turned[f] = np.nan
            if usable.any():
                solved = np.linalg.solve(matrix[usable], right.T[usable][:, :, None])
                turned[f][:, usable] = solved[:, :, 0].T
    return turned


def _projected(rows: Array, alpha: Array) -> Array:
    """Return P rows: (m, n) or (m, k, n), the first axis projected on the plane across alpha (m, n)."""
    if rows.ndim == 2:
        return rows - alpha * dot(alpha, rows)
    share = add_rows(alpha[:, None, :] * rows)
    return rows - alpha[:, None, :] * share[None, :, :]
