"""Open a file of records and take one column, or all, with every slip told by row and column."""

from __future__ import annotations

from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean, nearest
from calibrate.provenance import sha256_of
from calibrate.records.cells import shortened, to_number
from calibrate.records.csv_file import csv_rows
from calibrate.records.grid import Cell, Grid, Oddity, is_empty, limited, make_grid
from calibrate.records.sample import Sample, Table
from calibrate.records.xlsx_file import xlsx_rows
from calibrate.units import Unit

_Scalar = TypeVar("_Scalar", bound=np.generic)

MAX_BYTES = 100_000_000
"""Largest file that is read."""

_CSV = frozenset({".csv", ".txt"})
_XLSX = frozenset({".xlsx", ".xlsm"})


def read_column(
    path: Path, column: str, *, unit: Unit, display: str | None = None, sheet: str | None = None
) -> Sample:
    """Read one column of numbers.

    Parameters
    ----------
    path : Path
        A CSV file (comma, UTF-8 with or without byte order mark) or an XLSX
        workbook. The first row holds the column names.
    column : str
        Name of the column, exactly.
    unit : Unit
        Unit of the numbers in the file.
    display : str, optional
        How messages name the file; default ``path`` as given.
    sheet : str, optional
        Sheet of a workbook; default the first.

    Raises
    ------
    InputError
        The file cannot be read, the column is unknown or named twice, or a
        cell of it is empty or not a finite number. Each problem carries file
        and row.
    """
    file = str(path) if display is None else display
    grid = _read_grid(path, file, sheet)
    index = _find(grid, column)
    values, problems = _numbers(grid, index)
    if problems:
        raise InputError(limited(problems, file))
    return Sample(
        column, _frozen(values), unit, file, grid.sheet, _frozen(_row_numbers(grid)), sha256_of(path)
    )


def read_table(path: Path, *, display: str | None = None, sheet: str | None = None) -> Table:
    """Read all columns; a column in which every cell is a number becomes float64, any other text.

    Parameters
    ----------
    path, display, sheet
        As in `read_column`.

    Raises
    ------
    InputError
        The file cannot be read, a column has no name or the name of another,
        or a cell is empty. Each problem carries file and row.
    """
    file = str(path) if display is None else display
    grid = _read_grid(path, file, sheet)
    problems = _name_problems(grid)
    columns: dict[str, NDArray[np.float64] | NDArray[np.object_]] = {}
    not_numbers: dict[str, tuple[Problem, ...]] = {}
    for index, name in enumerate(grid.header):
        cells = [row.cells[index] for row in grid.rows]
        if not name and all(is_empty(c) for c in cells):
            continue  # a spare column between or before the table's own
        blank = [
            Problem(f"Column '{shortened(name)}': the cell is empty.", file, row.number, "Fill it.")
            for row, cell in zip(grid.rows, cells, strict=True)
            if is_empty(cell)
        ]
        problems += blank
        values, slips = _numbers(grid, index)
        if slips:
            columns[name] = np.array([_text(c) for c in cells], dtype=object)
            not_numbers[name] = tuple(limited(slips, file))
        else:
            columns[name] = values
        columns[name].flags.writeable = False
    if problems:
        raise InputError(limited(problems, file))
    return Table(columns, _frozen(_row_numbers(grid)), file, grid.sheet, sha256_of(path), not_numbers)


def _read_grid(path: Path, file: str, sheet: str | None) -> Grid:
    data = _bytes(path, file)
    suffix = path.suffix.casefold()
    if suffix in _XLSX:
        rows, name = xlsx_rows(data, file, sheet)
        return make_grid(rows, file, name)
    if suffix in _CSV:
        if sheet is not None:
            raise InputError(Problem(f"A CSV file has no sheets, but sheet '{sheet}' is asked for.", file))
        return make_grid(csv_rows(data, file), file, None)
    kind = f"A file of kind '{path.suffix}'" if path.suffix else "A file without a suffix"
    raise InputError(Problem(f"{kind} cannot be read.", file, None, "Save it as .csv (UTF-8) or .xlsx."))


def _bytes(path: Path, file: str) -> bytes:
    try:
        if path.is_dir():
            raise InputError(Problem("This is a folder, not a file.", file))
        size = path.stat().st_size
        if size > MAX_BYTES:
            message = f"The file has {size / 1e6:.0f} MB; the limit is {MAX_BYTES / 1e6:.0f} MB."
            raise InputError(Problem(message, file))
        return path.read_bytes()
    except FileNotFoundError as error:
        raise InputError(_missing(path, file)) from error
    except OSError as error:
        reason = error.strerror or type(error).__name__
        raise InputError(Problem(f"The file cannot be opened: {reason}.", file)) from error


def _missing(path: Path, file: str) -> Problem:
    try:
        there = sorted(p.name for p in path.parent.iterdir() if p.suffix.casefold() in _CSV | _XLSX)
    except OSError:
        return Problem(f"The file does not exist, nor does its folder '{path.parent}'.", file)
    close = nearest(path.name, there)
    suggestion = f"Did you mean '{close}'?" if close else None
    return Problem("The file does not exist.", file, None, suggestion)


def _find(grid: Grid, column: str) -> int:
    found = [i for i, name in enumerate(grid.header) if name == column]
    if len(found) == 1:
        return found[0]
    if found:
        message = f"Column '{column}' occurs {len(found)} times."
        raise InputError(Problem(message, grid.file, grid.header_row, "Give each column its own name."))
    known = [shortened(name) for name in grid.header if name]
    suggestion = did_you_mean(column, known)
    if all(not isinstance(to_number(name), tuple) for name in known):
        suggestion = "The first row holds numbers; it must hold the names of the columns."
    raise InputError(Problem(f"There is no column '{column}'.", grid.file, grid.header_row, suggestion))


def _name_problems(grid: Grid) -> list[Problem]:
    problems = []
    for index, name in enumerate(grid.header):
        if not name and any(not is_empty(row.cells[index]) for row in grid.rows):
            message = f"Column {index + 1} has no name."
            problems.append(Problem(message, grid.file, grid.header_row, "Name it, or delete its cells."))
        elif name and name in grid.header[:index]:
            message = f"Column '{shortened(name)}' occurs more than once."
            problems.append(Problem(message, grid.file, grid.header_row, "Give each column its own name."))
    return problems


def _numbers(grid: Grid, index: int) -> tuple[NDArray[np.float64], list[Problem]]:
    values = np.full(len(grid.rows), np.nan)
    problems: list[Problem] = []
    name = shortened(grid.header[index])
    for i, row in enumerate(grid.rows):
        read = to_number(row.cells[index])
        if isinstance(read, tuple):
            problems.append(Problem(f"Column '{name}': {read[0]}", grid.file, row.number, read[1]))
        else:
            values[i] = read
    return values, problems


def _text(cell: Cell | Oddity) -> str:
    if isinstance(cell, Oddity):
        return cell.text
    return "" if cell is None else str(cell).strip()


def _row_numbers(grid: Grid) -> NDArray[np.int64]:
    return np.array([row.number for row in grid.rows], dtype=np.int64)


def _frozen(array: NDArray[_Scalar]) -> NDArray[_Scalar]:
    array.flags.writeable = False
    return array
