"""Whether a foot of the perpendicular is a local minimum of the distance, by the second-order condition."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import apply, dot
from calibrate.reliability.verify import Points

Array = npt.NDArray[np.float64]

# Least eigenvalue, in units of that of a plane limit state, that counts as not negative: Hessians may be differences.
LEAST = -1e-4


def least_curvature(problem: Problem, points: Points) -> Array:
    """Return the least eigenvalue of the Hessian of the Lagrangian along the limit state, at most 1; shape (n,).

    On g = 0 the distance |u|^2/2 has the second derivatives I + (beta/|grad g|) H in the tangent plane, H those of g:
    1 - beta kappa for a principal curvature kappa towards the origin. All are positive at a local minimum, and one is
    negative at a saddle point or a maximum. NaN where the Hessian is not finite.
    """
    hessian = problem.hessian(points.u)
    bent = hessian * (points.beta / points.norm)
    alpha = points.alpha
    # P (I + bent) P + alpha alpha^T with P = I - alpha alpha^T is I + P bent P.
    across = apply(bent, alpha)
    along = dot(alpha, across)
    flat = bent - alpha[:, None] * across[None] - across[:, None] * alpha[None]
    flat = flat + along * alpha[:, None] * alpha[None]
    usable = np.isfinite(np.sum(flat, axis=(0, 1)))
    matrices = np.moveaxis(np.where(usable, 0.5 * (flat + np.swapaxes(flat, 0, 1)), 0.0), -1, 0)
    least = 1.0 + np.minimum(np.linalg.eigvalsh(matrices)[:, 0], 0.0)
    return np.where(usable, least, np.nan)


def is_local_minimum(problem: Problem, points: Points) -> npt.NDArray[np.bool_]:
    """Return where no direction along the limit state leads nearer in second order; True where it is not known."""
    return np.asarray(~(least_curvature(problem, points) < LEAST))
