"""The verified reliability index: how far FORM is off, where, and by which method that is known."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers
from calibrate.report.table import Column, Table, each
from calibrate.study.verification import place_of

if TYPE_CHECKING:
    from calibrate.factors import Verification
    from calibrate.study.result import Result

MOST_SHOWN = 12


def counted(result: Result, found: Verification) -> NDArray[np.bool_]:
    """Return the rows with an index and a weight."""
    return np.asarray(np.isfinite(found.form) & (result.situations["weight"].to_numpy(float) > 0.0))


def verification_table(result: Result) -> Table | None:
    """Return one row per verified set of factors: how many situations, how far off, at what cost."""
    if not result.verifications:
        return None
    found = list(result.verifications.items())
    rows = [counted(result, v) for _, v in found]

    def extreme(values: NDArray[np.float64], there: NDArray[np.bool_]) -> tuple[float, float]:
        known = values[there & np.isfinite(values)]
        return (float(known.min()), float(known.max())) if known.size else (np.nan, np.nan)

    difference = [extreme(v.difference, r) for (_, v), r in zip(found, rows, strict=True)]
    ratio = [extreme(v.ratio, r) for (_, v), r in zip(found, rows, strict=True)]
    outside = [
        int(np.count_nonzero(r & (np.abs(v.difference) > v.settings.tolerance)))
        for (_, v), r in zip(found, rows, strict=True)
    ]
    whole = each(lambda value: numbers.whole(int(value)))
    return Table(
        (
            Column("factors", [kind for kind, _ in found]),
            Column("with weight", [int(np.count_nonzero(r)) for r in rows], whole, "number"),
            Column("simulated", [int(np.count_nonzero(v.is_simulated)) for _, v in found], whole, "number"),
            Column("samples", [int(np.sum(v.samples)) for _, v in found], whole, "number"),
            Column(
                "smallest", [d[0] for d in difference], each(_signed), "number", group="verified β less FORM"
            ),
            Column(
                "largest", [d[1] for d in difference], each(_signed), "number", group="verified β less FORM"
            ),
            Column(
                "smallest",
                [r[0] for r in ratio],
                each(numbers.fixed, 2),
                "number",
                group="Pf over that of FORM",
            ),
            Column(
                "largest",
                [r[1] for r in ratio],
                each(numbers.fixed, 2),
                "number",
                group="Pf over that of FORM",
            ),
            Column("outside tolerance", outside, whole, "number"),
        )
    )


def simulated_table(result: Result, kind: str) -> Table | None:
    """Return the simulated situations of a set of factors, those with the largest differences first."""
    v = result.verifications[kind]
    at = np.flatnonzero(v.is_simulated & counted(result, v))
    if not at.size:
        return None
    at = at[np.argsort(-np.abs(v.difference[at]), kind="stable")][:MOST_SHOWN]
    places = [place_of(result.study, int(i)) for i in at]
    interval = [
        f"{numbers.beta(low, 3)} … {numbers.beta(high, 3)}"
        for low, high in zip(v.lower[at], v.upper[at], strict=True)
    ]
    return Table(
        (
            Column("rule", [rule for rule, _ in places]),
            Column("situation", [number for _, number in places], kind="number"),
            Column("FORM", v.form[at], each(numbers.beta, 3), "number", group="β"),
            Column("second order", v.sorm[at], each(numbers.beta, 3), "number", group="β"),
            Column("simulated", v.simulated[at], each(numbers.beta, 3), "number", group="β"),
            Column("95 % interval", interval, kind="number", group="β"),
            Column("Pf over that of FORM", v.ratio[at], each(numbers.fixed, 2), "number"),
            Column("samples", v.samples[at], each(lambda n: numbers.whole(int(n))), "number"),
            Column("design points", v.points[at], each(_points), "number"),
        )
    )


def shown_sentence(result: Result, kind: str) -> str:
    """Return which of the simulated situations of a set of factors the table shows."""
    v = result.verifications[kind]
    count = int(np.count_nonzero(v.is_simulated & counted(result, v)))
    which = "all" if count <= MOST_SHOWN else f"the {MOST_SHOWN} with the largest differences"
    return f"Simulated situations, {kind} factors: {which} of {count}, by the size of the difference"


def brief_sentence(result: Result) -> str:
    """Return what verification found with the proposed factors, in one sentence; empty where it was not done."""
    v = result.verifications.get("proposed")
    if v is None:
        return ""
    there = counted(result, v) & np.isfinite(v.difference)
    if not there.any():
        return ""
    size = np.where(there, np.abs(v.difference), -1.0)
    most = int(np.argmax(size))
    rule, situation = place_of(result.study, most)
    checked = int(np.count_nonzero(v.is_simulated & there))
    how = f"{numbers.count(checked, 'situation')} simulated, the others by second order"
    if checked == np.count_nonzero(there):
        how = "every situation with weight simulated"
    elif not checked:
        how = "by second order"
    return (
        f"Verified independently ({how}): β by FORM is off by at most {numbers.beta(size[most])}, in {rule}, "
        f"{situation}: "
        f"{numbers.beta(v.form[most], 3)} by FORM, {numbers.beta(v.verified[most], 3)} by {v.basis[most]}."
    )


def _points(count: float) -> str:
    """Return a number of design points; of a system none was looked for."""
    return numbers.whole(int(count)) if count else numbers.NONE


def _signed(value: float) -> str:
    text = numbers.beta(value, 3)
    return f"+{text}" if np.isfinite(value) and value > 0.0005 else text
