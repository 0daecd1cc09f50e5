"""The weakest link: strength of parts that are larger than the specimens, or stressed unevenly.

A part holds while its weakest element holds. With independent elements the strength of a part ``s`` times as large
is the minimum of s repetitions; uneven stress counts by the size of an evenly stressed part with the same risk.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt

from calibrate.actions.arguments import positive
from calibrate.distributions import Distribution, minimum_of
from calibrate.errors import InputError, Problem

Array = npt.NDArray[np.float64]
Field = Callable[..., npt.ArrayLike]

PRECISION = 1e-10
"""Relative error that is asked of stress integrals."""

MOST_PIECES = 3_000
"""Divisions of the part after which a stress integral is given up."""


def size_effect(strength: Distribution, size_ratio: npt.ArrayLike) -> Distribution:
    """Return the strength of a part from that of the specimens.

    Parameters
    ----------
    strength : Distribution
        Strength of specimens, any family.
    size_ratio : float or array
        Size of the part (length, area or volume, whichever carries the flaws) over that of the specimens; any
        positive number, below 1 for smaller parts. Uneven stress: ratio of the equivalent sizes that
        :func:`stress_integral` gives.

    Returns
    -------
    Distribution
        1 - (1 - F)**size_ratio; a Weibull strength stays Weibull with its scale times size_ratio**(-1/shape).

    Raises
    ------
    InputError
        A ratio is not positive.

    Notes
    -----
    W. Weibull, "A statistical theory of the strength of materials" (1939, from memory). The elements are taken as
    independent: flaws that extend over a correlation length make the effect smaller.
    """
    return minimum_of(strength, positive("The ratio of sizes", size_ratio))


def size_factor(shape: npt.ArrayLike, size_ratio: npt.ArrayLike) -> Array:
    """Return the factor size_ratio**(-1/shape) on every fractile of a two-parameter Weibull strength.

    Parameters
    ----------
    shape : array_like
        Weibull shape.
    size_ratio : array_like
        As in :func:`size_effect`.

    Raises
    ------
    InputError
        An argument is not positive.
    """
    m = positive("The Weibull shape", shape)
    return np.asarray(positive("The ratio of sizes", size_ratio) ** (-1.0 / m))


def stress_integral(
    stress: Field,
    shape: npt.ArrayLike,
    bounds: Sequence[tuple[float, float]] = ((0.0, 1.0),),
    *,
    element: Field | None = None,
    points: Sequence[Sequence[float]] = (),
) -> Array:
    """Return the equivalent size of an unevenly stressed part of two-parameter Weibull material.

    The part has the same risk as an evenly stressed one of this size under the reference stress.

    Parameters
    ----------
    stress : callable
        Stress over the reference stress (usually the largest) at the coordinates, one array argument per pair of
        bounds; compression, below zero, counts as nothing.
    shape : float or array
        Weibull shape m.
    bounds : sequence of (low, high)
        Ranges of one to three coordinates.
    element : callable, optional
        Size of an element per unit of the coordinates (in polar coordinates r); 1 by default.
    points : sequence of points
        Where to divide the part before anything else: jumps, and the places and the edges of peaks that are narrower
        than about a hundredth of the range, which would otherwise be missed.

    Returns
    -------
    array
        Integral of max(stress, 0)**m over the part, of the shape of ``shape``, in the unit of the bounds; with
        bounds from 0 to 1 it is the share of the size.

    Raises
    ------
    InputError
        A shape or range is not usable, the stress is not finite, or the integral is not found to
        :data:`PRECISION`.

    Examples
    --------
    A rectangular beam in even bending: 1/(2 (m + 1)) of its volume counts.

    >>> round(float(stress_integral(lambda y: 2.0 * y - 1.0, 4.0)), 6)
    0.1
    """
    from scipy import integrate

    m = positive("The Weibull shape", shape)
    low, high = (np.asarray(ends, dtype=np.float64) for ends in zip(*bounds, strict=True))
    if not (1 <= low.size <= 3 and np.isfinite(low).all() and np.isfinite(high).all() and (low < high).all()):
        raise InputError("A stress integral takes one to three finite ranges (low, high) with low < high.")

    def integrand(x: Array) -> Array:
        coordinates = tuple(np.moveaxis(x, -1, 0))
        s = np.broadcast_to(np.asarray(stress(*coordinates), dtype=np.float64), x.shape[:-1])
        if not np.isfinite(s).all():
            raise InputError("The stress must be finite everywhere in the part; leave a singular point out.")
        risk = np.maximum(s, 0.0).reshape((-1,) + (1,) * m.ndim) ** m
        if element is None:
            return risk
        size = np.broadcast_to(np.asarray(element(*coordinates), dtype=np.float64), x.shape[:-1])
        return risk * size.reshape((-1,) + (1,) * m.ndim)

    found = integrate.cubature(
        integrand, low, high, rtol=PRECISION, atol=0.0, max_subdivisions=MOST_PIECES,
        points=[np.asarray(p, dtype=np.float64).reshape(low.shape) for p in points],
    )  # fmt: skip
    value = np.asarray(found.estimate)
    if found.status != "converged" and not (value == 0.0).all():
        worst = float(np.max(np.asarray(found.error) / np.where(value > 0.0, value, np.nan)))
        text = f"The stress integral was found only to a relative error of {worst:.1g}."
        raise InputError(
            Problem(text, suggestion="Name its peaks in 'points', or split the part where it jumps.")
        )
    if not (value > 0.0).all():
        raise InputError("The stress is nowhere above zero: no part of the size is in tension.")
    return value
