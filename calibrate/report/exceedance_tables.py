"""Threshold exceedances as a table and a sentence."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from calibrate.report import numbers
from calibrate.report.table import Column, Table

if TYPE_CHECKING:
    from calibrate.study.exceedances import ExceedanceModel

DAYS = 365.25


def exceedance_table(found: ExceedanceModel, unit: str) -> Table:
    """Return what was fitted: estimates with standard errors and 95 % intervals where there are any."""
    fit = found.fit
    errors = fit.standard_errors
    held = ("held at 0", "") if fit.exponential else (_error(errors["shape"]), _interval(fit.shape_interval))
    rows = [
        ("threshold", numbers.significant(fit.threshold), unit, "", ""),
        ("events per year", numbers.significant(fit.rate), "", _error(errors["rate"]), ""),
        ("scale of the excesses", numbers.significant(fit.scale), unit, _error(errors["scale"]), ""),
        ("shape", numbers.fixed(fit.shape, 3), "", *held),
    ]
    if math.isfinite(fit.upper_end):
        rows.append(("upper end", numbers.significant(fit.upper_end), unit, "", ""))
    heads = ("", "estimate", "unit", "standard error", "95 % interval")
    columns = zip(*rows, strict=True)
    return Table(
        tuple(
            Column(head, list(column), kind="number" if head == "estimate" else "text")
            for head, column in zip(heads, columns, strict=True)
        )
    )


def exceedance_sentence(found: ExceedanceModel) -> str:
    """Return how many exceedances became how many events, and how the events come in time."""
    events = found.events
    over = numbers.count(int(events.exceedances.size), "exceedance")
    if found.run_length is None:
        text = f"{over} in {numbers.years(found.fit.years)}; each counts as an event of its own."
    else:
        text = (
            f"{over} in {numbers.years(found.fit.years)}; those at most {_length(found.run_length)} apart count as one "
            f"event, which leaves {numbers.count(events.n, 'event')} (extremal index "
            f"{numbers.fixed(events.extremal_index, 2)})."
        )
    if found.dispersion is None:
        return text
    index, p_value = found.dispersion
    return (
        f"{text} Variance over mean of the yearly numbers of events: {numbers.fixed(index, 2)}, near 1 for independent "
        f"events (p = {numbers.significant(p_value, 2)})."
    )


def _length(years: float) -> str:
    days = years * DAYS
    if days < 1.0:
        return f"{numbers.significant(24.0 * days)} h"
    return numbers.count(1, "day") if days == 1.0 else f"{numbers.significant(days)} days"


def _error(value: float) -> str:
    return numbers.significant(value, 2) if math.isfinite(value) else numbers.NONE


def _interval(ends: tuple[float, float]) -> str:
    if not all(math.isfinite(e) for e in ends):
        return numbers.NONE
    return f"{numbers.fixed(ends[0], 2)} to {numbers.fixed(ends[1], 2)}"
