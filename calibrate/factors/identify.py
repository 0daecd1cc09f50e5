"""Which factors the design situations can tell apart, and which combination they leave undetermined."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.errors import Doubt
from calibrate.factors.objective import Goal
from calibrate.factors.optimise import STEP_TOLERANCE, Optimum, bounds, optimise
from calibrate.factors.response import Evaluation, Response

Array = npt.NDArray[np.float64]

RANK_TOLERANCE = 1e-6
"""Ratio of singular values below which a direction changes no beta that matters."""
WEAK = 1e-3
"""Ratio below which a direction is called weak."""
AT_BOUND = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Diagnostics:
    """How well the situations determine the free factors.

    Attributes
    ----------
    names : tuple of str
        Free factors that are not at a bound.
    singular_values : array
        Of the weighted Jacobian d beta / d ln gamma, largest first.
    directions : array (k, k)
        Rows: relative changes of the factors, one for each singular value.
    correlation : array (k, k)
        Of the factors, from the Gauss-Newton matrix; NaN where undetermined.
    evaluations : int
        Evaluations of all situations for the optimum.
    converged : bool
    """

    names: tuple[str, ...]
    singular_values: Array
    directions: Array
    correlation: Array
    evaluations: int
    converged: bool

    @property
    def undetermined(self) -> Array:
        """Directions that change no beta, rows of relative changes."""
        if not self.singular_values.size:
            return np.zeros((0, 0))
        limit = RANK_TOLERANCE * self.singular_values[0]
        return np.asarray(self.directions[self.singular_values <= limit])


def diagnose(response: Response, goal: Goal, optimum: Optimum) -> Diagnostics:
    """Return singular values and directions of the weighted relative Jacobian at the optimum."""
    evaluation = optimum.evaluation
    inside = _inside(response, evaluation.gamma)
    names = tuple(f.name for f, i in zip(response.free, inside, strict=True) if i)
    rows = goal.rows(evaluation)
    gamma = evaluation.gamma[inside]
    relative = evaluation.jacobian[inside][:, rows] * np.where(gamma == 0, 1.0, gamma)[:, None]
    weighted = (relative * np.sqrt(goal.share(rows))).T
    if not names:
        empty = np.zeros(0)
        return Diagnostics((), empty, np.zeros((0, 0)), np.zeros((0, 0)), optimum.passes, optimum.converged)
    square = np.vstack([weighted, np.zeros((len(names), len(names)))])
    _, singular, directions = np.linalg.svd(square, full_matrices=False)
    matrix = weighted.T @ weighted
    correlation = np.full_like(matrix, np.nan)
    if singular[-1] > RANK_TOLERANCE * singular[0]:
        inverse = np.linalg.inv(matrix)
        sd = np.sqrt(np.diag(inverse))
        correlation = inverse / np.outer(sd, sd)
    return Diagnostics(names, singular, directions, correlation, optimum.passes, optimum.converged)


def _inside(response: Response, gamma: Array) -> npt.NDArray[np.bool_]:
    lower, upper = bounds(response)
    margin = AT_BOUND * (upper - lower)
    return np.asarray((gamma > lower + margin) & (gamma < upper - margin))


def nearest_to_present(response: Response, goal: Goal, optimum: Optimum) -> Optimum:
    """Move along undetermined combinations to the point that changes the present factors least.

    Where situations cannot tell factors apart the optimum is a set; this makes the choice of its member
    reproducible. Elsewhere the optimum is returned as it is.
    """
    lower, upper = bounds(response)
    width = upper - lower
    present = np.array([f.present for f in response.free])
    here = optimum
    for _ in range(10):
        found = diagnose(response, goal, here)
        if not found.undetermined.size:
            return here
        inside = _inside(response, here.evaluation.gamma)
        gamma = here.evaluation.gamma
        basis = (found.undetermined * np.where(gamma[inside] == 0, 1.0, gamma[inside])).T
        move = np.zeros_like(gamma)
        wanted = (present - gamma)[inside] / width[inside]
        scaled = basis / width[inside][:, None]
        solution = np.linalg.lstsq(scaled, wanted, rcond=None)[0]
        move[inside] = basis @ solution
        # Stop at the first bound on the way.
        with np.errstate(divide="ignore", invalid="ignore"):
            room = np.where(
                move > 0, (upper - gamma) / move, np.where(move < 0, (lower - gamma) / move, np.inf)
            )
        move *= min(1.0, float(np.min(room)))
        if np.max(np.abs(move) / width) <= STEP_TOLERANCE:
            return here
        moved = response(np.clip(gamma + move, lower, upper), here.evaluation)
        polished = optimise(response, goal, moved)
        if polished.value > here.value + 1e-9 * max(1.0, abs(here.value)):
            return here
        here = Optimum(
            polished.evaluation,
            polished.value,
            polished.shortfall,
            polished.converged,
            here.passes + polished.passes,
        )
    return here


def identification_doubts(found: Diagnostics) -> list[Doubt]:
    """Name every undetermined combination in words."""
    doubts = []
    for direction in found.undetermined:
        largest = int(np.argmax(np.abs(direction)))
        parts = direction / direction[largest]
        used = [(n, p) for n, p in zip(found.names, parts, strict=True) if abs(p) > 1e-3]
        doubts.append(
            Doubt(
                "undetermined-factors",
                f"These situations cannot tell {_listed([n for n, _ in used])} apart: {_moves(used)} changes no β. "
                "Of the equally good sets, the one nearest to the present factors is given. Hold one of these "
                "factors, or add situations in which they act differently.",
                "factors." + ",".join(n for n, _ in used),
            )
        )
    return doubts


def _moves(used: Sequence[tuple[str, float]]) -> str:
    if len(used) == 1:
        return f"changing {used[0][0]}"
    up = [f"{n} by {abs(p):.3g} %" for n, p in used if p > 0]
    down = [f"{n} by {abs(p):.3g} %" for n, p in used if p < 0]
    texts = []
    if up:
        texts.append(f"raising {_listed(up)}")
    if down:
        texts.append(f"lowering {_listed(down)}")
    return " and ".join(texts)


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def bound_doubts(response: Response, evaluation: Evaluation) -> list[Doubt]:
    """Name optimal factors that lie at a bound."""
    doubts = []
    for factor, value in zip(response.free, evaluation.gamma, strict=True):
        margin = AT_BOUND * (factor.upper - factor.lower)
        side = (
            "lower" if value <= factor.lower + margin else "upper" if value >= factor.upper - margin else None
        )
        if side is not None:
            bound = factor.lower if side == "lower" else factor.upper
            doubts.append(
                Doubt(
                    "factor-at-bound",
                    f"The optimal {factor.name} lies at its {side} bound {bound:g}; the bound, not the target, "
                    "determines it.",
                    f"factors.{factor.name}",
                )
            )
    return doubts
