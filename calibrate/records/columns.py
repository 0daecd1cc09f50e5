"""Columns of a grid: found by name, read as numbers or as labels, each slip with its row."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from itertools import islice
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean, nearest
from calibrate.records.cells import Refusal, as_text, shortened, to_number
from calibrate.records.grid import Cell, Grid, Oddity, is_empty

_Read = TypeVar("_Read")

_MOST_COMPARED = 1000
_MOST_NAMED = 20


def find(grid: Grid, column: str) -> int:
    """Return the place of a column.

    Raises
    ------
    InputError
        There is none of that name, or more than one.
    """
    found = [i for i, name in enumerate(grid.header) if name == column]
    if len(found) == 1:
        return found[0]
    if found:
        message = f"Column '{column}' occurs {len(found)} times."
        raise InputError(Problem(message, grid.file, grid.header_row, "Give each column its own name."))
    known = [name for name in grid.header if name]
    suggestion = which_column(column, known)
    if all(not isinstance(to_number(name, grid.notation), Refusal) for name in known):
        suggestion = "The first row holds numbers; it must hold the names of the columns."
    raise InputError(Problem(f"There is no column '{column}'.", grid.file, grid.header_row, suggestion))


def which_column(column: str, names: Iterable[str]) -> str:
    """Return a suggestion for an unknown column: the nearest name, or the first ones that there are."""
    known = [shortened(name) for name in islice(names, _MOST_COMPARED)]
    close = nearest(column, known)
    shown = known if len(known) <= _MOST_NAMED else [*known[:_MOST_NAMED], "…"]
    return did_you_mean(column, shown if close is None else [close])


def problem(grid: Grid, row: int, column: str, refusal: Refusal) -> Problem:
    """Return the problem of one cell."""
    message = f"Column '{shortened(column)}': {refusal.message}"
    return Problem(message, grid.file, row, refusal.suggestion)


def read_cells(
    grid: Grid, index: int, read: Callable[[Cell | Oddity], _Read | Refusal], problems: list[Problem]
) -> list[_Read | None]:
    """Read every cell of a column; a refused one adds a problem and becomes None."""
    found: list[_Read | None] = []
    for row in grid.rows:
        value = read(row.cells[index])
        if isinstance(value, Refusal):
            problems.append(problem(grid, row.number, grid.header[index], value))
            found.append(None)
        else:
            found.append(value)
    return found


def numbers(grid: Grid, index: int, problems: list[Problem]) -> NDArray[np.float64]:
    """Return a column of numbers, shape (n,); NaN where a problem was added."""
    read = read_cells(grid, index, lambda cell: to_number(cell, grid.notation), problems)
    return np.array([np.nan if value is None else value for value in read], dtype=np.float64)


def texts(grid: Grid, index: int) -> NDArray[np.object_]:
    """Return a column as labels, shape (n,)."""
    return np.array([as_text(row.cells[index]) for row in grid.rows], dtype=object)


def labels(grid: Grid, column: str, problems: list[Problem], *, gaps: bool) -> NDArray[np.object_]:
    """Return a column of labels; an empty one adds a problem unless ``gaps`` are allowed."""
    index = find(grid, column)
    if not gaps:
        empty = Refusal("the cell is empty.", "Fill it: which group the specimen belongs to must be known.")
        bare = [row.number for row in grid.rows if is_empty(row.cells[index])]
        problems += [problem(grid, number, column, empty) for number in bare]
    return texts(grid, index)


def row_numbers(grid: Grid) -> NDArray[np.int64]:
    """Return the row of the file of each row of the grid, shape (n,)."""
    return np.array([row.number for row in grid.rows], dtype=np.int64)
