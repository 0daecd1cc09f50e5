"""A file as a grid of cells with row numbers: what CSV and XLSX have in common."""

from __future__ import annotations

from dataclasses import dataclass

from calibrate.errors import InputError, Problem
from calibrate.records.notation import POINT, Notation

Cell = str | float | int | bool | None
"""CSV cells are text, XLSX cells keep their type, None is an empty cell; dates and errors are an `Oddity`."""


@dataclass(frozen=True, slots=True)
class Oddity:
    """A cell that is neither a number nor a text: an error, a date, a formula without a stored value."""

    text: str
    reason: str
    suggestion: str


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a file; ``number`` counts from 1 as a spreadsheet or an editor does."""

    number: int
    cells: tuple[Cell | Oddity, ...]

    @property
    def is_empty(self) -> bool:
        """Whether no cell holds anything."""
        return all(is_empty(cell) for cell in self.cells)


@dataclass(frozen=True, slots=True)
class Grid:
    """Column names and the rows below them, all of one length.

    ``header_row`` is None where the file stores the names apart from the rows;
    ``notation`` is that of numbers in text cells; ``note`` says how the file
    is written.
    """

    file: str
    sheet: str | None
    header_row: int | None
    header: tuple[str, ...]
    rows: tuple[Row, ...]
    notation: Notation = POINT
    note: str = ""


def is_empty(cell: Cell | Oddity) -> bool:
    """Whether a cell holds nothing, or only blanks."""
    return cell is None or (isinstance(cell, str) and not cell.strip())


def make_grid(rows: list[Row], file: str, sheet: str | None) -> Grid:
    """Split off the column names, drop what is empty at the end, and check that it is a rectangle.

    Raises
    ------
    InputError
        No rows at all, no data rows, an empty row between data, rows longer or
        shorter than the row of column names.
    """
    while rows and rows[-1].is_empty:
        rows = rows[:-1]
    place = "The file" if sheet is None else f"Sheet '{sheet}'"
    if not rows:
        suggestion = "The first row holds the names of the columns, the rows below it the values."
        raise InputError(Problem(f"{place} is empty.", file, None, suggestion))
    first, body = rows[0], rows[1:]
    header = tuple("" if is_empty(c) else _name(c) for c in first.cells)
    if first.is_empty:
        message = f"{place} begins with an empty row."
        raise InputError(
            Problem(message, file, first.number, "The first row holds the names of the columns.")
        )
    if not body:
        message = f"{place} has column names but no data rows below them."
        raise InputError(Problem(message, file, first.number))
    width = _used_width(header, body)
    problems = [p for row in body if (p := _misfit(row, width, len(header), file)) is not None]
    if problems:
        raise InputError(limited(problems, file))
    trimmed = tuple(Row(r.number, _padded(r.cells, width)) for r in body)
    return Grid(file, sheet, first.number, header[:width], trimmed)


MOST_TOLD = 10


def limited(problems: list[Problem], file: str) -> list[Problem]:
    """Return the first problems and a count of the others: a file of slips must not flood the screen."""
    if len(problems) <= MOST_TOLD + 1:
        return problems
    rest = len(problems) - MOST_TOLD
    last = problems[-1].line
    return [
        *problems[:MOST_TOLD],
        Problem(f"and {rest} more such cells or rows down to this one.", file, last),
    ]


def _name(cell: Cell | Oddity) -> str:
    return cell.text if isinstance(cell, Oddity) else str(cell).strip()


def _padded(cells: tuple[Cell | Oddity, ...], width: int) -> tuple[Cell | Oddity, ...]:
    return (*cells[:width], *(None,) * (width - len(cells)))


def _used_width(header: tuple[str, ...], body: list[Row]) -> int:
    """Return the number of columns without those at the right that have neither name nor content."""
    width = len(header)
    while width and not header[width - 1]:
        if any(len(r.cells) >= width and not is_empty(r.cells[width - 1]) for r in body):
            break
        width -= 1
    return width


def _misfit(row: Row, width: int, named: int, file: str) -> Problem | None:
    if row.is_empty:
        return Problem(
            "This row is empty, but data follow below it.", file, row.number, "Delete the row or fill it."
        )
    # Blank cells to the right of the table are what spreadsheets leave behind, not data.
    length = len(row.cells)
    while length > width and is_empty(row.cells[length - 1]):
        length -= 1
    if width <= length <= max(width, named):
        return None
    message = f"This row has {length} cells, but there are {width} column names."
    suggestion = None
    if length > width:
        suggestion = "A decimal comma, or a comma in a text without quotes, makes one cell into two."
    return Problem(message, file, row.number, suggestion)
