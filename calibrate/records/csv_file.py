"""CSV files: separator, decimal mark and encoding are found and told, or refused if in doubt."""

from __future__ import annotations

import csv
import dataclasses
import io
from collections import Counter

from calibrate.errors import InputError, Problem
from calibrate.records.decimals import find_decimal
from calibrate.records.grid import Grid, Row, make_grid
from calibrate.records.notation import COMMA, POINT
from calibrate.records.text_form import SEPARATORS, TextForm, decode

_DECIMALS = {".": "decimal point", ",": "decimal comma"}


def csv_grid(data: bytes, file: str, form: TextForm) -> Grid:
    """Return the cells of a CSV file as text, and how its numbers are written.

    A row carries the number of its first line in the file.

    Raises
    ------
    InputError
        Not text, quotes that do not close, not a rectangle, or a separator,
        decimal mark or encoding that is in doubt.
    """
    text, encoding = decode(data, file, form.encoding)
    separator = form.separator or _find_separator(text, file)
    grid = make_grid(_rows(text, file, separator), file, None)
    decimal, shown = (form.decimal, True) if form.decimal else find_decimal(grid, separator)
    columns = SEPARATORS[separator] if len(grid.header) > 1 else "one column"
    note = ", ".join([columns, *([_DECIMALS[decimal]] if shown else []), encoding])
    return dataclasses.replace(grid, notation=POINT if decimal == "." else COMMA, note=note)


def _rows(text: str, file: str, separator: str) -> list[Row]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    rows: list[Row] = []
    line = 1
    try:
        for cells in reader:
            rows.append(Row(line, tuple(cells)))
            line = reader.line_num + 1
    except csv.Error as error:
        what = str(error)
        if "field larger" in what:
            what = "a cell has more than 131072 characters"
        elif "unexpected end" in what:
            what = "a quotation mark opened in this row is never closed"
        raise InputError(Problem(f"This row cannot be read as CSV: {what}.", file, line)) from error
    return rows


def _find_separator(text: str, file: str) -> str:
    """Return the separator that the column names show and that makes the file a rectangle."""
    marks = _marks_of_header(text)
    there = [mark for mark in SEPARATORS if marks[mark]]
    if not there and marks["|"]:
        message = "The columns seem to be separated by bars; commas, semicolons and tabulators are read."
        raise InputError(Problem(message, file, 1, "Save the file as 'CSV UTF-8 (comma delimited)'."))
    if len(there) == 1:
        return there[0]
    fitting = [mark for mark in there or SEPARATORS if _fits(text, file, mark)]
    if len(fitting) > 1 and there:
        first, second = (SEPARATORS[mark] for mark in fitting[:2])
        message = f"The separator is in doubt: {first} and {second} both divide every row alike."
        suggestion = "State separator = ',', ';' or '\\t' for this file."
        raise InputError(Problem(message, file, 1, suggestion))
    if fitting:
        return fitting[0]
    return max(there, key=lambda mark: marks[mark], default=",")


def _marks_of_header(text: str) -> Counter[str]:
    """Count the marks outside quotes in the first row."""
    marks: Counter[str] = Counter()
    quoted = False
    for character in text:
        if character == '"':
            quoted = not quoted
        elif not quoted:
            if character in "\r\n":
                break
            marks[character] += 1
    return marks


def _fits(text: str, file: str, separator: str) -> bool:
    try:
        make_grid(_rows(text, file, separator), file, None)
    except InputError:
        return False
    return True
