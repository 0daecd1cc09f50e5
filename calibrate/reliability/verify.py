"""The consistent evaluation at the end of the fast iteration, and cheap signs that a nearer point may exist."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.reliability.directions import axes, corners
from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import add_rows, dot

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

# A point whose last correction is longer has not converged, whatever the iteration thought.
CORRECTION = 1e-4
# Distance beyond a design point at which the limit state must have changed its sign.
BEYOND = 1e-4
# Shares of a unit gradient: below the first a variable does not matter, from the second on it does.
NO_MATTER, MATTERS = 1e-3, 0.05
# Product of two components of unit gradients that shows a change of sign.
CHANGED = -0.01
# Least cosine between the gradients at the medians and at the design point that raises no question.
TURNED = 0.3
# A gradient shorter than this part of the one on the other side is flat: the limit state may touch zero and turn back.
FLAT = 1e-5
# Number of corners at which a limit state of unknown form is looked at, and where on the axes; radii are those of the
# design point.
LOOKS = 8
AXIS_PART = 0.6


@dataclass(frozen=True, slots=True)
class Points:
    """Points on the limit state and what is known there; NaN where there is none.

    Attributes
    ----------
    beta : array (n,)
        Signed distance.
    u, x, alpha : array (m, n)
        Point in both spaces and unit gradient, u = -beta alpha.
    norm : array (n,)
        Length of the gradient dg/du.
    good : bool array (n,)
        Whether the point is on the limit state and the foot of the perpendicular there.
    """

    beta: Array
    u: Array
    x: Array
    alpha: Array
    norm: Array
    good: Flags

    def take(self, columns: Any) -> Points:
        """Return the points of some situations."""
        return Points(*(getattr(self, name)[..., columns] for name in self.__slots__))


def settle(problem: Problem, u: Array) -> Points:
    """Evaluate at u, nearly a design point, and move to the foot of the perpendicular on the tangent plane.

    The move is of the size of the error of u. Its effect on x is of first order, and on beta of second, so that the
    rest is of the order of the square of the error.
    """
    a = np.empty_like(u)
    g, x, linear = problem.evaluate(u, a)
    norm = np.sqrt(dot(a, a))
    beta = (g - dot(a, u)) / norm
    np.divide(a, norm, out=a)
    point = a * -beta
    move = point - u
    good = dot(move, move) <= CORRECTION**2
    moved = np.empty_like(u)
    for row, value, change in zip(moved, x, problem.push(linear, move), strict=True):
        np.add(change, value, out=row)
    # Where the square of the gradient overflows, beta would be a finite zero.
    good &= np.isfinite(beta) & np.isfinite(norm)
    return Points(beta, point, moved, a, norm, good)


def suspicious(problem: Problem, points: Points, first_g: Array | None, first_a: Array | None) -> Flags:
    """Return where something speaks for another design point.

    The limit state is looked at on the other side of the origin: a smooth limit state that rises there, and that
    each variable drives in the same direction on both sides, has hardly more than one design point. What fails is
    not wrong, only worth a search.

    Parameters
    ----------
    first_g, first_a : array (n,), (m, n), optional
        Limit state and gradient at the origin, where they are known.
    """
    beta, alpha = points.beta, points.alpha
    side = np.where(beta < 0.0, -1.0, 1.0)
    size = np.abs(alpha)
    v = alpha * (side * np.maximum(np.abs(beta), 2.0))
    small = size < MATTERS
    if small.any():
        # Where a variable has no share here, one standard deviation shows whether it has one elsewhere.
        np.add(v, small, out=v)
    if not points.good.all():
        v[:, ~points.good] = 0.0
    b = np.empty_like(v)
    g = problem.evaluate(v, b)[0]
    length = np.sqrt(dot(b, b))
    if small.any():
        woken = np.any((size < NO_MATTER) & (np.abs(b) > MATTERS * length), axis=0)
    else:
        woken = np.zeros(problem.n, dtype=np.bool_)
    np.multiply(b, alpha, out=b)
    calm = (side * g > 0.0) & (add_rows(b) > 0.0) & (np.min(b, axis=0) >= CHANGED * length) & ~woken
    calm &= points.norm > FLAT * length
    if first_g is not None and first_a is not None:
        np.multiply(first_a, alpha, out=b)
        length = np.sqrt(dot(first_a, first_a))
        calm &= (side * first_g >= 0.0) & (add_rows(b) > TURNED * length)
        calm &= np.min(b, axis=0) >= CHANGED * length
    return np.asarray(np.logical_not(calm))


def unruly(problem: Problem, points: Points) -> Flags:
    """Return where a variable drives the limit state one way at the design point and the other way elsewhere.

    Looks in many more places than :func:`suspicious`, for limit states that are not affine in each variable. It
    costs an evaluation for each place, and finds most of the situations of random cubic limit states that have a
    nearer point than the one found; with products of monotonic functions it is silent.
    """
    alpha = points.alpha
    radius = np.maximum(np.abs(points.beta), 2.0)
    radius = np.where(points.good, radius, 0.0)
    m, random = problem.m, problem.random
    places = np.concatenate([corners(m, random)[:, :LOOKS], AXIS_PART * axes(m, random)], axis=1)
    calm = np.ones(problem.n, dtype=np.bool_)
    b = np.empty_like(alpha)
    for place in places.T:
        problem.evaluate(place[:, None] * radius, b)
        length = np.sqrt(dot(b, b))
        np.multiply(b, alpha, out=b)
        calm &= (add_rows(b) > 0.0) & (np.min(b, axis=0) >= CHANGED * length)
    return np.asarray(np.logical_not(calm))
