"""How far the limit state departs from the paraboloid fitted at the design point."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.second_order.asymptotic import facing, hazard

Array = npt.NDArray[np.float64]

# Nodes of the Gauss-Hermite rule of three points are at 0 and at plus and minus this, in standard deviations.
NODE = np.sqrt(3.0)
# Part of the slope at the design point that is the least with which a step towards the surface is made.
KEPT = 0.05


def misfit(
    problem: Problem,
    beta: Array,
    alpha: Array,
    curvatures: Array,
    axes: Array,
    norm: Array,
    turned: Array,
) -> Array:
    """Return by how much the index is likely to be off because the surface is no paraboloid.

    Failures near the design point scatter along principal axis i with a standard deviation of about (1 + psi
    kappa_i)^(-1/2), psi = phi(beta)/Phi(-beta). At sqrt(3) times it, on either side, one Newton step along alpha
    from the paraboloid, with the slope that the second derivatives predict, leads about to the surface. Its length
    changes the probability there by a factor, and a Gauss-Hermite rule of three points on each axis makes one
    factor f of all of them. The misfit is -ln f/psi, the shift of the surface that would have the same effect.

    Parameters
    ----------
    problem : Problem
        m variables, n situations.
    beta : array (n,)
        Index of first order.
    alpha : array (m, n)
        Unit gradient at the design point.
    curvatures, axes : array (k, n), (m, k, n)
        Principal curvatures and axes.
    norm : array (n,)
        Length of the gradient at the design point.
    turned : array (m, n)
        Its Hessian times alpha, which says how the slope along alpha changes from there.

    Returns
    -------
    array (n,)
        In units of u; positive where the surface is safer than the paraboloid. Infinite where the limit state is
        not finite there. It does not see departures between the axes.
    """
    side, b, kappa = facing(beta, curvatures)
    psi = hazard(b)
    total = np.zeros_like(b)
    lost = np.zeros(b.shape, dtype=np.bool_)
    along_alpha = dot(turned, alpha)
    for i, row in enumerate(kappa):
        # Beyond the limit of the method there is no such standard deviation; failures spread over about sqrt(beta).
        t = NODE / np.sqrt(np.maximum(1.0 + psi * row, 1.0 / (1.0 + psi)))
        height = b + 0.5 * row * t * t
        base = alpha * (-side * height)
        factor = np.full_like(b, 2.0 / 3.0)
        along = axes[:, i] * t
        there = special.log_ndtr(-height)
        level = norm - side * (height - b) * along_alpha
        rise = dot(turned, along)
        for forward in (False, True):
            g = problem.value(base + along if forward else base - along)
            slope = np.maximum(level + rise if forward else level - rise, KEPT * norm)
            lost |= ~np.isfinite(g)
            outwards = side * g / slope
            ratio = np.exp(special.log_ndtr(-height - outwards) - there)
            factor = factor + ratio / 6.0
        total = total + np.log(factor)
    return np.where(lost, np.inf, -side * total / psi)
