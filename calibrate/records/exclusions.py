"""Rows are left out only by a rule that says why."""

from __future__ import annotations

import dataclasses

from calibrate.errors import InputError, Problem
from calibrate.records.cells import Refusal, as_text, shortened, to_number
from calibrate.records.columns import find
from calibrate.records.grid import Cell, Grid, Oddity, Row
from calibrate.records.options import Exclude
from calibrate.records.sample import Exclusion


def leave_out(
    grid: Grid, rules: tuple[Exclude, ...], columns: tuple[str, ...]
) -> tuple[Grid, tuple[Exclusion, ...]]:
    """Return the grid without the rows that the rules name, and what was left out, in row order.

    Parameters
    ----------
    grid : Grid
    rules : tuple of Exclude
        A row that several rules name is listed once, with all reasons.
    columns : tuple of str
        Those of the value, to be shown with what was left out.

    Raises
    ------
    InputError
        A rule that matches no row, an unknown column, or no row left.
    """
    reasons: dict[int, list[str]] = {}
    problems: list[Problem] = []
    for rule in rules:
        matched = [row.number for row in grid.rows if row.number == rule.row]
        if rule.where is not None:
            index = find(grid, rule.where)
            matched = [row.number for row in grid.rows if _equals(grid, row.cells[index], rule.equals)]
        if not matched:
            problems.append(_nothing(grid, rule))
        for number in matched:
            reasons.setdefault(number, []).append(rule.reason.strip())
    if problems:
        raise InputError(problems)
    kept = tuple(row for row in grid.rows if row.number not in reasons)
    if not kept:
        raise InputError(Problem("The exclusions leave no row.", grid.file))
    places = [(name, find(grid, name)) for name in columns]
    excluded = tuple(
        Exclusion(row.number, "; ".join(dict.fromkeys(reasons[row.number])), _shown(row, places))
        for row in grid.rows
        if row.number in reasons
    )
    return dataclasses.replace(grid, rows=kept), excluded


def _equals(grid: Grid, cell: Cell | Oddity, entry: str | float | bool | None) -> bool:
    text = as_text(cell)
    if isinstance(entry, bool):
        return text.casefold() == str(entry).casefold()
    if isinstance(entry, int | float):
        number = to_number(cell, grid.notation)
        return not isinstance(number, Refusal) and number == entry
    return text == str(entry).strip()


def _nothing(grid: Grid, rule: Exclude) -> Problem:
    message = f"The exclusion of {rule.target} ({shortened(rule.reason)}) matches nothing."
    if rule.where is None:
        first, last = grid.rows[0].number, grid.rows[-1].number
        return Problem(message, grid.file, None, f"Data stand in rows {first} to {last}.")
    index = find(grid, rule.where)
    entries = sorted({shortened(as_text(row.cells[index])) for row in grid.rows} - {""})
    shown = ", ".join(f"'{e}'" for e in entries[:8]) + (", …" if len(entries) > 8 else "")
    suggestion = f"Its entries are {shown}." if entries else "The column is empty."
    return Problem(message, grid.file, None, suggestion)


def _shown(row: Row, places: list[tuple[str, int]]) -> str:
    entries = [(name, shortened(as_text(row.cells[index]))) for name, index in places]
    return entries[0][1] if len(entries) == 1 else ", ".join(f"{name} = {text}" for name, text in entries)
