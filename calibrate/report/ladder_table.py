"""The verification ladder as report and command show it: each check with both figures and what was allowed."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from calibrate.report import numbers
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.study.ladder import LadderRow

DIGITS = 7
ROUNDING = 1e-12
YES, NO = "yes", "NO"


def ladder_table(rows: Sequence[LadderRow]) -> Table:
    """Return one row per check; those that failed are set off."""
    return Table(
        (
            Column("check", [row.name for row in rows]),
            Column("expected", [row.expected for row in rows], each(numbers.significant, DIGITS), "number"),
            Column("computed", [row.computed for row in rows], each(numbers.significant, DIGITS), "number"),
            Column("difference", [row.difference for row in rows], each(_difference), "number"),
            Column("tolerance", [tolerance(row) for row in rows]),
            Column("passed", [YES if row.passed else NO for row in rows]),
            Column("source", [row.source for row in rows]),
        ),
        strong=frozenset(i for i, row in enumerate(rows) if not row.passed),
    )


def _difference(value: float) -> str:
    """Return a difference; what is rounding only differs between machines, and is not told apart."""
    return f"< {numbers.significant(ROUNDING, 1)}" if value < ROUNDING else numbers.significant(value, 2)


def tolerance(row: LadderRow) -> str:
    """Return what is allowed with its measure, which is that of the difference, too."""
    return f"{numbers.significant(row.tolerance, 2)} {row.measure}"


def complaint(row: LadderRow) -> str:
    """Return one sentence about a check that failed."""
    if row.error:
        return f"{row.name}: not computed; {row.error}"
    expected, computed = (numbers.significant(v, DIGITS) for v in (row.expected, row.computed))
    off = numbers.significant(row.difference, 2)
    return (
        f"{row.name}: expected {expected}, computed {computed}; difference {off}, allowed {tolerance(row)}."
    )
