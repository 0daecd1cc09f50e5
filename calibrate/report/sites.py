"""An action over classes of sites as the report shows it: the classes, and beta by class, on average, of the worst."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers
from calibrate.report.table import Column, Table, aligned, each
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.study.result import Result

Array = NDArray[np.float64]

AVERAGE, WORST, MIXTURE = (
    "on average over the sites",
    "worst class of each situation",
    "mixture, as calibrated",
)


def site_beta_table(result: Result) -> Table | None:
    """Return mean and smallest beta of each class, on average, of the worst class, and of the calibration itself.

    None where no action is over sites.
    """
    found = result.site_beta
    if found is None:
        return None
    weight = result.situations["weight"].to_numpy(float)
    reliability, labels = found.reliability, list(found.table.labels)
    rows = [*reliability.by_site, reliability.average, reliability.worst, found.mixture]
    figures = [_figures(beta, weight) for beta in rows]
    lowest = [_lowest(result, beta, weight) for beta in rows]
    count = len(labels)
    compared = found.uses & (weight > 0.0) & np.isfinite(reliability.worst)
    total = float(weight[compared].sum())
    worst_in = [
        float(weight[compared & (reliability.worst_site == k)].sum()) / total if total > 0.0 else math.nan
        for k in range(count)
    ]
    return Table(
        (
            Column("sites", [*labels, AVERAGE, WORST, MIXTURE]),
            Column("share", [*found.table.weights, None, None, None], each(numbers.share), "number"),
            Column("mean", [m for m, _ in figures], each(numbers.beta), "number", group="β"),
            Column("min", [low for _, low in figures], each(numbers.beta), "number", group="β"),
            Column("smallest in", lowest),
            Column("is the worst in", [*worst_in, None, None, None], each(numbers.share, 0), "number"),
        ),
        strong=frozenset({count}),
    )


def _figures(beta: Array, weight: Array) -> tuple[float, float]:
    there = np.isfinite(beta) & (weight > 0.0)
    if not there.any():
        return math.nan, math.nan
    return float(np.average(beta[there], weights=weight[there])), float(beta[there].min())


def _lowest(result: Result, beta: Array, weight: Array) -> str:
    there = np.isfinite(beta) & (weight > 0.0)
    if not there.any():
        return ""
    row = result.situations.iloc[int(np.argmin(np.where(there, beta, np.inf)))]
    return f"{row['rule']}, {int(row['situation'])}"


def class_table(result: Result) -> Table | None:
    """Return the classes of sites with their shares and the numbers of their table; None where there is none."""
    found = result.site_beta
    if found is None:
        return None
    table = found.table
    columns = [
        Column("class", list(table.labels)),
        Column("share", list(table.weights), each(numbers.share), "number"),
    ]
    used = {n for e in result.study.variables[found.variable].arguments.values() for n in e.names}
    for name, values in table.columns.items():
        if name in used:
            unit = table.units[name]
            shown = format_unit(unit.text) if unit.text else ""
            columns.append(Column(name, list(values / unit.factor), aligned(), "number", shown, symbol=True))
    return Table(tuple(columns))
