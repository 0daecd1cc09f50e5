"""Design points on a kink, where two branches of the limit state meet.

Where both branches must fail together (``max`` of two margins), the nearest point may lie on their intersection,
and no step along one gradient leads there. Here both branches are kept, each linearised where it was seen last, and
the point of their intersection that is nearest to the origin is taken: the HLRF step with two limit states.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH, FormSettings
from calibrate.reliability.verify import BEYOND, Points

Array = npt.NDArray[np.float64]

STEPS = 40
# Offset from the kink at which the branches are looked at: a part of the last step, within bounds.
WIDEST, NARROWEST, PART = 0.3, 1e-5, 0.3
# Unit gradients of which the cosine is larger belong to one branch.
ALIKE = 0.9999
ON_SURFACE = 1e-7


@dataclass(slots=True)
class _Branch:
    """A linearisation: g + a (u - p) = 0 is a u = level."""

    a: Array
    level: Array

    def renew(self, where: npt.NDArray[np.bool_], a: Array, level: Array) -> None:
        self.a = np.where(where, a, self.a)
        self.level = np.where(where, level, self.level)


def meet(problem: Problem, start: Array, side: Array, settings: FormSettings) -> tuple[Points, int]:
    """Look for the nearest point of a kink around ``start``, shape (m, n).

    Returns
    -------
    points : Points
        ``good`` where such a point was found, the limit state vanishes there and changes its sign between the
        branches, and neither branch alone leads nearer. The gradient is the convex combination of those of the
        branches that points to the origin.
    evaluations : int
        Evaluations of the limit state.
    """
    first, second, evaluations = _branches(problem, start)
    u = start
    size = np.full(side.size, 1.0)
    first_share = second_share = opens = np.zeros(side.size)
    # A column that has ended keeps what it has, so that it does not depend on the others.
    going = np.ones(side.size, dtype=np.bool_)
    for _ in range(STEPS):
        point, one, two = _intersection(first, second)
        first_share, second_share = np.where(going, one, first_share), np.where(going, two, second_share)
        inside = dot(point, point) <= REACH**2
        point = np.where(going & inside, point, u)
        move = point - u
        size = np.where(going, np.sqrt(dot(move, move)), size)
        u = point
        normal = first.a - second.a
        length = np.sqrt(dot(normal, normal))
        normal = np.where(length > 0.0, normal / np.where(length > 0.0, length, 1.0), 0.0)
        offset = normal * np.clip(PART * size, NARROWEST, WIDEST)
        a, level = _linearised(problem, u + offset)
        b, other = _linearised(problem, u - offset)
        opens = np.where(going, dot(a - b, normal), opens)
        for gradient, height in ((a, level), (b, other)):
            nearer = _cosine(gradient, first.a) >= _cosine(gradient, second.a)
            usable = going & np.isfinite(height)
            first.renew(usable & nearer, gradient, height)
            second.renew(usable & ~nearer, gradient, height)
        evaluations += 2 * int(np.count_nonzero(going))
        going &= ~(size <= settings.tolerance)
        if not going.any():
            break
    x = np.stack([np.broadcast_to(row, side.shape) for row in problem.x(u)])
    g = problem.value(u)
    radius = np.sqrt(dot(u, u))
    total = -side * (first_share + second_share)
    norm = radius / np.abs(total)
    good = (
        (size <= settings.tolerance)
        & (np.abs(g) <= ON_SURFACE * norm)
        & (side * first_share < 0.0)
        & (side * second_share < 0.0)
        & (side * opens > 0.0)
        & (radius > 0.0)
    )
    between = first.a / np.sqrt(dot(first.a, first.a)) + second.a / np.sqrt(dot(second.a, second.a))
    inwards = np.where(good, -side * BEYOND * between / np.sqrt(dot(between, between)), 0.0)
    good &= side * problem.value(u + inwards) < 0.0
    beta = side * radius
    return Points(beta, u, x, -u / beta, norm, good), evaluations + 2 * side.size


def _linearised(problem: Problem, p: Array) -> tuple[Array, Array]:
    a = np.empty_like(p)
    g = problem.evaluate(p, a)[0]
    return a, dot(a, p) - g


def _cosine(a: Array, b: Array) -> Array:
    return dot(a, b) / np.sqrt(dot(a, a) * dot(b, b))


def _branches(problem: Problem, start: Array) -> tuple[_Branch, _Branch, int]:
    """Return the branch at ``start`` and the one around it whose gradient differs most."""
    a, level = _linearised(problem, start)
    first, second = _Branch(a, level), _Branch(a.copy(), level.copy())
    least = np.full(level.size, ALIKE)
    for i in problem.random:
        for offset in (WIDEST, -WIDEST):
            p = start.copy()
            p[i] += offset
            b, other = _linearised(problem, p)
            alike = _cosine(a, b)
            differs = (alike < least) & np.isfinite(other)
            second.renew(differs, b, other)
            least = np.where(differs, alike, least)
    return first, second, (1 + 2 * len(problem.random)) * level.size


def _intersection(first: _Branch, second: _Branch) -> tuple[Array, Array, Array]:
    """Return the point nearest to the origin on both planes, and the shares of their gradients in it."""
    aa, ab, bb = dot(first.a, first.a), dot(first.a, second.a), dot(second.a, second.a)
    determinant = aa * bb - ab * ab
    one = (bb * first.level - ab * second.level) / determinant
    two = (aa * second.level - ab * first.level) / determinant
    return one * first.a + two * second.a, one, two
