"""The whole calibration: present, optimal and proposed factors, and what is to be said about them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.errors import Doubt, InputError, Problem
from calibrate.factors.identify import (
    Diagnostics,
    bound_doubts,
    diagnose,
    identification_doubts,
    nearest_to_present,
)
from calibrate.factors.lattice import Candidate, LatticeSearch, search_lattice
from calibrate.factors.model import Factor
from calibrate.factors.objective import FactorSet, Goal, factor_set
from calibrate.factors.optimise import FLOOR_TOLERANCE, SAME_OPTIMUM, Optimum, bounds, optimise
from calibrate.factors.penalties import Penalty
from calibrate.factors.response import Evaluation, Response

Array = npt.NDArray[np.float64]
Progress = Callable[[str, float], None]

START_SITUATIONS = 300
"""Further starts are tried on at most about so many situations."""
START_PLACES = (0.15, 0.5, 0.85)


@dataclass(frozen=True, slots=True, eq=False)
class Calibration:
    """Factor sets, and how they were found.

    Attributes
    ----------
    present, optimal, proposed : FactorSet
    diagnostics : Diagnostics or None
        None without free factors.
    lattice : LatticeSearch or None
        None where nothing is rounded.
    doubts : tuple of Doubt
    constraint_failures : tuple of str
        Constraints that cannot be met, each a full sentence.
    """

    present: FactorSet
    optimal: FactorSet
    proposed: FactorSet
    diagnostics: Diagnostics | None
    lattice: LatticeSearch | None
    doubts: tuple[Doubt, ...]
    constraint_failures: tuple[str, ...]

    @property
    def candidates(self) -> tuple[Candidate, ...]:
        """The best lattice points, the proposed one first; empty where nothing is rounded."""
        return () if self.lattice is None else self.lattice.candidates


def _silent(text: str, fraction: float) -> None:
    del text, fraction


def calibrate_factors(
    response: Response,
    factors: Sequence[Factor],
    weight: Array,
    target: float,
    penalty: Penalty,
    floor: float | None = None,
    *,
    progress: Progress | None = None,
) -> Calibration:
    """Find optimal and proposed factors.

    Parameters
    ----------
    response : Response
        Reliability of all N situations as a function of the free factors.
    factors : sequence of Factor
        Free and held, in the order of the study.
    weight : array (N,)
        Weights of all rows; they are scaled to sum 1.
    target : float
        Target beta.
    penalty : Penalty
    floor : float, optional
        No situation with weight may have a smaller beta.
    progress : callable, optional
        Called with a text and the fraction done.

    Raises
    ------
    InputError
        Fewer situations with weight than free factors, or no situation has a beta.
    """
    say = progress or _silent
    goal = Goal(weight / weight.sum(), target, penalty, floor)
    free = [f for f in factors if not f.held]
    _enough(goal, free)
    say("Reliability with present factors", 0.05)
    present_gamma = np.array([f.present for f in free], dtype=np.float64)
    present = response(present_gamma)
    if not free:
        return _held(response, present, goal)
    lower, upper = bounds(response)
    say("Optimising factors", 0.2)
    inside = np.clip(present_gamma, lower, upper)
    first = present if np.array_equal(inside, present_gamma) else response(inside, present)
    if not goal.rows(first).any():
        raise InputError(_nothing(first))
    optimum = optimise(
        response, goal, first, lambda k: say(f"Optimising factors, pass {k}", 0.2 + 0.4 * k / (k + 6))
    )
    optimum = nearest_to_present(response, goal, _other_starts(response, goal, optimum))
    say("Searching the lattice of steps", 0.65)
    lattice = search_lattice(
        response,
        goal,
        optimum.evaluation,
        lambda k, most: say(f"Searching the lattice of steps, {k} points", 0.65 + 0.3 * k / most),
    )
    return _finished(response, goal, present, optimum, lattice)


def _finished(
    response: Response, goal: Goal, present: Evaluation, optimum: Optimum, lattice: LatticeSearch | None
) -> Calibration:
    diagnostics = diagnose(response, goal, optimum)
    best = optimum.evaluation if lattice is None else lattice.evaluation
    proposed = factor_set("proposed", response.values(best.gamma), best, goal)
    optimal = factor_set("optimal", response.values(optimum.evaluation.gamma), optimum.evaluation, goal)
    doubts = [*identification_doubts(diagnostics), *bound_doubts(response, optimum.evaluation)]
    if not optimum.converged:
        doubts.append(
            Doubt(
                "optimum-not-converged",
                f"The optimiser stopped after {optimum.passes} passes before its steps became small.",
                "factors",
            )
        )
    if lattice is not None and not lattice.complete:
        doubts.append(
            Doubt(
                "lattice-search-limited",
                f"The lattice of steps has {lattice.points} points; {lattice.evaluated} of them, the most promising "
                "ones, were evaluated. A better one may exist. Wider steps make the search complete.",
                "factors",
            )
        )
    return Calibration(
        factor_set("present", response.values(present.gamma), present, goal),
        optimal,
        proposed,
        diagnostics,
        lattice,
        tuple(doubts),
        _failures(goal, optimal, proposed),
    )


def _held(response: Response, present: Evaluation, goal: Goal) -> Calibration:
    sets = [
        factor_set(k, response.values(present.gamma), present, goal)
        for k in ("present", "optimal", "proposed")
    ]
    return Calibration(sets[0], sets[1], sets[2], None, None, (), _failures(goal, sets[1], sets[2]))


def _failures(goal: Goal, optimal: FactorSet, proposed: FactorSet) -> tuple[str, ...]:
    if goal.floor is None:
        return ()
    texts = []
    for chosen, what in ((optimal, "No factors within their bounds meet"), (proposed, "No step meets")):
        if np.isfinite(chosen.min) and chosen.min < goal.floor - max(FLOOR_TOLERANCE, 1e-7):
            texts.append(
                f"{what} the floor of {goal.floor:g}: with the {chosen.name} factors, which come nearest to it, the "
                f"smallest β is {chosen.min:.4f}."
            )
    return tuple(texts)


def _enough(goal: Goal, free: Sequence[Factor]) -> None:
    count = int(np.count_nonzero(goal.weight > 0))
    if count < len(free):
        raise InputError(
            Problem(
                f"{len(free)} factors are free ({', '.join(f.name for f in free)}), but only {count} design "
                f"situation{'s' if count != 1 else ''} with weight {'are' if count != 1 else 'is'} there to determine "
                "them.",
                suggestion="Add situations or hold some of the factors.",
            )
        )


def _nothing(evaluation: Evaluation) -> Problem:
    reasons = sorted(set(map(str, evaluation.status)))
    return Problem(
        f"No design situation has a β ({'; '.join(reasons)}).",
        suggestion="Check the design check, the limit state and the units of the study.",
    )


def _other_starts(response: Response, goal: Goal, optimum: Optimum) -> Optimum:
    """Try further starts on some of the situations; take up what leads to a better optimum on all of them."""
    whole = int(np.count_nonzero(goal.weight > 0.0)) <= START_SITUATIONS
    small = response if whole else response.thinned(START_SITUATIONS)
    small_goal = Goal(small.weight / small.weight.sum(), goal.target, goal.penalty, goal.floor)
    lower, upper = bounds(response)
    width = upper - lower
    reference = optimum if whole else optimise(small, small_goal, small(optimum.evaluation.gamma))
    best = optimum
    for place in START_PLACES:
        first = small(lower + place * width, reference.evaluation)
        if not small_goal.rows(first).any():
            continue
        found = optimise(small, small_goal, first, known=reference.evaluation.gamma)
        apart = np.max(np.abs(found.evaluation.gamma - reference.evaluation.gamma) / width)
        better = (found.shortfall, found.value) < (reference.shortfall - 1e-6, reference.value)
        better = better or (
            found.shortfall <= reference.shortfall + 1e-9
            and found.value < reference.value - 1e-7 * max(1.0, reference.value)
        )
        if apart < SAME_OPTIMUM or not better:
            continue
        full = optimise(response, goal, response(found.evaluation.gamma, best.evaluation))
        if (max(full.shortfall, FLOOR_TOLERANCE), full.value) < (
            max(best.shortfall, FLOOR_TOLERANCE),
            best.value,
        ):
            best = full
    return best
