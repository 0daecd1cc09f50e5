"""What came out, at full precision: factors, reliability before and after, sizes, sensitivities."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers
from calibrate.report.table import Column, Table, aligned, each
from calibrate.study.result import FACTOR_SETS, Result
from calibrate.units import format_unit

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
CONVERGED = "converged"
SAME_SIZE = 0.005
"""Relative change of a size below which it counts as unchanged."""


def factor_table(result: Result) -> Table:
    """Return the factors: present, optimal, proposed, and what bounds them."""
    frame = result.factors
    steps = [None if not np.isfinite(s) else float(s) for s in frame["step"]]
    present, proposed = frame["present"].to_numpy(float), frame["proposed"].to_numpy(float)
    held = frame["held"].to_numpy(bool)

    def with_step(values: Any) -> list[str]:
        return [numbers.factor(v, s) for v, s in zip(values, steps, strict=True)]

    def optimum(values: Any) -> list[str]:
        pairs = zip(values, steps, held, strict=True)
        return [numbers.factor(v, s) if h else numbers.optimum(v, s) for v, s, h in pairs]

    def proposal(values: Any) -> list[str]:
        pairs = zip(values, steps, held, strict=True)
        return [numbers.optimum(v, s) if s is None and not h else numbers.factor(v, s) for v, s, h in pairs]

    bounds = [
        "held" if h else f"{numbers.factor(low, s)} … {numbers.factor(high, s)}"
        for h, low, high, s in zip(held, frame["lower"], frame["upper"], steps, strict=True)
    ]
    return Table(
        (
            Column("factor", list(frame["name"]), kind="name"),
            Column("present", present, with_step, "number"),
            Column("optimal", frame["optimal"].to_numpy(float), optimum, "number"),
            Column("proposed", proposed, proposal, "number"),
            Column("change", np.where(held, np.nan, proposed / present), each(numbers.change), "number"),
            Column("bounds", bounds),
            Column("step", frame["step"].to_numpy(float), each(numbers.significant), "number"),
        )
    )


def taking_part(result: Result, kind: str) -> NDArray[np.bool_]:
    """Return which rows have a beta and a weight with a factor set."""
    frame = result.situations
    finite = np.isfinite(frame[f"beta_{kind}"].to_numpy(float))
    return np.asarray(finite & (frame["weight"].to_numpy(float) > 0))


def share_below(result: Result, kind: str, level: float) -> float:
    """Return the weight of the situations with a beta below a level, as a share of those with a beta."""
    rows = taking_part(result, kind)
    weight = result.situations["weight"].to_numpy(float)[rows]
    beta = result.situations[f"beta_{kind}"].to_numpy(float)[rows]
    return float(weight[beta < level].sum() / weight.sum()) if rows.any() else float("nan")


def beta_table(result: Result) -> Table:
    """Return mean, scatter and extremes of beta for the three factor sets."""
    sets = [getattr(result.calibration, kind) for kind in FACTOR_SETS]
    target = result.study.target_beta

    def of(name: str) -> list[float]:
        return [getattr(s, name) for s in sets]

    below = [share_below(result, kind, target) for kind in FACTOR_SETS]
    columns = [
        Column("factors", list(FACTOR_SETS)),
        Column("mean", of("mean"), each(numbers.beta), "number"),
        Column("sd", of("sd"), each(numbers.beta, 3), "number"),
        Column("min", of("min"), each(numbers.beta), "number"),
        Column("max", of("max"), each(numbers.beta), "number"),
        Column("rms from target", of("rms_from_target"), each(numbers.beta, 3), "number"),
        Column("below target", below, each(numbers.share, 0), "number"),
    ]
    if (floor := result.study.objective.floor) is not None:
        under = [share_below(result, kind, floor) for kind in FACTOR_SETS]
        columns.append(Column("below floor", under, each(numbers.share, 0), "number"))
    columns.append(Column("objective", of("objective"), aligned(), "number"))
    columns.append(Column("worst", [worst_place(result, kind) for kind in FACTOR_SETS]))
    return Table(tuple(columns), strong=frozenset({len(FACTOR_SETS) - 1}))


def judged_table(result: Result) -> Table | None:
    """Return β by rule and system, present and proposed, over all situations that have a weight in the grid.

    None where there is one rule alone.
    """
    study, frame = result.study, result.situations
    if len(study.judged) == 1:
        return None
    weight = study.situations.weight

    def figures(name: str, kind: str) -> tuple[float, float, float]:
        beta = frame[f"beta_{kind}"].to_numpy(float)[(frame["rule"] == name).to_numpy()]
        there = np.isfinite(beta) & (weight > 0)
        if not there.any():
            return math.nan, math.nan, math.nan
        return (
            float(np.average(beta[there], weights=weight[there])),
            float(beta[there].min()),
            float(beta[there].max()),
        )

    columns = [
        Column("kind", [("rule" if name in study.rules else "system") for name in study.judged]),
        Column("name", list(study.judged)),
    ]
    for kind in ("present", "proposed"):
        found = [figures(name, kind) for name in study.judged]
        for at, head in enumerate(("mean", "min", "max")):
            columns.append(
                Column(head, [f[at] for f in found], each(numbers.beta), "number", group=f"β, {kind}")
            )
    share = [w / study.total_weight for w in study.weights]
    columns.append(Column("weight", share, _weight, "number"))
    return Table(tuple(columns))


def _weight(values: Any) -> list[str]:
    """Write shares of weight; what has none is reported only."""
    return [numbers.share(v, 0) if v else "reported only" for v in values]


def worst_place(result: Result, kind: str) -> str:
    """Return rule and number of the situation with the smallest beta."""
    row = getattr(result.calibration, kind).worst
    if row is None:
        return ""
    line = result.situations.iloc[row]
    return f"{line['rule']}, {int(line['situation'])}"


def varying_columns(result: Result) -> list[str]:
    """Return the axes or table columns that differ between design situations, in the order of the study."""
    frame = result.situations
    return [name for name in result.study.situations.columns if frame[name].nunique() > 1]


def place(result: Result, row: int) -> list[tuple[str, str]]:
    """Return what a row is: (name, value with unit) of every column that varies."""
    line = result.situations.iloc[row]
    shown = []
    for name in varying_columns(result):
        value = line[name]
        if isinstance(value, str):
            shown.append((name, value))
        else:
            unit = str(result.units[name])
            text = numbers.significant(float(value))
            shown.append((name, f"{text} {format_unit(unit)}" if unit else text))
    return shown


@dataclass(frozen=True, slots=True)
class SizeChange:
    """Sizes with proposed over sizes with present factors, of one rule, rows without a size left out.

    ``rows`` are row numbers of the situations table; ``ratio`` and ``weight``
    belong to them, the weights sum to 1.
    """

    rule: str
    size: str
    unit: str
    rows: NDArray[np.intp]
    ratio: Array
    weight: Array

    @property
    def mean(self) -> float:
        """Weighted mean of the ratio."""
        return float(self.ratio @ self.weight)

    def share(self, sign: int) -> float:
        """Return the weight of the situations whose size grows (+1), shrinks (−1) or stays (0)."""
        change = np.where(np.abs(self.ratio - 1.0) < SAME_SIZE, 0, np.sign(self.ratio - 1.0))
        return float(self.weight[change == sign].sum())


def combination_table(result: Result) -> Table | None:
    """Return what governs by rule, and mean beta of each alternative and of their series bounds; None without any."""
    frame = result.combinations
    if frame is None:
        return None
    weight = result.situations["weight"].to_numpy(float)
    rules = [r for r in result.study.rules if (frame["governing"][frame["rule"] == r] != "").any()]
    columns: list[Column] = [Column("rule", rules)]

    def mean(rule: str, values: NDArray[np.float64]) -> float:
        rows = (frame["rule"] == rule).to_numpy() & np.isfinite(values) & (weight > 0)
        return float(np.average(values[rows], weights=weight[rows])) if rows.any() else math.nan

    for action in result.study.combination:
        governs = np.asarray(frame["governing"] == action.name, dtype=np.float64)
        beta = frame[f"beta_{action.name}"].to_numpy(float)
        head = f"led by {action.name}"
        columns.append(
            Column("mean β", [mean(r, beta) for r in rules], each(numbers.beta), "number", group=head)
        )
        columns.append(
            Column("governs", [mean(r, governs) for r in rules], each(numbers.share, 0), "number", group=head)
        )
    for name, head in (("beta_series_lower", "independent"), ("beta_series_upper", "dependent")):
        values = frame[name].to_numpy(float)
        columns.append(
            Column(
                head, [mean(r, values) for r in rules], each(numbers.beta), "number", group="series, mean β"
            )
        )
    exact = frame["beta_fbc"].to_numpy(float)
    columns.append(
        Column("mean β", [mean(r, exact) for r in rules], each(numbers.beta), "number", group="exact maximum")
    )
    return Table(tuple(columns))


def accompanying_table(result: Result) -> Table | None:
    """Return psi of accompanying actions by design values; None without any."""
    frame = result.accompanying
    if frame is None or frame.empty:
        return None
    several = frame["rule"].nunique() > 1
    columns = [Column("rule", list(frame["rule"]))] if several else []
    columns += [Column(head, list(frame[head])) for head in ("accompanying", "leading")]
    columns.append(Column("intervals", list(frame["intervals"]), each(numbers.significant), "number"))
    for name, head in (
        ("psi_maximum", "of the maximum"),
        ("psi_interval", "of one interval"),
        ("psi_design_point", "at design points"),
    ):
        columns.append(
            Column(head, list(frame[name]), each(numbers.fixed, 2), "number", group="ψ by design values")
        )
    return Table(tuple(columns))


def period_table(result: Result) -> Table | None:
    """Return beta for other periods, with the proposed factors; None where the study asks for none."""
    if not result.other_periods:
        return None
    weight = result.situations["weight"].to_numpy(float)

    def figures(beta: NDArray[np.float64]) -> tuple[float, float]:
        there = np.isfinite(beta) & (weight > 0)
        if not there.any():
            return math.nan, math.nan
        return float(np.average(beta[there], weights=weight[there])), float(beta[there].min())

    converted = [figures(p.converted) for p in result.other_periods]
    direct = [figures(p.direct) for p in result.other_periods]
    return Table(
        (
            Column("period", [numbers.years(p.period) for p in result.other_periods]),
            Column("mean", [m for m, _ in converted], each(numbers.beta), "number", group="β converted"),
            Column("min", [m for _, m in converted], each(numbers.beta), "number", group="β converted"),
            Column("mean", [m for m, _ in direct], each(numbers.beta), "number", group="β recomputed"),
            Column("min", [m for _, m in direct], each(numbers.beta), "number", group="β recomputed"),
        )
    )


def size_changes(result: Result) -> list[SizeChange]:
    """Return how much the proposed factors change every size, by rule; rules without sizes are left out."""
    frame, changes = result.situations, []
    rules = frame["rule"].to_numpy()
    present, proposed = frame["size_present"].to_numpy(float), frame["size_proposed"].to_numpy(float)
    weight = frame["weight"].to_numpy(float)
    for rule in result.study.rules.values():
        if rule.size is None:
            continue
        found = (rules == rule.name) & np.isfinite(present) & np.isfinite(proposed) & (weight > 0)
        rows = np.flatnonzero(found)
        if rows.size:
            own = weight[rows] / weight[rows].sum()
            unit = column_unit(result, "size_proposed", rule.name)
            changes.append(SizeChange(rule.name, rule.size, unit, rows, proposed[rows] / present[rows], own))
    return changes


def size_table(result: Result, changes: list[SizeChange]) -> Table:
    """Return the change of size by rule: mean, range, who grows and who shrinks."""
    del result
    return Table(
        (
            Column("rule", [c.rule for c in changes]),
            Column("size", [c.size for c in changes], kind="name"),
            Column("mean change", [c.mean for c in changes], each(numbers.change), "number"),
            Column("smallest", [c.ratio.min() for c in changes], each(numbers.change), "number"),
            Column("largest", [c.ratio.max() for c in changes], each(numbers.change), "number"),
            Column("smaller", [c.share(-1) for c in changes], each(numbers.share, 0), "number"),
            Column("unchanged", [c.share(0) for c in changes], each(numbers.share, 0), "number"),
            Column("larger", [c.share(1) for c in changes], each(numbers.share, 0), "number"),
        )
    )


def extreme_rows(changes: list[SizeChange], count: int) -> tuple[list[int], list[int]]:
    """Return the rows with the largest decrease and with the largest increase of size."""
    if not changes:
        return [], []
    rows = np.concatenate([c.rows for c in changes])
    ratio = np.concatenate([c.ratio for c in changes])
    order = np.argsort(ratio, kind="stable")
    down = [int(rows[i]) for i in order[:count] if ratio[i] < 1.0 - SAME_SIZE]
    up = [int(rows[i]) for i in order[::-1][:count] if ratio[i] > 1.0 + SAME_SIZE]
    return down, up


def column_unit(result: Result, column: str, rule: str | None = None) -> str:
    """Return the unit of a column of the situations table, for display; empty where it has none."""
    unit = result.units[column]
    text = unit if isinstance(unit, str) else (unit.get(rule, "") if rule else "")
    return format_unit(text) if text else ""


GROUP_SIZE, GROUP_BETA, GROUP_ALPHA, GROUP_POINT = "size", "β", "sensitivity factors α", "design point"


def situation_table(result: Result, rows: list[int] | None = None) -> Table:
    """Return the design situations as the report shows them; ``rows`` picks some, in that order."""
    frame: pd.DataFrame = result.situations if rows is None else result.situations.iloc[rows]
    columns = [
        Column("rule", list(frame["rule"])),
        Column("no.", list(frame["situation"]), kind="number"),
    ]
    for name in result.study.situations.columns:
        values = list(frame[name])
        if frame[name].dtype.kind in "fiu":
            unit = column_unit(result, name)
            columns.append(Column(name, values, aligned(), "number", unit, symbol=True))
        else:
            columns.append(Column(name, values, symbol=True))
    columns.append(Column("weight", list(frame["weight"]), each(numbers.share, 2), "number"))
    columns += _sizes(result, frame)
    for kind in ("present", "proposed"):
        found = list(frame[f"beta_{kind}"])
        columns.append(Column(kind, found, each(numbers.beta), "number", group=GROUP_BETA))
    columns.append(Column("P_f", list(frame["pf"]), each(numbers.probability), "number", symbol=True))
    for name in result.study.variables:
        if f"alpha_{name}" in frame:
            values = list(frame[f"alpha_{name}"])
            columns.append(Column(name, values, each(numbers.beta), "number", symbol=True, group=GROUP_ALPHA))
    for name in result.study.variables:
        if f"x_{name}" in frame:
            unit = column_unit(result, f"x_{name}")
            columns.append(
                Column(
                    name, list(frame[f"x_{name}"]), aligned(), "number", unit, symbol=True, group=GROUP_POINT
                )
            )
    if any(s != CONVERGED for s in result.situations["status"]):
        columns.append(Column("status", list(frame["status"])))
    return Table(tuple(columns))


def _sizes(result: Result, frame: pd.DataFrame) -> list[Column]:
    if all(r.size is None for r in result.study.rules.values()):
        return []
    one = isinstance(result.units["size_proposed"], str)
    unit = column_unit(result, "size_proposed") if one else "see rules"
    columns = [
        Column(kind, list(frame[f"size_{kind}"]), aligned(), "number", unit, group=GROUP_SIZE)
        for kind in ("present", "proposed")
    ]
    ratio = list(frame["size_proposed"] / frame["size_present"])
    columns.append(Column("change", ratio, each(numbers.change), "number", group=GROUP_SIZE))
    return columns


def without_beta(result: Result) -> list[int]:
    """Return the rows that have no beta with the proposed factors."""
    return [int(i) for i in np.flatnonzero(~np.isfinite(result.situations["beta_proposed"].to_numpy(float)))]


def place_table(result: Result, rows: list[int]) -> Table:
    """Return some situations by what they are, with size and beta before and after, and status."""
    full = situation_table(result, rows)
    left_out = {GROUP_ALPHA, GROUP_POINT}
    return Table(tuple(c for c in full.columns if c.group not in left_out and c.head != "P_f"))


def lattice_table(result: Result) -> Table | None:
    """Return the best points of the step lattice, the proposed one first; None where nothing was rounded."""
    candidates = result.calibration.candidates
    if not candidates:
        return None
    free = [f for f in result.study.factors if not f.held]
    columns = [Column("rank", list(range(1, len(candidates) + 1)), kind="number")]
    for f in free:
        values = [c.factors[f.name] for c in candidates]
        columns.append(Column(f.name, values, each(numbers.factor, f.step), "number", symbol=True))
    columns += [
        Column("objective", [c.objective for c in candidates], aligned(5), "number"),
        Column("mean β", [c.mean for c in candidates], each(numbers.beta), "number"),
        Column("min β", [c.min for c in candidates], each(numbers.beta), "number"),
        Column("max β", [c.max for c in candidates], each(numbers.beta), "number"),
    ]
    if result.study.objective.floor is not None:
        columns.append(Column("floor", ["met" if c.meets_floor else "not met" for c in candidates]))
    return Table(tuple(columns), strong=frozenset({0}))


def rounding_cost(result: Result) -> float:
    """Return by how much the objective of the proposed factors exceeds the optimum."""
    return result.calibration.proposed.objective - result.calibration.optimal.objective
