"""Systems of rules: when they fail, and their reliability by planes, by bounds and by simulation."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

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
    low, high = figures("beta_lower")[0], figures("beta_upper")[0]
    gap = []
    for system in systems:
        own = frame[frame["system"] == system.name]
        difference = (own["beta_simulated"] - own["beta"]).to_numpy(float)
        known = difference[np.isfinite(difference)]
        gap.append(float(known[np.argmax(np.abs(known))]) if known.size else np.nan)
    total = result.study.total_weight
    return Table(
        (
            Column("system", [s.name for s in systems]),
            Column("fails when", [s.logic.text for s in systems]),
            Column("mean", mean, each(numbers.beta), "number", group="β by planes"),
            Column("min", least, each(numbers.beta), "number", group="β by planes"),
            Column("lower", low, each(numbers.beta), "number", group="mean β, Ditlevsen bounds"),
            Column("upper", high, each(numbers.beta), "number", group="mean β, Ditlevsen bounds"),
            Column("simulated less planes, largest", gap, each(numbers.beta, 3), "number"),
            Column("weight", [s.weight / total for s in systems], each(numbers.share, 0), "number"),
        )
    )
