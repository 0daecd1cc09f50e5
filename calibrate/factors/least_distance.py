"""Small convex quadratic programs with many linear inequalities, exactly.

References
----------
C. L. Lawson and R. J. Hanson, Solving Least Squares Problems (1974), chapter 23: least distance programming by
non-negative least squares.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.optimize import nnls

Array = npt.NDArray[np.float64]


def least_squares_with_bounds(a: Array, b: Array, g: Array, h: Array) -> Array | None:
    """Return the x that minimises |a x - b| subject to g x >= h, or None where no x does.

    Parameters
    ----------
    a : array (k, f)
        Of full column rank.
    b : array (k,)
    g : array (m, f)
    h : array (m,)
        The number of inequalities may be large; the number f of unknowns should be small.
    """
    q, r = np.linalg.qr(a)
    centre = np.linalg.solve(r, q.T @ b)
    if not h.size:
        return np.asarray(centre)
    # y = r (x - centre): minimise |y| subject to (g r^-1) y >= h - g centre.
    transformed = np.linalg.solve(r.T, g.T).T
    wanted = h - g @ centre
    scale = np.maximum(np.linalg.norm(transformed, axis=1), 1e-300)
    transformed, wanted = transformed / scale[:, None], wanted / scale
    if np.all(wanted <= 0.0):
        return np.asarray(centre)
    size = max(float(np.max(np.abs(wanted))), 1e-300)
    matrix = np.vstack([transformed.T, wanted / size])
    target = np.zeros(matrix.shape[0])
    target[-1] = 1.0
    try:
        y, residual = nnls(matrix, target, maxiter=50 * matrix.shape[0] + 1000)
    except RuntimeError:
        return None
    if residual < 1e-10:
        return None
    rest = matrix @ y - target
    return np.asarray(centre + np.linalg.solve(r, -rest[:-1] / rest[-1] * size))
