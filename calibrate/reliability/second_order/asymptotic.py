"""Asymptotic second-order formulas from the reliability index and the principal curvatures.

The failure region near the design point is v > beta + 1/2 sum kappa_i v_i^2, where v is the coordinate towards failure
and v_i are those along the principal axes. A positive curvature makes failure rarer than the tangent plane says,
whether the origin is safe or fails. For beta < 0 the formulas are applied to the safe region, for which the
distance is -beta and the curvatures are -kappa, and the result is turned back.

References
----------
.. [1] K. Breitung, "Asymptotic approximations for multinormal integrals", Journal of Engineering Mechanics 110 (1984).
.. [2] M. Hohenbichler and R. Rackwitz, "Improvement of second-order reliability estimates by importance sampling",
   Journal of Engineering Mechanics 114 (1988).
.. [3] L. Tvedt, "Two second-order approximations to the failure probability", Veritas report RDIV/20-004-83 (1983).

All three from memory.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

Array = npt.NDArray[np.float64]


def breitung(beta: Array, curvatures: Array) -> Array:
    """Return the index by Breitung's formula, p = Phi(-beta) prod (1 + beta kappa_i)^(-1/2).

    Parameters
    ----------
    beta : array (n,)
        Reliability index of first order.
    curvatures : array (k, n)
        Principal curvatures at the design point.

    Returns
    -------
    array (n,)
        -Phi^-1(p); NaN where a factor is not positive or the result is no probability.
    """
    side, b, kappa = facing(beta, curvatures)
    with np.errstate(all="ignore"):
        return side * index_of(special.log_ndtr(-b) + _log_product(b, kappa))


def hohenbichler_rackwitz(beta: Array, curvatures: Array) -> Array:
    """Return the index by the formula of Hohenbichler and Rackwitz.

    As :func:`breitung`, with psi = phi(beta)/Phi(-beta) in place of beta in the product. At beta = 0 the failure
    region is the one that is integrated.
    """
    side, b, kappa = facing(beta, curvatures)
    with np.errstate(all="ignore"):
        return side * index_of(special.log_ndtr(-b) + _log_product(hazard(b), kappa))


def tvedt(beta: Array, curvatures: Array) -> Array:
    """Return the index by Tvedt's formula of three terms; NaN also where 1 + (beta + 1) kappa_i is not positive."""
    side, b, kappa = facing(beta, curvatures)
    with np.errstate(all="ignore"):
        first = np.exp(_log_product(b, kappa))
        second = np.exp(_log_product(b + 1.0, kappa))
        # Product of the principal roots of 1 + (beta + i) kappa; each has a positive real part, so that no root is
        # taken on the wrong sheet.
        real, imaginary = np.ones_like(b), np.zeros_like(b)
        for row in kappa:
            root_real, root_imaginary = root(1.0 + b * row, row)
            real, imaginary = (
                real * root_real - imaginary * root_imaginary,
                real * root_imaginary + imaginary * root_real,
            )
        third = real / (real * real + imaginary * imaginary)
        excess = b - hazard(b)
        part = first + excess * (first - second) + (b + 1.0) * excess * (first - third)
        return side * index_of(special.log_ndtr(-b) + np.log(part))


def facing(beta: Array, curvatures: Array) -> tuple[Array, Array, Array]:
    """Return the side of the origin (1 safe, -1 failing), and distance and curvatures as seen from there."""
    side = np.where(beta < 0.0, -1.0, 1.0)
    return side, side * beta, side * curvatures


def hazard(b: Array) -> Array:
    """Return phi(b)/Phi(-b) without loss in the tail."""
    return np.asarray(np.sqrt(2.0 / np.pi) / special.erfcx(b / np.sqrt(2.0)))


def index_of(log_probability: Array) -> Array:
    """Return -Phi^-1(p) from log p; NaN where p is not between 0 and 1."""
    fine = (log_probability < 0.0) & (log_probability > -np.inf)
    return np.where(fine, -special.ndtri_exp(np.where(fine, log_probability, -1.0)), np.nan)


def root(real: Array, imaginary: Array) -> tuple[Array, Array]:
    """Return the principal square root of real + i imaginary.

    Of basic operations only, which are exactly rounded: the same bits whatever the shape.
    """
    length = np.sqrt(real * real + imaginary * imaginary)
    large = np.sqrt(0.5 * (length + np.abs(real)))
    small = 0.5 * imaginary / large
    right = real >= 0.0
    return np.where(right, large, np.abs(small)), np.where(right, small, np.copysign(large, imaginary))


def _log_product(distance: Array, kappa: Array) -> Array:
    """Return log prod (1 + distance kappa_i)^(-1/2); NaN where a factor is not positive."""
    total = np.zeros_like(distance)
    for row in kappa:
        factor = distance * row
        total = total - 0.5 * np.log1p(np.where(factor > -1.0, factor, np.nan))
    return total
