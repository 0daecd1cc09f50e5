"""Exact derivatives of the probability of a system by the indices and correlations of its components.

With the standard normal density phi, d P / d beta_i is -phi(beta_i) times the probability that component i decides,
given that it is on the edge of failure. d P / d rho_ij is the bivariate density on the edge of both times the mean
there of the second difference of failure by i and j; for a parallel system this is the formula of R. L. Plackett,
Biometrika 41 (1954) 351-360 (from memory).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.rows import add_rows, dot
from calibrate.reliability.systems.cubes import deciding, deciding_together
from calibrate.reliability.systems.half_spaces import HalfSpaces
from calibrate.reliability.systems.logic import Sets

Array = npt.NDArray[np.float64]

# Planes whose 1 - rho^2 is smaller have no derivative by their correlation.
_PARALLEL = 1e-12


def density(beta: Array) -> Array:
    """Return the standard normal density."""
    return np.asarray(np.exp(-0.5 * beta * beta) / np.sqrt(2.0 * np.pi))


def by_beta(planes: HalfSpaces, sets: Sets) -> Array:
    """Return -d P / d beta_i, shape (k, n)."""
    result = np.zeros_like(planes.beta)
    for i in planes.names:
        terms = deciding(sets, i)
        if terms:
            result[i] = density(planes.beta[i]) * planes.given(i).mean(terms)[0]
    return result


def by_correlation(planes: HalfSpaces, sets: Sets) -> Array:
    """Return -d P / d rho_ij, shape (k, k, n), for a change of the pair ij = ji."""
    beta, rho = planes.beta, planes.correlation
    result = np.zeros(rho.shape)
    for i in planes.names:
        edge = planes.given(i)
        for j in edge.names[i:]:
            terms = deciding_together(sets, i, j)
            if terms:
                result[i, j] = -_density_of_two(beta[i], beta[j], rho[i, j]) * edge.given(j).mean(terms)[0]
                result[j, i] = result[i, j]
    return result


def direction(slopes: Array, alpha: Array) -> Array:
    """Return the unit vector (m, n) of the slope by a shift in u, which moves beta_i by alpha_i times the shift.

    NaN where the components' parts cancel.
    """
    total = add_rows(slopes[:, None, :] * alpha)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(total / np.sqrt(dot(total, total)))


def _density_of_two(a: Array, b: Array, rho: Array) -> Array:
    """Return the bivariate normal density, 0 where the planes coincide or oppose each other."""
    square = (1.0 - rho) * (1.0 + rho)
    turned = square > _PARALLEL
    square = np.where(turned, square, 1.0)
    gap = np.where(
        rho >= 0.0, (a - b) ** 2 + 2.0 * (1.0 - rho) * a * b, (a + b) ** 2 - 2.0 * (1.0 + rho) * a * b
    )
    return np.where(turned, np.exp(-0.5 * gap / square) / (2.0 * np.pi * np.sqrt(square)), 0.0)
