"""Which decimal mark a file uses, found from all of its numbers; doubt is refused."""

from __future__ import annotations

import re
from dataclasses import dataclass

from calibrate.errors import InputError, Problem
from calibrate.records.cells import shortened
from calibrate.records.grid import Grid

_STATE = "State decimal = ',' or decimal = '.' for this file."


def _alternatives(mark: str, other: str) -> list[str]:
    """Return patterns for what may be decimals or thousands, and for what shows the mark with certainty."""
    m, o = re.escape(mark), re.escape(other)
    either = rf"[+-]?[1-9][0-9]{{0,2}}{m}[0-9]{{3}}"
    group = rf"[+-]?[0-9]{{1,3}}(?:{o}[0-9]{{3}})"
    certain = rf"[+-]?(?:[0-9]+{m}[0-9]*|{m}[0-9]+)(?:[eE][+-]?[0-9]+)?|{group}+{m}[0-9]*|{group}{{2,}}"
    return [either, certain]


_KINDS = ("", ".?", ".", ",?", ",")
# The first alternative that fits decides, so each kind comes before those that would fit as well.
_NUMBER = re.compile(
    r"(?:[<>≤≥]=?\s*)?(?:"
    + "|".join(
        f"({pattern})"
        for pattern in [
            r"[+-]?[0-9]+(?:[eE][+-]?[0-9]+)?",
            *_alternatives(".", ","),
            *_alternatives(",", "."),
        ]
    )
    + ")"
)


@dataclass(frozen=True, slots=True)
class _Seen:
    text: str
    column: str
    row: int

    def __str__(self) -> str:
        return f"'{shortened(self.text)}' (column '{shortened(self.column)}', row {self.row})"


def find_decimal(grid: Grid, separator: str) -> tuple[str, bool]:
    """Return the decimal mark of a file, and whether any number shows it.

    Parameters
    ----------
    grid : Grid
        Cells are texts.
    separator : str
        A file separated by commas has decimal points: its decimal commas
        would be quoted, and are refused cell by cell.

    Raises
    ------
    InputError
        Some numbers have points and others commas, or all could be read with
        decimals as well as with separators between thousands.
    """
    if separator == ",":
        return ".", True
    seen: dict[str, _Seen] = {}
    for index, name in enumerate(grid.header):
        _look(grid, index, name, seen)
    if "." in seen and "," in seen:
        raise _mixture(grid, seen["."], seen[","])
    if "." in seen or "," in seen:
        return ("." if "." in seen else ","), True
    if ".?" in seen and ",?" in seen:
        raise _mixture(grid, seen[".?"], seen[",?"])
    # Semicolons come from countries with a decimal comma, where 1.234 is usually 1234.
    doubtful = seen.get(",?") or (seen.get(".?") if separator == ";" else None)
    if doubtful is not None:
        plain = re.sub("[.,]", "", doubtful.text)
        message = (
            f"Column '{shortened(doubtful.column)}': '{shortened(doubtful.text)}' can be read as "
            f"{shortened(doubtful.text.replace(',', '.'))} or as {shortened(plain)}, and no other number of the "
            "file decides."
        )
        raise InputError(Problem(message, grid.file, doubtful.row, _STATE))
    return ".", ".?" in seen


def _look(grid: Grid, index: int, name: str, seen: dict[str, _Seen]) -> None:
    """Note the first example of each kind, if most cells of the column are numbers, bounds or intervals."""
    cells = [cell.strip() if isinstance(cell := row.cells[index], str) else "" for row in grid.rows]
    first: dict[str, _Seen] = {}
    numbers = 0
    for i, match in enumerate(map(_NUMBER.fullmatch, cells)):
        if match is not None:
            parts = [match]
        elif ".." in cells[i] and "..." not in cells[i]:
            ends = [_NUMBER.fullmatch(end.strip()) for end in cells[i].split("..")]
            parts = [end for end in ends if end is not None]
            if len(parts) < len(ends):
                continue
        else:
            continue
        numbers += 1
        for part in parts:
            kind = _KINDS[(part.lastindex or 1) - 1]
            if kind and kind not in first:
                first[kind] = _Seen(part.group(part.lastindex or 0), name, grid.rows[i].number)
    if 2 * numbers > len(cells) - cells.count(""):
        for kind, example in first.items():
            seen.setdefault(kind, example)


def _mixture(grid: Grid, point: _Seen, comma: _Seen) -> InputError:
    message = f"The decimal mark is in doubt: {point} has a point, {comma} a comma."
    row = max(point.row, comma.row)
    return InputError(Problem(message, grid.file, row, f"Write all numbers alike, or {_lower(_STATE)}"))


def _lower(sentence: str) -> str:
    return sentence[0].lower() + sentence[1:]
