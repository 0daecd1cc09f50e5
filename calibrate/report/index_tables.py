"""What ``calibrate index`` shows of one design situation: tables and sentences."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import ndtr

from calibrate.reliability.trace import STEP
from calibrate.report import numbers
from calibrate.report.table import Column, Table, aligned, each
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.study.index_curve import Curve
    from calibrate.study.index_inverse import Required
    from calibrate.study.one_situation import Analysis, OneSituation
    from calibrate.units import Unit

DIGITS = 6
NO_EFFECT = 1e-9
"""Change of the index over the range of a curve that is rounding."""
ALPHA_NOTE = (
    "The variables depend on one another: u and α belong to independent standard normal variables behind them, in the "
    "order of the study."
)


def with_unit(value: float, unit: Unit, digits: int = DIGITS) -> str:
    """Return a value with its unit."""
    text = numbers.significant(value, digits)
    return f"{text} {format_unit(unit.text)}" if unit.text else text


def head_lines(found: OneSituation) -> list[str]:
    """Return what the situation is: place, factors, size, leading action."""
    study = found.study
    n = study.situations.n
    where = ", ".join(
        f"{p.name} = {p.value if isinstance(p.value, str) else with_unit(p.value, p.unit)}"
        for p in found.place
    )
    lines = [
        f"Rule {found.rule.name}, situation {found.number} of {n}{f': {where}' if where else ''}.",
        f"Target β = {numbers.significant(study.target_beta)} for {numbers.years(study.reference_period)}.",
    ]
    factors = ", ".join(
        f"{name} = {numbers.significant(value, DIGITS)}" for name, value in found.factors.items()
    )
    replaced = [n for n in found.factors if n in found.asked.factors]
    given = f"; given here: {', '.join(replaced)}" if replaced else ""
    lines.append(f"Factors ({found.asked.on}{given}): {factors}.")
    if found.size_unit is not None:
        size = "none" if math.isnan(found.size) else with_unit(found.size, found.size_unit)
        lines.append(f"Size {found.rule.size} by the design check: {size}.")
    if found.alternatives:
        each_beta = ", ".join(f"{k} {numbers.beta(v, 4)}" for k, v in found.alternatives.items())
        lines.append(
            f"Combined actions, β by leading action: {each_beta}. {found.leading} governs and is looked at."
        )
    elif found.leading:
        lines.append(f"Combined actions, with {found.leading} leading, as asked.")
    return lines


def variable_table(found: OneSituation) -> Table:
    """Return the basic variables with family and moments."""
    rows = found.variables
    columns = [
        Column("variable", [v.name for v in rows], kind="name"),
        Column("family", [v.family for v in rows]),
        Column("mean", [v.mean for v in rows], each(numbers.significant, DIGITS), "number"),
        Column("sd", [v.sd for v in rows], each(numbers.significant, DIGITS), "number"),
        Column("cov", [v.cov for v in rows], each(numbers.significant, 4), "number"),
        Column("unit", [format_unit(v.unit.text) for v in rows]),
    ]
    if any(v.given for v in rows):
        columns.append(Column("given, at their medians", [", ".join(v.given) for v in rows]))
    return Table(tuple(columns))


def trace_table(found: OneSituation, analysis: Analysis, letter: str) -> Table:
    """Return the iteration with ``letter`` u or x of each variable."""
    steps = analysis.trace
    columns = [Column("step", list(range(len(steps.what))), kind="number")]
    for i, v in enumerate(found.variables):
        unit = f" {format_unit(v.unit.text)}" if letter == "x" and v.unit.text else ""
        values = steps.u[:, i] if letter == "u" else steps.x[:, i] / v.unit.factor
        show = each(numbers.fixed, 4) if letter == "u" else each(numbers.significant, DIGITS)
        columns.append(Column(f"{letter} {v.name}{unit}", values, show, "number"))
    if letter == "u":
        columns += [
            Column("g (SI)", steps.g, each(numbers.significant, 4), "number"),
            Column("β", steps.beta, each(numbers.beta, 5), "number"),
        ]
    columns.append(Column("", ["" if what == STEP else what for what in steps.what], _as_it_is))
    return Table(tuple(columns))


def point_table(found: OneSituation, analysis: Analysis) -> Table:
    """Return the design point."""
    point, rows = analysis.reliability, found.variables
    return Table(
        (
            Column("variable", [v.name for v in rows], kind="name"),
            Column(
                "x*",
                [point.x[i, 0] / v.unit.factor for i, v in enumerate(rows)],
                each(numbers.significant, DIGITS),
                "number",
            ),
            Column("unit", [format_unit(v.unit.text) for v in rows]),
            Column("u*", point.u[:, 0], each(numbers.fixed, 4), "number"),
            Column("α", point.alpha[:, 0], each(numbers.fixed, 4), "number"),
            Column("α²", point.alpha[:, 0] ** 2, each(numbers.share), "number"),
        )
    )


def method_table(found: OneSituation, analysis: Analysis) -> Table:
    """Return the index by every method, with what is to be said about it."""
    second, several, simulated = analysis.second_order, analysis.further, analysis.simulation
    form = float(analysis.reliability.beta[0])
    rows: list[tuple[str, float, str]] = [("FORM", form, found.status)]
    status = str(second.status[0])
    rows += [
        ("Breitung", float(second.beta_breitung[0]), ""),
        ("Hohenbichler–Rackwitz", float(second.beta_hohenbichler_rackwitz[0]), ""),
        ("Tvedt", float(second.beta_tvedt[0]), ""),
        ("exact paraboloid", float(second.beta_paraboloid[0]), status),
    ]
    if several.count[0] > 1:
        rows.append(("all design points as a series", analysis.series, f"{int(several.count[0])} points"))
    if simulated is not None:
        low, high = numbers.beta(simulated.beta_lower[0], 4), numbers.beta(simulated.beta_upper[0], 4)
        note = (
            f"{low} … {high} (95 %), cov {numbers.share(simulated.cov[0])}, "
            f"{numbers.count(int(simulated.samples[0]), 'sample')}; {simulated.status[0]}"
        )
        rows.append((simulated.method, float(simulated.beta[0]), note))
    rows += [
        (name, float(r.beta[0]), f"{r.status[0]}, {numbers.count(int(r.evaluations), 'evaluation')}")
        for name, r in analysis.solvers
    ]
    beta = np.array([r[1] for r in rows])
    return Table(
        (
            Column("method", [r[0] for r in rows]),
            Column("β", beta, each(numbers.beta, 5), "number"),
            Column("less FORM", beta - form, each(_signed), "number"),
            Column("p_f", ndtr(-beta), each(_probability), "number"),
            Column("", [r[2] for r in rows], _as_it_is),
        )
    )


def _as_it_is(values: Any) -> list[str]:
    return [str(v) for v in values]


def _signed(value: float) -> str:
    """Return a difference of indices; small ones as a power of ten."""
    if not math.isfinite(value):
        return numbers.NONE
    if value == 0.0:
        return "0"
    text = numbers.fixed(abs(value), 5) if abs(value) >= 5e-6 else numbers.power_of_ten(abs(value), 1)
    return f"{'+' if value > 0 else numbers.MINUS}{text}"


def _probability(value: float) -> str:
    return numbers.significant(value, 4)


def curvature_sentence(analysis: Analysis) -> str:
    """Return the principal curvatures in words."""
    kappa = analysis.second_order.curvatures[:, 0]
    if not kappa.size or not np.isfinite(kappa).all():
        return ""
    # What is rounding beside the largest is no curvature.
    shown = ", ".join(
        numbers.significant(k if abs(k) > 1e-9 * np.abs(kappa).max() else 0.0, 4) for k in kappa
    )
    return f"Principal curvatures at the design point, positive towards failure: {shown}."


def further_sentence(analysis: Analysis) -> str:
    """Return what was found of further design points."""
    several = analysis.further
    count = int(several.count[0])
    if count == 0:
        return ""
    if count == 1:
        return "No further design point was found."
    beta = ", ".join(numbers.beta(b, 4) for b in several.beta[1:count, 0])
    text = f"{numbers.count(count - 1, 'further design point')}: β = {beta}."
    if several.more[0]:
        text += " There are more."
    if several.nearer[0]:
        text += " One of them is nearer than that of FORM, whose β is too high."
    return text


def further_table(found: OneSituation, analysis: Analysis) -> Table | None:
    """Return the further design points, x of every variable; None without any."""
    several = analysis.further
    count = int(several.count[0])
    if count < 2:
        return None
    x = [analysis.problem.x(several.u[k]) for k in range(1, count)]
    columns = [Column("β", several.beta[1:count, 0], each(numbers.beta, 4), "number")]
    for i, v in enumerate(found.variables):
        unit = f" {format_unit(v.unit.text)}" if v.unit.text else ""
        values = [float(row[i][0]) / v.unit.factor for row in x]
        columns.append(Column(f"x {v.name}{unit}", values, each(numbers.significant, DIGITS), "number"))
    return Table(tuple(columns))


def curve_table(found: OneSituation, curve: Curve) -> Table:
    """Return the index against what is varied."""
    what = curve.varied
    unit = f" {format_unit(what.unit.text)}" if what.unit.text else ""
    columns = [
        Column(f"{what.name}{unit}", curve.values / what.unit.factor, aligned(DIGITS), "number"),
    ]
    if curve.size is not None and found.size_unit is not None:
        size_unit = f" {format_unit(found.size_unit.text)}" if found.size_unit.text else ""
        values = curve.size / found.size_unit.factor
        columns.append(Column(f"{found.rule.size}{size_unit}", values, aligned(DIGITS), "number"))
    columns += [
        Column("β by FORM", curve.beta, each(numbers.beta, 4), "number"),
        Column("second order", curve.second_order, each(numbers.beta, 4), "number"),
        Column("dβ/d value", _slopes(curve), aligned(), "number"),
    ]
    if any(curve.governing):
        columns.append(Column("governs", list(curve.governing)))
    remarks = [
        str(s) if not np.isfinite(b) or s != "converged" else ("" if ok else "second order doubtful")
        for s, b, ok in zip(curve.status, curve.beta, curve.sound, strict=True)
    ]
    if any(remarks):
        columns.append(Column("", remarks, _as_it_is))
    return Table(tuple(columns))


def _slopes(curve: Curve) -> Any:
    """Return the slopes in the unit of what is varied; zero where they could not be seen over the whole range."""
    felt = np.abs(curve.slope) * (curve.values[-1] - curve.values[0])
    return np.where(felt < NO_EFFECT, 0.0, curve.slope * curve.varied.unit.factor)


def required_lines(found: OneSituation, required: Required) -> list[str]:
    """Return the answer to the inverse question in words."""
    what = required.varied
    target = numbers.significant(required.target, DIGITS)
    calls = f"{numbers.count(required.evaluations, 'evaluation')} of β"
    if not required.met:
        return [f"No value of {what.name} was found that gives β = {target}: {required.status}; {calls}."]
    text = (
        f"{what.name} = {with_unit(required.value / what.unit.factor, what.unit, 8)} gives β = {target}, in place of "
        f"{with_unit(what.present / what.unit.factor, what.unit)} with β = {numbers.beta(found.beta, 4)}."
    )
    check = (
        f"FORM begun anew there: β = {numbers.beta(required.beta, 6)}, dβ/d value = "
        f"{numbers.significant(required.slope * what.unit.factor, 4)}; {calls}."
    )
    lines = [text, check]
    if found.size_unit is not None and math.isfinite(required.size):
        size = required.size / found.size_unit.factor
        lines.append(f"The size {found.rule.size} is then {with_unit(size, found.size_unit)}.")
    return [*lines, *([what.note] if what.note else [])]
