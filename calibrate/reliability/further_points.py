"""Further design points, once one is known: where else the limit state comes near to the origin.

Searches start on rays in many directions, seeded random ones among them, and then from a limit state that is pushed
away around every point known so far; what they lead to is polished on the true limit state. A point counts when it
is a local minimum of the distance, apart from the others, and probable enough.

References
----------
.. [1] A. Der Kiureghian and T. Dakessian, "Multiple design points in first and second-order reliability", Structural
   Safety 20 (1998).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.reliability.bulge import Bulged
from calibrate.reliability.candidates import NEARER, SAME, TIE
from calibrate.reliability.directions import RADII, axes, between, corners, scan, unit
from calibrate.reliability.kink import meet
from calibrate.reliability.local_minimum import is_local_minimum
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot
from calibrate.reliability.search import search
from calibrate.reliability.settings import REACH, FormSettings
from calibrate.reliability.status import CONVERGED, KINK, TOO_MANY
from calibrate.reliability.verify import BEYOND, Points, settle

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

# Situations times starts that are worked on at once.
BLOCK = 16_000
# Random directions, the same for every situation, so that none depends on which others are looked at.
RANDOM = 16
# Random part of directions that are symmetric: exactly on a line of symmetry searches end at saddle points.
ASKEW = 0.05
# Points around which bulges are kept, beyond those that are wanted: what is too improbable attracts searches as well.
BESIDES = 4
# Where the search of a bulged limit state starts, in parts of the given design point.
NEAR_ORIGIN, OPPOSITE = -0.02, -1.0
FIELDS = ("beta", "u", "alpha", "norm")


@dataclass(frozen=True, slots=True, eq=False)
class FurtherPoints:
    """Design points of n situations with m variables, up to k each; NaN where there are fewer.

    Attributes
    ----------
    u, alpha : array (k, m, n)
        Points in standard normal space and sensitivity factors; the first is the given design point, the others
        follow in the order of their distance.
    beta : array (k, n)
        Signed distances.
    count : int array (n,)
        Number of points, 0 where no design point was given.
    nearer : bool array (n,)
        Whether one of the further points is nearer than the given one, which then was not the design point.
    more : bool array (n,)
        Whether further points than these were found, for example on a sphere, where every point is one.
    evaluations : int
        Evaluations of the limit state, counted by situation.
    """

    u: Array
    beta: Array
    alpha: Array
    count: npt.NDArray[np.int64]
    nearer: Flags
    more: Flags
    evaluations: int


@dataclass(slots=True)
class _Pool:
    """Local minima found so far, of k situations: first the given point; ``beta`` is NaN where there is none.

    Arrays have shape (slots, k) or (m, slots, k).
    """

    beta: Array
    u: Array
    alpha: Array
    norm: Array

    def add(self, points: Points, slots: int) -> None:
        """Add points, of which column s k + j belongs to situation j; what is not good is left out."""
        k = self.beta.shape[1]
        for name in FIELDS:
            new = np.where(points.good, getattr(points, name), np.nan)
            new = new.reshape(*new.shape[:-1], slots, k)
            setattr(self, name, np.concatenate([getattr(self, name), new], axis=-2))

    def take(self, columns: npt.NDArray[np.int64]) -> _Pool:
        """Return the pool of some situations."""
        return _Pool(*(getattr(self, name)[..., columns] for name in FIELDS))

    def distinct(self, most: int) -> tuple[_Pool, npt.NDArray[np.int64]]:
        """Return the given point and the nearest ``most`` - 1 that are apart, and how many are apart in all."""
        distance = np.where(np.isnan(self.beta), np.inf, np.abs(self.beta))
        distance[0] = np.where(np.isfinite(distance[0]), -1.0, np.inf)
        # What differs by rounding counts as equal, so that the earlier start comes first.
        order = np.argsort(np.round(distance / TIE), axis=0, kind="stable")
        m, slots, k = self.u.shape
        columns = np.arange(k)
        kept = _Pool(
            np.full((most, k), np.nan),
            np.full((m, most, k), np.nan),
            np.full((m, most, k), np.nan),
            np.full((most, k), np.nan),
        )
        count = np.zeros(k, dtype=np.int64)
        for rank in range(slots):
            slot = order[rank]
            u, beta = self.u[:, slot, columns], self.beta[slot, columns]
            limit = (SAME * np.maximum(np.abs(beta), 1.0)) ** 2
            new = np.isfinite(beta)
            for i in range(most):
                apart = u - kept.u[:, i]
                new &= ~(dot(apart, apart) <= limit)
            at = np.flatnonzero(new & (count < most))
            for name in FIELDS:
                getattr(kept, name)[..., count[at], at] = getattr(self, name)[..., slot[at], at]
            count += new
        return kept, count


def further_points(
    problem: Problem, reliability: Reliability, *, most: int = 4, seed: int = 0, share: float = 0.1
) -> FurtherPoints:
    """Look for further design points of every situation that has one.

    Parameters
    ----------
    problem : Problem
        Of n situations.
    reliability : Reliability
        What FORM found for them.
    most : int
        Largest number of points of a situation, the given one among them; at least 1.
    seed : int
        Of the random directions.
    share : float
        Least probability Phi(-beta) of a point, as a part of that of the most probable one; where the origin fails,
        of being safe. Above 0, at most 1.

    Returns
    -------
    FurtherPoints
        Points that are local minima of the distance from the origin on the limit state, where failure lies beyond it
        (safety, where the origin fails). The search looks in many places, not everywhere.

    Raises
    ------
    InputError
        The reliability does not belong to the problem, or an option is out of its range.

    Notes
    -----
    Costs some hundreds of evaluations for each situation; meant for those that matter.
    """
    _check(problem, reliability, most, share)
    n, m = problem.n, problem.m
    result = FurtherPoints(
        np.full((most, m, n), np.nan), np.full((most, n), np.nan), np.full((most, m, n), np.nan),
        np.zeros(n, dtype=np.int64), np.zeros(n, dtype=np.bool_), np.zeros(n, dtype=np.bool_), 0,
    )  # fmt: skip
    given = np.flatnonzero(reliability.converged)
    fixed, random = _fixed_directions(problem, seed)
    size = max(1, BLOCK // (fixed.shape[1] + random.shape[1] + 2 + m))
    evaluations = 0
    for start in range(0, given.size, size):
        at = given[start : start + size]
        with np.errstate(all="ignore"):
            pool, cost = _found(problem.take(at, at.size), reliability, at, fixed, random, most)
            evaluations += cost
            _enter(result, at, pool, most, share)
    return replace(result, evaluations=evaluations)


def _check(problem: Problem, reliability: Reliability, most: int, share: float) -> None:
    if reliability.u.shape != (problem.m, problem.n):
        shape = (problem.m, problem.n)
        raise InputError(f"the design points have shape {reliability.u.shape}; the problem needs {shape}.")
    if most < 1:
        raise InputError(f"most = {most}: the number of points must be at least 1.")
    if not 0.0 < share <= 1.0:
        raise InputError(f"share = {share}: the least part of the probability must lie above 0, at most 1.")


def _enter(result: FurtherPoints, at: npt.NDArray[np.int64], pool: _Pool, most: int, share: float) -> None:
    """Write what is probable enough into the columns ``at`` of the result."""
    distance = np.abs(pool.beta)
    nearest = np.fmin.reduce(distance, axis=0)
    least = special.log_ndtr(-nearest) + np.log(share)
    probable = special.log_ndtr(-distance) > least - TIE
    probable[0] = True
    pool = _Pool(*(np.where(probable, getattr(pool, name), np.nan) for name in FIELDS))
    kept, count = pool.distinct(most)
    result.u[:, :, at] = np.moveaxis(kept.u, 1, 0)
    result.alpha[:, :, at] = np.moveaxis(kept.alpha, 1, 0)
    result.beta[:, at] = kept.beta
    result.count[at] = np.minimum(count, most)
    result.more[at] = count > most
    result.nearer[at] = nearest < distance[0] * (1.0 - NEARER) - TIE


def _fixed_directions(problem: Problem, seed: int) -> tuple[Array, Array]:
    """Return unit vectors for every situation, (m, slots): regular ones, slightly askew, and random ones."""
    m, rows = problem.m, list(problem.random)
    regular = np.concatenate(
        [axes(m, problem.random), corners(m, problem.random), between(m, problem.random)], 1
    )
    rng = stream(seed, "further design points")
    draws = np.zeros((m, regular.shape[1] + RANDOM))
    draws[rows] = rng.standard_normal((len(rows), draws.shape[1]))
    draws = unit(draws, np.zeros_like(draws))
    askew = regular + ASKEW * draws[:, RANDOM:]
    return unit(askew, regular), draws[:, :RANDOM]


def _found(
    problem: Problem,
    reliability: Reliability,
    at: npt.NDArray[np.int64],
    fixed: Array,
    random: Array,
    most: int,
) -> tuple[_Pool, int]:
    """Return every local minimum that any search led to, and the evaluations."""
    k, m = problem.n, problem.m
    beta, u, alpha = reliability.beta[at], reliability.u[:, at], reliability.alpha[:, at]
    pool = _Pool(beta[None], u[:, None], alpha[:, None], reliability.gradient_norm[at][None])
    g = problem.value(np.zeros((m, k)))
    side = np.where(g < 0.0, -1.0, np.where(g > 0.0, 1.0, np.where(beta < 0.0, -1.0, 1.0)))
    # Mirrored as a whole and in each coordinate, and turned askew in the same way for every situation.
    mirrored = [-u, *(np.where(np.arange(m)[:, None] == i, -u, u) for i in problem.random)]
    tilt = ASKEW * np.abs(beta) * random[:, [i % RANDOM for i in range(len(mirrored))]].T[:, :, None]
    regular = np.concatenate([fixed, random], axis=1)[:, :, None]
    direction = np.concatenate(
        [np.stack(mirrored, axis=1) + np.moveaxis(tilt, 0, 1), np.repeat(regular, k, axis=2)], axis=1
    )
    slots = direction.shape[1]
    direction = unit(direction.reshape(m, -1), np.zeros((m, slots * k)))
    wide = problem.take(np.tile(np.arange(k), slots), slots * k)
    rays = scan(wide, direction, np.tile(side, slots), np.tile(g, slots))
    radius = np.where(np.isnan(rays.start), np.maximum(np.tile(np.abs(beta), slots), 1.0), rays.start)
    points, evaluations = _searched(wide, direction * radius, np.tile(side, slots))
    pool.add(points, slots)
    evaluations += k + len(RADII) * wide.n
    more, cost = _behind_bulges(problem, pool, side, most + BESIDES)
    return more, evaluations + cost


def _behind_bulges(problem: Problem, pool: _Pool, side: Array, known: int) -> tuple[_Pool, int]:
    """Search beside bulges around the known points as long as new ones come; return all points and the cost."""
    k, evaluations = problem.n, 0
    going = np.arange(k)
    for _ in range(known):
        kept, before = pool.distinct(known)
        going = going[before[going] < known]
        if going.size == 0:
            break
        part, here, n = problem.take(going, going.size), kept.take(going), going.size
        bulged = Bulged.around(part, here.u, here.beta, here.norm, side[going])
        u = here.u[:, 0]
        start = np.concatenate([NEAR_ORIGIN * u, OPPOSITE * u], axis=1)
        twice = np.tile(np.arange(n), 2)
        pushed = search(bulged.take(twice, 2 * n), start, FormSettings())
        points, cost = _searched(part.take(twice, 2 * n), pushed.u, np.tile(side[going], 2))
        evaluations += cost + int(np.sum(pushed.passes))
        pool.add(_spread(points, going, k, 2), 2)
        going = going[pool.distinct(known)[1][going] > before[going]]
    return pool, evaluations


def _spread(points: Points, going: npt.NDArray[np.int64], k: int, slots: int) -> Points:
    """Return the points of some situations among those of all k, in each of the slots."""
    column = np.concatenate([going + s * k for s in range(slots)])
    whole = {}
    for name in Points.__slots__:
        values = getattr(points, name)
        empty = np.zeros((*values.shape[:-1], slots * k), dtype=values.dtype)
        empty[..., column] = values
        whole[name] = empty
    return Points(**whole)


def _searched(problem: Problem, start: Array, side: Array) -> tuple[Points, int]:
    """Search from the starts on the true limit state; return points, good where they are local minima, and the cost."""
    usable = np.isfinite(dot(start, start))
    settings = FormSettings()
    result = search(problem, np.where(usable, start, 0.0), settings)
    evaluations = int(np.sum(result.passes)) + 2 * side.size
    points = settle(problem, result.u)
    good = points.good & (result.code == CONVERGED) & usable & _is_entered(problem, points, side)
    at = np.flatnonzero(good)
    good[at] = is_local_minimum(problem.take(at, at.size), points.take(at))
    points = replace(points, good=good)
    at = np.flatnonzero(usable & ((result.code == KINK) | (result.code == TOO_MANY)))
    if at.size:
        met, cost = meet(problem.take(at, at.size), result.u[:, at], side[at], settings)
        for name in Points.__slots__:
            getattr(points, name)[..., at] = getattr(met, name)
        evaluations += cost
    return points, evaluations


def _is_entered(problem: Problem, points: Points, side: Array) -> Flags:
    """Return where the limit state is crossed outwards, from the side of the origin, within reach."""
    size = np.abs(points.beta)
    right = ((points.beta * side >= 0.0) | (size <= TIE)) & (size <= REACH)
    beyond = np.where(right, -(points.beta + side * BEYOND) * points.alpha, 0.0)
    return np.asarray(right & (side * problem.value(beyond) < 0.0))
