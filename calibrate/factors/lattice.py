"""The proposed factors: the best point of the lattice of steps, searched around the optimum.

Rounding one factor after the other misses better combinations. Here the points of the lattice are ordered by a
model of the objective (beta linear in the factors, with the exact Jacobian of the optimum) and evaluated exactly in
that order, until the model, after correction by its largest error seen so far, promises nothing better.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError
from calibrate.factors.model import Factor
from calibrate.factors.objective import Flags, Goal
from calibrate.factors.optimise import FLOOR_TOLERANCE
from calibrate.factors.response import Evaluation, Response

Array = npt.NDArray[np.float64]

ON_LATTICE = 1e-9
MOST_POINTS = 20_000
"""Points that are ordered by the model; with more the lattice is cut to a window around the optimum."""
SMALL = 40
"""A lattice of at most so many points is evaluated whole."""
LEAST_EVALUATED = 10
"""So many of the most promising points are evaluated in any case: a committee wants to see the runners-up."""
MOST_EVALUATED = 150
MODEL_ROWS = 400
TIE = 1e-9
MARGIN = 0.02


@dataclass(frozen=True, slots=True, eq=False)
class Candidate:
    """One point of the lattice that was evaluated.

    Attributes
    ----------
    factors : mapping of str to float
        All factors, in the order of the study.
    objective, mean, min, max : float
        Objective and beta over situations with weight.
    meets_floor : bool
    """

    factors: Mapping[str, float]
    objective: float
    mean: float
    min: float
    max: float
    meets_floor: bool


@dataclass(frozen=True, slots=True, eq=False)
class LatticeSearch:
    """What the search found.

    Attributes
    ----------
    evaluation : Evaluation
        Of the best point.
    candidates : tuple of Candidate
        Best first, at most ten; the first is the proposed one.
    rounded_singly : Candidate
        Each factor rounded to its nearest step by itself.
    evaluated, points : int
        Points evaluated, and points of the lattice.
    complete : bool
        Whether the stopping rule was reached; if not, the limit of evaluations ended the search.
    """

    evaluation: Evaluation
    candidates: tuple[Candidate, ...]
    rounded_singly: Candidate
    evaluated: int
    points: int
    complete: bool


def levels(factor: Factor) -> Array:
    """Return the integer multiples of the step within the bounds, each the float that its decimals read as.

    Raises
    ------
    InputError
        There is none.
    """
    assert factor.step is not None
    step = Decimal(repr(factor.step))
    first = math.ceil(factor.lower / factor.step - ON_LATTICE)
    last = math.floor(factor.upper / factor.step + ON_LATTICE)
    if last < first:
        raise InputError(
            f"Factor {factor.name}: no multiple of its step {factor.step:g} lies between {factor.lower:g} and "
            f"{factor.upper:g}."
        )
    return np.array([float(k * step) for k in range(first, last + 1)])


def search_lattice(
    response: Response,
    goal: Goal,
    optimum: Evaluation,
    progress: Callable[[int, int], None] | None = None,
) -> LatticeSearch | None:
    """Return the best lattice point, or None where no free factor has a step.

    What is guaranteed: every point within the window (all of a lattice of up to ``MOST_POINTS``) was either
    evaluated exactly, or its modelled objective, lowered by the largest relative error that the model showed at
    evaluated points and by ``MARGIN``, is above the best one found.
    """
    if all(f.step is None for f in response.free):
        return None
    axes = [levels(f) if f.step is not None else optimum.gamma[[i]] for i, f in enumerate(response.free)]
    total = math.prod(a.size for a in axes)
    points = _window(axes, optimum.gamma, response.free)
    rows = goal.rows(optimum)
    order, modelled = _ordered(points, optimum, goal, rows)
    nearest = np.array([a[np.argmin(np.abs(a - g))] for a, g in zip(axes, optimum.gamma, strict=True)])
    seen = _Evaluated(response, goal, rows, optimum)
    seen.add(nearest, None)
    complete = True
    for count, k in enumerate(order):
        if points.shape[0] > SMALL:
            if count >= LEAST_EVALUATED and seen.settled(modelled[k]):
                break
            if count >= MOST_EVALUATED:
                complete = False
                break
        seen.add(points[k], float(modelled[k]))
        if progress is not None:
            progress(count + 1, min(points.shape[0], MOST_EVALUATED))
    ranking = seen.ranked()
    best = ranking[0]
    return LatticeSearch(
        response(seen.points[best], optimum) if response.systems else seen.evaluations[best],
        tuple(seen.candidate(i) for i in ranking[:10]),
        seen.candidate(0),
        len(seen.points),
        total,
        complete,
    )


def _window(axes: Sequence[Array], centre: Array, free: Sequence[Factor]) -> Array:
    """Return lattice points, shape (p, f): all of them, or the largest window around the optimum that is allowed."""
    chosen = list(axes)
    half = max(a.size for a in axes)
    while math.prod(a.size for a in chosen) > MOST_POINTS and half > 1:
        half -= 1
        chosen = [
            a if f.step is None else a[np.abs(a - g) <= half * f.step * (1 + ON_LATTICE)]
            for a, f, g in zip(axes, free, centre, strict=True)
        ]
        chosen = [
            c if c.size else a[[np.argmin(np.abs(a - g))]]
            for c, a, g in zip(chosen, axes, centre, strict=True)
        ]
    return np.array(list(itertools.product(*chosen)))


def _ordered(
    points: Array, optimum: Evaluation, goal: Goal, rows: Flags
) -> tuple[npt.NDArray[np.intp], Array]:
    """Return the order in which points promise most, and their modelled objectives."""
    beta, jacobian, share = optimum.beta[rows], optimum.jacobian[:, rows], goal.share(rows)
    keep = _model_rows(beta)
    beta, jacobian = beta[keep], jacobian[:, keep]
    share = share[keep] / share[keep].sum()
    offsets = points - optimum.gamma
    modelled = np.empty(points.shape[0])
    lowest = np.empty(points.shape[0])
    for start in range(0, points.shape[0], 1000):
        block = beta + offsets[start : start + 1000] @ jacobian
        r = block - goal.target
        values = goal.penalty.value(r)
        is_largest = goal.penalty.name == "minimax"
        modelled[start : start + 1000] = values.max(axis=1) if is_largest else values @ share
        lowest[start : start + 1000] = block.min(axis=1)
    miss = np.zeros_like(lowest) if goal.floor is None else np.maximum(0.0, goal.floor - lowest - 0.02)
    # Points that seem to miss the floor come last, the nearest to it first.
    order = np.lexsort((np.arange(points.shape[0]), np.where(miss > 0, miss, modelled), miss > 0))
    return order, np.where(miss > 0, np.inf, modelled)


def _model_rows(beta: Array) -> npt.NDArray[np.intp]:
    """Return the rows that the model looks at: extremes of beta and an even sample of the rest."""
    if beta.size <= MODEL_ROWS:
        return np.arange(beta.size)
    order = np.argsort(beta, kind="stable")
    edge = MODEL_ROWS // 8
    middle = order[np.linspace(0, beta.size - 1, MODEL_ROWS).round().astype(np.intp)]
    return np.unique(np.concatenate([order[:edge], order[-edge:], middle]))


class _Evaluated:
    """The points evaluated so far, the first being each factor rounded by itself."""

    def __init__(self, response: Response, goal: Goal, rows: Flags, optimum: Evaluation) -> None:
        self.response, self.goal, self.rows = response, goal, rows
        self.optimum = optimum
        self.points: list[Array] = []
        self.evaluations: list[Evaluation] = []
        self.objectives: list[float] = []
        self.misses: list[float] = []
        self.worst_ratio = 1.0

    def add(self, point: Array, modelled: float | None) -> None:
        """Evaluate a point unless it was."""
        known = next((i for i, p in enumerate(self.points) if np.array_equal(p, point)), None)
        if known is None:
            evaluation = self.response(point, self.optimum, slopes=False)
            self.points.append(point)
            self.evaluations.append(evaluation)
            self.objectives.append(self.goal.value(evaluation.beta, self.rows))
            self.misses.append(self.goal.shortfall(evaluation.beta, self.rows))
            known = len(self.points) - 1
        if modelled is not None and 0.0 < modelled < np.inf:
            self.worst_ratio = min(self.worst_ratio, self.objectives[known] / modelled)

    def best(self) -> float:
        """Return the best objective among points that meet the floor."""
        fine = [o for o, m in zip(self.objectives, self.misses, strict=True) if m <= FLOOR_TOLERANCE]
        return min(fine, default=np.inf)

    def settled(self, modelled: float) -> bool:
        """Whether a modelled objective cannot beat the best one found."""
        best = self.best()
        return bool(np.isfinite(best) and modelled * self.worst_ratio * (1.0 - MARGIN) > best)

    def ranked(self) -> list[int]:
        """Return indices, best first: the floor, the objective, then the smallest change, then names."""
        present = np.array([f.present for f in self.response.free])
        by_name = sorted(range(len(self.response.free)), key=lambda i: self.response.free[i].name)
        fine = [m <= FLOOR_TOLERANCE for m in self.misses]
        first = min(
            range(len(self.points)),
            key=lambda i: (not fine[i], self.misses[i] if not fine[i] else self.objectives[i]),
        )
        bar = self.objectives[first]

        def key(i: int) -> tuple[object, ...]:
            change = round(float(np.sum(np.abs(self.points[i] - present))), 9)
            names = tuple(float(self.points[i][k]) for k in by_name)
            tied = fine[i] and fine[first] and self.objectives[i] <= bar + TIE * max(abs(bar), TIE)
            if tied:
                return (0, 0.0, change, names)
            if fine[i]:
                return (1, self.objectives[i], change, names)
            return (2, self.misses[i], change, names)

        return sorted(range(len(self.points)), key=key)

    def candidate(self, i: int) -> Candidate:
        """Return one point for the tables."""
        beta = self.evaluations[i].beta[self.rows]
        return Candidate(
            self.response.values(self.points[i]),
            self.objectives[i],
            float(np.dot(self.goal.share(self.rows), beta)),
            float(beta.min()),
            float(beta.max()),
            self.misses[i] <= FLOOR_TOLERANCE,
        )
