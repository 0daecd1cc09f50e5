"""The order of testing and times of values: numbers or dates become ranks or seconds."""

from __future__ import annotations

import datetime
import re

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Problem
from calibrate.records.cells import Refusal, shortened, to_number
from calibrate.records.columns import find, numbers, problem, texts
from calibrate.records.grid import Cell, Grid, Oddity
from calibrate.units import Unit, parse_unit

_DATE = re.compile(r"\d{4}-\d{2}-\d{2}(?:[T ].*)?", re.ASCII)
_LIKE_DATE = re.compile(r"\d{1,4}[./-]\d{1,2}[./-]\d{1,4}(?: .*)?", re.ASCII)
_ALLOWED = "Allowed are numbers, or dates such as 2024-05-31 or 2024-05-31T14:30."


def order_ranks(grid: Grid, column: str, problems: list[Problem]) -> NDArray[np.float64]:
    """Return the ranks from 1 of a column of numbers or of ISO dates, shape (n,).

    Equal entries share the mean of their ranks. Entries that are neither, or
    a mixture of both, add problems.
    """
    before = len(problems)
    moments, _ = _read(grid, column, "the order of testing", problems)
    return np.arange(1.0, len(grid.rows) + 1) if len(problems) > before else _ranks(moments)


def read_times(grid: Grid, column: str, unit: Unit | None, problems: list[Problem]) -> NDArray[np.float64]:
    """Return a column of numbers or of ISO dates in seconds from an arbitrary moment, shape (n,).

    Parameters
    ----------
    unit : Unit, optional
        Of numbers; default years of 365.25 days. Dates take none.

    Notes
    -----
    Entries that are neither, a mixture of both, and dates beside a unit add problems.
    """
    moments, dates = _read(grid, column, "the time", problems)
    if not dates:
        return moments * (parse_unit("year") if unit is None else unit).factor
    if unit is not None:
        message = f"Column '{shortened(column)}' holds dates, which take no unit of time; got '{unit.text}'."
        problems.append(Problem(message, grid.file, grid.header_row, "Remove the unit of time."))
    return moments


def _read(grid: Grid, column: str, what: str, problems: list[Problem]) -> tuple[NDArray[np.float64], bool]:
    """Return numbers as they are, or dates in seconds, and whether they are dates; ``what`` is for messages."""
    index = find(grid, column)
    if not grid.rows:
        return np.array([]), False
    slips: list[Problem] = []
    first = grid.rows[0].cells[index]
    dates = _is_date(first) or isinstance(to_number(first, grid.notation), Refusal)
    if dates:
        moments = _moments(grid, index, what, slips)
    else:
        moments = numbers(grid, index, slips)
        slips = [Problem(p.message, p.file, p.line, _mixture(p)) for p in slips]
    problems += slips
    return moments, dates


def _mixture(slip: Problem) -> str:
    hint = f"{slip.suggestion} " if slip.suggestion else ""
    return f"{hint}The first entry is a number; all must be numbers, or all dates such as 2024-05-31."


def _is_date(cell: Cell | Oddity) -> bool:
    text = cell.text if isinstance(cell, Oddity) else cell
    return isinstance(text, str) and _DATE.fullmatch(text.strip()) is not None


def _moments(grid: Grid, index: int, what: str, slips: list[Problem]) -> NDArray[np.float64]:
    """Return seconds from an arbitrary moment."""
    start = datetime.datetime(1, 1, 1)
    zoned: bool | None = None
    seconds = np.zeros(len(grid.rows))
    for i, (row, text) in enumerate(zip(grid.rows, texts(grid, index), strict=True)):
        moment = _moment(text, what)
        if not isinstance(moment, Refusal):
            has_zone = moment.tzinfo is not None
            zoned = has_zone if zoned is None else zoned
            if zoned == has_zone:
                origin = start.replace(tzinfo=datetime.UTC) if has_zone else start
                seconds[i] = (moment - origin).total_seconds()
                continue
            moment = Refusal(
                f"'{text}' and entries above differ in stating a time zone.", "State all or none."
            )
        slips.append(problem(grid, row.number, grid.header[index], moment))
    return seconds


def _moment(text: str, what: str) -> datetime.datetime | Refusal:
    if not text:
        return Refusal("the cell is empty.", f"Fill it: {what} must be known for every row.")
    if _DATE.fullmatch(text):
        try:
            return datetime.datetime.fromisoformat(text)
        except ValueError:
            return Refusal(f"'{shortened(text)}' is not a date of the calendar.", _ALLOWED)
    what = "is a date in another order than year-month-day" if _LIKE_DATE.fullmatch(text) else "is no date"
    return Refusal(f"'{shortened(text)}' {what}.", _ALLOWED)


def _ranks(values: NDArray[np.float64]) -> NDArray[np.float64]:
    _, inverse, counts = np.unique(values, return_inverse=True, return_counts=True)
    last = np.cumsum(counts)
    return np.asarray((last - 0.5 * (counts - 1))[inverse], dtype=np.float64)
