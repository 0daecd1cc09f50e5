"""The coefficient of the Nataf transformation: correlation in standard normal space for correlation of values.

A. Nataf, Comptes rendus 225 (1962) 42; P.-L. Liu & A. Der Kiureghian, Probabilistic Engineering Mechanics 1 (1986)
105, who fitted formulas to what is solved here. With the standardised transforms expanded in Hermite polynomials,
h_i(z) = sum a_k He_k(z)/sqrt(k!), Mehler's formula makes the correlation a power series,
rho(rho0) = sum a_k b_k rho0**k (all from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.reliability.dependence.hermite import Standardised
from calibrate.reliability.dependence.power_series import pair_series
from calibrate.reliability.dependence.shapes import distinct_shapes

Array = npt.NDArray[np.float64]

KINDS = ("product-moment", "rank")


@dataclass(frozen=True, slots=True, eq=False)
class Equivalent:
    """Correlation in standard normal space, of the shape of the two distributions together: () or (n,).

    Attributes
    ----------
    coefficient : array
        Correlation rho0 of the standard normal variables; NaN where no rho0 leads to the correlation that is wanted,
        where one of the variables does not scatter, or has no finite standard deviation.
    lowest, highest : array
        Correlation at rho0 = -1 and 1. Zero where one variable does not scatter, NaN where a standard deviation is
        missing; -1 and 1 for rank correlation.
    """

    coefficient: Array
    lowest: Array
    highest: Array


def equivalent_correlation(
    first: Distribution, second: Distribution, rho: float, *, kind: str = "product-moment"
) -> Equivalent:
    """Return the correlation in standard normal space that gives two variables their correlation.

    Parameters
    ----------
    first, second : Distribution
        Shapes () or (n,), the same n.
    rho : float
        Correlation of the variables, from -1 to 1.
    kind : {"product-moment", "rank"}
        Pearson's coefficient of the values, or Spearman's of their ranks.

    Returns
    -------
    Equivalent

    Raises
    ------
    InputError
        ``rho`` or ``kind`` is not allowed, or the two distributions belong to different numbers of situations.

    Notes
    -----
    The error of the coefficient is below 1e-8 for smooth transforms, and below 1e-6 for mixtures with gaps and
    for tails with finite variance down to power 2.1. Situations that differ by location and scale share one solution.

    For ranks, rho0 = 2 sin(pi rho/6) whatever the (continuous) distributions; K. Pearson (1907), from memory.
    """
    if kind not in KINDS:
        raise InputError(
            Problem(
                f"there is no kind of correlation '{kind}'.",
                suggestion=did_you_mean(kind, KINDS),
            )
        )
    if not -1.0 <= rho <= 1.0:
        raise InputError(f"A correlation must lie between -1 and 1; got {rho:g}.")
    try:
        shape = np.broadcast_shapes(first.shape, second.shape)
    except ValueError:
        raise InputError(
            f"Two correlated distributions must belong to the same situations; got the shapes {first.shape} and "
            f"{second.shape}."
        ) from None
    if first.is_constant or second.is_constant:
        return Equivalent(np.full(shape, np.nan), np.zeros(shape), np.zeros(shape))
    if kind == "rank":
        return Equivalent(
            np.full(shape, 2.0 * math.sin(math.pi * rho / 6.0)), np.full(shape, -1.0), np.full(shape, 1.0)
        )
    n = math.prod(shape)
    shapes = distinct_shapes(first, n), distinct_shapes(second, n)
    if n == 0:
        return Equivalent(np.empty(shape), np.empty(shape), np.empty(shape))
    pairs, of_situation = np.unique(
        shapes[0].of_situation * shapes[1].distinct + shapes[1].of_situation, return_inverse=True
    )
    a = Standardised(shapes[0].distribution)
    b = a if shapes[1].distribution is shapes[0].distribution else Standardised(shapes[1].distribution)
    solved = _solved(a, b, *np.divmod(pairs, shapes[1].distinct), rho)
    coefficient, lowest, highest = (s[np.ravel(of_situation)].reshape(shape) for s in solved)
    return Equivalent(coefficient, lowest, highest)


def _solved(
    a: Standardised, b: Standardised, i: npt.NDArray[np.intp], j: npt.NDArray[np.intp], rho: float
) -> tuple[Array, Array, Array]:
    """Return coefficient, lowest and highest for the pairs (i, j) of elements."""
    coefficient, lowest, highest = (np.full(i.size, np.nan) for _ in range(3))
    for at, series in pair_series(a, b, i, j, limit=1.0):
        lowest[at], highest[at] = series.lowest, series.highest
        coefficient[at] = series.solve(rho)
    return coefficient, lowest, highest
