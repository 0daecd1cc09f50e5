"""Systems of rules: when they fail, and their reliability by planes, by bounds and by simulation."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.study.result import Result


def system_table(result: Result) -> Table | None:
    """Return one row per system with the proposed factors, weighted over the design situations; None without any."""
    frame = result.systems
    if frame is None:
        return None
    systems = list(result.study.systems.values())

    def figures(column: str) -> tuple[list[float], list[float]]:
        means, least = [], []
        for system in systems:
            own = frame[frame["system"] == system.name]
            beta, weight = own[column].to_numpy(float), own["weight"].to_numpy(float)
            there = np.isfinite(beta) & (weight > 0.0)
            means.append(float(np.average(beta[there], weights=weight[there])) if there.any() else np.nan)
            least.append(float(beta[there].min()) if there.any() else np.nan)
        return means, least

    mean, least = figures("beta")
    verified, lowest = figures("beta_verified")
    width, gap = [], []
    for system in systems:
        own = frame[frame["system"] == system.name]
        width.append(_widest((own["beta_upper"] - own["beta_lower"]).to_numpy(float)))
        gap.append(_widest((own["beta_simulated"] - own["beta"]).to_numpy(float)))
    total = result.study.total_weight
    return Table(
        (
            Column("system", [s.name for s in systems]),
            Column("fails when", [s.logic.text for s in systems]),
            Column("mean", mean, each(numbers.beta), "number", group="β by planes"),
            Column("min", least, each(numbers.beta), "number", group="β by planes"),
            Column("mean", verified, each(numbers.beta), "number", group="β verified"),
            Column("min", lowest, each(numbers.beta), "number", group="β verified"),
            Column("simulated less planes", gap, each(numbers.beta, 3), "number", group="largest difference"),
            Column("between bounds", width, each(numbers.beta, 3), "number", group="largest difference"),
            Column("weight", [s.weight / total for s in systems], each(numbers.share, 0), "number"),
        )
    )


def described(result: Result) -> list[tuple[str, str]]:
    """Return the systems that the study describes: name and description."""
    return [(name, s.description) for name, s in result.study.systems.items() if s.description]


def _widest(difference: NDArray[np.float64]) -> float:
    known = difference[np.isfinite(difference)]
    return float(known[np.argmax(np.abs(known))]) if known.size else np.nan
