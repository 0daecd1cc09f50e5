"""The objective of a set of factors, and the summary of beta that tables print."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.factors.penalties import Penalty
from calibrate.factors.response import Evaluation

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Goal:
    """What the optimiser is to reach.

    Parameters
    ----------
    weight : array (N,)
        Of every row; sum 1.
    target : float
        Target beta.
    penalty : Penalty
    floor : float or None
        No situation with weight may have a smaller beta.
    """

    weight: Array
    target: float
    penalty: Penalty
    floor: float | None

    def rows(self, evaluation: Evaluation) -> Flags:
        """Return the rows that take part: those with weight and a beta."""
        return np.asarray((self.weight > 0.0) & evaluation.valid)

    def value(self, beta: Array, rows: Flags) -> float:
        """Return the objective over ``rows``; infinite where a row has no beta."""
        r = beta[rows] - self.target
        if not r.size or not np.isfinite(r).all():
            return np.inf
        return self.penalty.objective(r, self.share(rows))

    def share(self, rows: Flags) -> Array:
        """Return the weights of ``rows``, scaled to sum 1."""
        weight = self.weight[rows]
        return np.asarray(weight / weight.sum())

    def shortfall(self, beta: Array, rows: Flags) -> float:
        """Return by how much the floor is missed, 0 where it is met."""
        if self.floor is None:
            return 0.0
        lowest = np.min(beta[rows], initial=np.inf)
        return max(0.0, self.floor - float(lowest)) if np.isfinite(lowest) else np.inf


@dataclass(frozen=True, slots=True, eq=False)
class FactorSet:
    """One set of factors and what it leads to.

    Attributes
    ----------
    name : str
        ``present``, ``optimal`` or ``proposed``.
    factors : mapping of str to float
        All factors, free and held, in the order of the study.
    evaluation : Evaluation
    objective : float
        Over rows with weight and a beta; NaN without any.
    mean, sd, min, max, rms_from_target : float
        Of beta: weighted over the same rows, extremes over the same rows.
    worst : int or None
        Row of the smallest beta.
    """

    name: str
    factors: Mapping[str, float]
    evaluation: Evaluation
    objective: float
    mean: float
    sd: float
    min: float
    max: float
    rms_from_target: float
    worst: int | None


def factor_set(name: str, factors: Mapping[str, float], evaluation: Evaluation, goal: Goal) -> FactorSet:
    """Return the set with its summary."""
    rows = goal.rows(evaluation)
    if not rows.any():
        nan = float("nan")
        return FactorSet(name, dict(factors), evaluation, nan, nan, nan, nan, nan, nan, None)
    beta, share = evaluation.beta[rows], goal.share(rows)
    mean = float(np.dot(share, beta))
    return FactorSet(
        name,
        dict(factors),
        evaluation,
        goal.value(evaluation.beta, rows),
        mean,
        float(np.sqrt(np.dot(share, (beta - mean) ** 2))),
        float(beta.min()),
        float(beta.max()),
        float(np.sqrt(np.dot(share, (beta - goal.target) ** 2))),
        int(np.flatnonzero(rows)[np.argmin(beta)]),
    )
