"""Principal curvatures of the limit-state surface at the design point."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.rows import dot

Array = npt.NDArray[np.float64]


def principal_curvatures(hessian: Array, alpha: Array, norm: Array) -> tuple[Array, Array]:
    """Return the principal curvatures and axes of the surface g = 0 at a point on it.

    With v = -alpha . u the coordinate towards failure, the surface is v = beta + 1/2 sum kappa_i v_i^2 to second order,
    where kappa_i are the eigenvalues of hessian/norm on the tangent plane. A positive one bends the surface towards
    failure.

    Parameters
    ----------
    hessian : array (r, r, n)
        Second derivatives of g by u.
    alpha : array (r, n)
        Unit gradient.
    norm : array (n,)
        Length of the gradient.

    Returns
    -------
    curvatures : array (r - 1, n)
        Ascending; NaN where anything is not finite.
    axes : array (r, r - 1, n)
        ``axes[:, i]`` is the unit vector along which the surface has curvature i.
    """
    r, n = alpha.shape
    matrices = np.zeros((n, r - 1, r - 1))
    with np.errstate(all="ignore"):
        # A reflection takes the last axis to the direction of alpha, the others to a basis of the tangent plane.
        v = np.array(alpha)
        v[-1] += np.where(alpha[-1] < 0.0, -1.0, 1.0)
        tau = 2.0 / dot(v, v)
        w = np.empty_like(v)
        for i in range(r):
            np.divide(dot(hessian[i], v), norm, out=w[i])
        w *= tau
        q = w - (0.5 * tau * dot(v, w)) * v
        fine = np.ones(n, dtype=np.bool_)
        for i in range(r - 1):
            for j in range(i + 1):
                entry = hessian[i, j] / norm - v[i] * q[j] - q[i] * v[j]
                fine &= np.isfinite(entry)
                # The lower triangle is all that is read.
                matrices[:, i, j] = entry
    matrices[~fine] = 0.0
    values, vectors = np.linalg.eigh(matrices, UPLO="L")
    axes = np.zeros((r, r - 1, n))
    axes[:-1] = np.moveaxis(vectors, 0, -1)
    for i in range(r - 1):
        axes[:, i] -= v * (tau * dot(v, axes[:, i]))
    curvatures = np.where(fine, values.T, np.nan)
    return np.ascontiguousarray(curvatures), axes
