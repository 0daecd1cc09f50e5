"""Component events as half spaces {alpha_i u <= -beta_i}, and what remains of the others on the edge of one of them."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.rows import dot
from calibrate.reliability.systems.bivariate import FAR, SINGULAR

Array = npt.NDArray[np.float64]

# Rounding of a difference of bounds, below which two planes that do not turn against each other coincide.
_TIE = 1e-12


def correlation_of(alpha: Array) -> Array:
    """Return the correlation (k, k, n) of the components' linear margins, from unit vectors alpha (k, m, n).

    All components are described in the same standard normal space: a variable that a component does not have
    is a zero of its alpha.
    """
    k, _, n = alpha.shape
    matrix = np.ones((k, k, n))
    for i in range(k):
        for j in range(i):
            cosine = np.clip(dot(alpha[i], alpha[j]), -1.0, 1.0)
            matrix[i, j] = cosine
            matrix[j, i] = cosine
    return matrix


def flipped(correlation: Array, signs: tuple[float, ...]) -> Array:
    """Return the correlation (k, k, n) of variables multiplied by signs."""
    sign = np.asarray(signs)
    return np.asarray(correlation * (sign[:, None] * sign[None, :])[:, :, None])


def conditional(beta: Array, correlation: Array, i: int) -> tuple[Array, Array]:
    """Return the planes of the other components given that component i is on the edge of failure, Z_i = -beta_i.

    A component that i determines fails surely, or never; one that coincides with i, or opposes it along the same
    plane, gets an even chance: derivatives there are the mean of those from both sides.

    Returns
    -------
    beta : array (k - 1, n)
    correlation : array (k - 1, k - 1, n)
    """
    others = [j for j in range(len(beta)) if j != i]
    rho = correlation[i]
    own = [np.sqrt(np.maximum((1.0 - rho[j]) * (1.0 + rho[j]), 0.0)) for j in others]
    free = [1.0 - np.abs(rho[j]) >= SINGULAR for j in others]
    rest, matrix = np.empty((len(others), beta.shape[1])), np.ones((len(others), len(others), beta.shape[1]))
    for a, j in enumerate(others):
        # The difference for correlations of either sign in the form that keeps its digits.
        gap = np.where(
            rho[j] >= 0.0,
            (beta[j] - beta[i]) + (1.0 - rho[j]) * beta[i],
            (beta[j] + beta[i]) - (1.0 + rho[j]) * beta[i],
        )
        sure = np.where(np.abs(gap) <= _TIE * (1.0 + np.abs(beta[i])), 0.0, np.sign(gap) * FAR)
        regular = gap / np.where(free[a], own[a], 1.0)
        rest[a] = np.clip(np.where(free[a], regular, sure), -FAR, FAR)
        for b, m in enumerate(others[:a]):
            both = free[a] & free[b]
            cosine = (correlation[j, m] - rho[j] * rho[m]) / np.where(both, own[a] * own[b], 1.0)
            matrix[a, b] = np.where(both, np.clip(cosine, -1.0, 1.0), 0.0)
            matrix[b, a] = matrix[a, b]
    return rest, matrix
