"""Sensitivity factors by rule and system with the proposed factors."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers
from calibrate.report.outcome import taking_part
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.study.result import Result

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """Sensitivity factors of one rule with the proposed factors, rows without beta or weight left out.

    ``alpha`` has shape (variables, rows); ``weight`` sums to 1.
    """

    rule: str
    variables: tuple[str, ...]
    rows: NDArray[np.intp]
    alpha: Array
    weight: Array

    @property
    def mean(self) -> Array:
        """Weighted mean of alpha, by variable."""
        return self.alpha @ self.weight

    @property
    def shares(self) -> Array:
        """Weighted mean of alpha squared, by variable; they sum to 1."""
        return self.alpha**2 @ self.weight


def sensitivities(result: Result) -> list[Sensitivity]:
    """Return the sensitivity factors by rule; rules without any beta are left out."""
    frame = result.situations
    rules, weight = frame["rule"].to_numpy(), frame["weight"].to_numpy(float)
    part = taking_part(result, "proposed")
    found = []
    for judged in result.study.judged:
        rows = np.flatnonzero(part & (rules == judged))
        names = _variables_of(result, judged)
        if not rows.size or not names:
            continue
        alpha = np.stack([frame[f"alpha_{name}"].to_numpy(float)[rows] for name in names])
        if not np.isfinite(alpha).all():  # of a system whose components pull in opposite directions
            continue
        found.append(Sensitivity(judged, names, rows, alpha, weight[rows] / weight[rows].sum()))
    return found


def _variables_of(result: Result, judged: str) -> tuple[str, ...]:
    """Return the variables of a rule, or of all components of a system."""
    study = result.study
    if judged in study.rules:
        return tuple(study.rules[judged].variables)
    used = {v for rule in study.systems[judged].logic.names for v in study.rules[rule].variables}
    return tuple(name for name in study.variables if name in used)


def sensitivity_table(result: Result, found: list[Sensitivity]) -> Table:
    """Return mean alpha and mean alpha squared of every variable, a pair of columns per rule."""
    names = [n for n in result.study.variables if any(n in s.variables for s in found)]
    columns = [Column("variable", names, kind="name")]
    for s in found:
        where = {n: i for i, n in enumerate(s.variables)}
        alpha = [s.mean[where[n]] if n in where else np.nan for n in names]
        low = [s.alpha[where[n]].min() if n in where else np.nan for n in names]
        high = [s.alpha[where[n]].max() if n in where else np.nan for n in names]
        square = [s.shares[where[n]] if n in where else np.nan for n in names]
        columns += [
            Column("mean α", alpha, each(numbers.beta), "number", group=s.rule),
            Column("smallest α", low, each(numbers.beta), "number", group=s.rule),
            Column("largest α", high, each(numbers.beta), "number", group=s.rule),
            Column("mean α²", square, each(numbers.share, 0), "number", group=s.rule),
        ]
    return Table(tuple(columns))
