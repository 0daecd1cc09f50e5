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
from scipy import special

from calibrate.distributions import Distribution
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.reliability.dependence.hermite import Standardised, extreme_products
from calibrate.reliability.dependence.shapes import distinct_shapes

Array = npt.NDArray[np.float64]

KINDS = ("product-moment", "rank")

_STEPS = 100
# What quadrature may miss of the reach: a correlation this close to its end is the end.
_ROUNDING = 1e-10


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
    lengths = np.array([min(a.series[p].size, b.series[q].size) for p, q in zip(i, j, strict=True)])
    for length in np.unique(lengths[lengths > 0]):
        at = np.flatnonzero(lengths == length)
        products = np.stack([a.series[i[p]][:length] * b.series[j[p]][:length] for p in at], axis=1)
        if length == 1:
            # One is normal: rho is proportional to rho0.
            low, high = -products[0], products[0]
        else:
            reach = np.array([extreme_products(a, i[p], b, j[p]) for p in at])
            low, high = np.maximum(reach[:, 0], -1.0), np.minimum(reach[:, 1], 1.0)
        lowest[at], highest[at] = low, high
        coefficient[at] = _Series(products, low, high).solve(rho)
    return coefficient, lowest, highest


class _Series:
    """rho(rho0) = sum_k c_k rho0**k, c (orders, pairs), with what lies beyond the last order.

    The value of the remainder at -1 and 1 is known, because the correlation itself is. Coefficients fall like
    k**(-3/2) where both transforms jump at the same place; sums beyond order K are then R(1) w(-K ln rho0),
    w(s) = exp(-s) - sqrt(pi s) erfc(sqrt(s)), half the exponential integral of order 3/2.
    """

    def __init__(self, products: Array, lowest: Array, highest: Array) -> None:
        self.c, self.lowest, self.highest = products, lowest, highest
        self.rest_low = lowest - self._sum(np.full(lowest.size, -1.0))[0]
        self.rest_high = highest - self._sum(np.ones(lowest.size))[0]

    def _sum(self, r: Array) -> tuple[Array, Array]:
        value, slope = np.zeros(r.size), np.zeros(r.size)
        for c in self.c[::-1]:
            slope = slope * r + value
            value = value * r + c
        return value * r, slope * r + value

    def value(self, r: Array) -> tuple[Array, Array]:
        """Return rho and d rho/d rho0 inside (-1, 1)."""
        value, slope = self._sum(r)
        order, size = self.c.shape[0], np.maximum(np.abs(r), 1e-300)
        s = np.maximum(-order * np.log(size), 1e-30)
        root, tail = np.sqrt(math.pi * s), special.erfc(np.sqrt(s))
        rest = np.where(r < 0.0, self.rest_low, self.rest_high)
        # dw/ds = -sqrt(pi/s) erfc(sqrt(s))/2, ds/dr = -K/r.
        bend = 0.5 * order * root / s * tail / size
        return value + rest * (np.exp(-s) - root * tail), slope + np.sign(r) * rest * bend

    def solve(self, rho: float) -> Array:
        """Return rho0 for rho: Newton's method inside a shrinking bracket; NaN out of reach."""
        at_low, at_high = rho <= self.lowest, rho >= self.highest
        out = (rho < self.lowest - _ROUNDING) | (rho > self.highest + _ROUNDING)
        low, high = np.full(self.lowest.size, -1.0), np.ones(self.lowest.size)
        r = rho / np.where(rho < 0.0, -self.lowest, self.highest)
        r = np.where(at_low | at_high, 0.0, r)
        done = at_low | at_high
        for _ in range(_STEPS):
            value, slope = self.value(r)
            above = value > rho
            high, low = np.where(above, r, high), np.where(above, low, r)
            with np.errstate(divide="ignore", invalid="ignore"):
                moved = r - (value - rho) / slope
            moved = np.where((moved >= low) & (moved <= high), moved, 0.5 * (low + high))
            # What has arrived stays, so that no pair depends on how far others are.
            moved = np.where(done, r, moved)
            done = done | (np.abs(moved - r) <= 1e-15)
            r = moved
            if done.all():
                break
        r = np.where(at_low, -1.0, np.where(at_high, 1.0, r))
        return np.where(out, np.nan, r)
