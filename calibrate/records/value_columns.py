"""A column of values with what is stated about it: bounds, flags, and rows in other units."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.records.bounds import Bounds, complete_only, to_bounds, to_flag, with_flag
from calibrate.records.cells import Refusal, as_text, shortened, to_number
from calibrate.records.columns import find, problem, read_cells, texts
from calibrate.records.grid import Cell, Grid, Oddity
from calibrate.records.options import ReadOptions, UnitBy
from calibrate.units import Unit

Array = NDArray[np.float64]


def read_bounds(
    grid: Grid, column: str, options: ReadOptions, problems: list[Problem], *, flagged: bool
) -> tuple[Array, Array]:
    """Return the bounds of each row, as written, each of shape (n,); NaN where a problem was added.

    Parameters
    ----------
    grid : Grid
    column : str
    options : ReadOptions
        ``censoring`` and ``censored`` are used.
    problems : list of Problem
        Receives the refused cells.
    flagged : bool
        Whether the flag column speaks of this column.
    """

    def read(cell: Cell | Oddity) -> Bounds | Refusal:
        if options.censoring:
            return to_bounds(cell, grid.notation)
        value = to_number(cell, grid.notation)
        return value if isinstance(value, Refusal) else Bounds(value, value)

    found = read_cells(grid, find(grid, column), read, problems)
    if flagged and options.censored is not None:
        found = _with_flags(grid, column, options.censored, found, options, problems)
    both = np.array([(np.nan, np.nan) if b is None else b for b in found], dtype=np.float64)
    return both[:, 0].copy(), both[:, 1].copy()


def _with_flags(
    grid: Grid,
    column: str,
    flags: str,
    found: list[Bounds | None],
    options: ReadOptions,
    problems: list[Problem],
) -> list[Bounds | None]:
    entries = read_cells(grid, find(grid, flags), to_flag, problems)
    combined: list[Bounds | None] = []
    for row, bounds, flag in zip(grid.rows, found, entries, strict=True):
        if bounds is None or flag is None:
            combined.append(None)
            continue
        if options.censoring:
            both = with_flag(bounds, flag, flags)
        else:
            value = complete_only(bounds.lower, flag, flags)
            both = value if isinstance(value, Refusal) else bounds
        if isinstance(both, Refusal):
            problems.append(problem(grid, row.number, column, both))
        combined.append(None if isinstance(both, Refusal) else both)
    return combined


def row_factors(grid: Grid, column: str, unit: Unit, unit_by: UnitBy) -> Array:
    """Return the factor from each row's own unit to ``unit``, shape (n,).

    Raises
    ------
    InputError
        The unit of a label measures another quantity.
    """
    factors = np.ones(len(grid.rows))
    entries = texts(grid, find(grid, unit_by.column))
    for label, own in unit_by.units.items():
        if own.dimension != unit.dimension:
            message = (
                f"Column '{shortened(column)}' is in {_words(unit)}, but rows with "
                f"'{shortened(label)}' in column '{shortened(unit_by.column)}' are said to be in {_words(own)}."
            )
            suggestion = "State a unit of the same quantity; a weight in kg acts as a force in kgf."
            raise InputError(Problem(message, grid.file, None, suggestion))
        factors[entries == label] = own.factor / unit.factor
    return factors


def _words(unit: Unit) -> str:
    return f"'{unit.text}', {unit.dimension.describe()}" if unit.text else "plain numbers, dimensionless"


def check_unit_labels(grid: Grid, unit_by: UnitBy) -> None:
    """Refuse labels of ``unit_by`` that no row of the file has."""
    index = find(grid, unit_by.column)
    known = {as_text(row.cells[index]) for row in grid.rows}
    problems = []
    for label in unit_by.units:
        if label not in known:
            message = f"No row has '{shortened(label)}' in column '{shortened(unit_by.column)}'."
            entries = ", ".join(f"'{shortened(e)}'" for e in sorted(known - {""})[:8])
            problems.append(
                Problem(message, grid.file, None, f"A unit is stated for it; the entries are {entries}.")
            )
    if problems:
        raise InputError(problems)
