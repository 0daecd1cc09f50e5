"""CSV files, read as they are: comma, UTF-8, the row of column names first."""

from __future__ import annotations

import codecs
import csv
import io

from calibrate.errors import InputError, Problem
from calibrate.records.grid import Row

_SAVE_AS = "Save the file as 'CSV UTF-8 (comma delimited)'."


def csv_rows(data: bytes, file: str) -> list[Row]:
    """Return the rows of a CSV file.

    A row carries the number of its first line in the file.

    Raises
    ------
    InputError
        Not UTF-8, not text, quotes that do not close, or separated by
        something other than commas.
    """
    text = _decode(data, file)
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
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
    _check_separator(rows, file)
    return rows


def _decode(data: bytes, file: str) -> str:
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        raise InputError(Problem("The file is in UTF-16, not in UTF-8.", file, None, _SAVE_AS))
    data = data.removeprefix(codecs.BOM_UTF8)
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        byte = f"0x{data[error.start]:02X}"
        message = f"The file is not in UTF-8: byte {byte} in this line has no meaning there."
        raise InputError(Problem(message, file, line, _SAVE_AS)) from error
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        raise InputError(
            Problem("The file is not a text file: it contains null bytes.", file, line, _SAVE_AS)
        )
    return text


def _check_separator(rows: list[Row], file: str) -> None:
    if not rows or len(rows[0].cells) != 1 or not isinstance(rows[0].cells[0], str):
        return
    for mark, name in ((";", "semicolons"), ("\t", "tabulators"), ("|", "bars")):
        if mark in rows[0].cells[0]:
            message = f"The columns seem to be separated by {name}; they must be separated by commas."
            suggestion = _SAVE_AS + " Numbers then need a decimal point, not a comma."
            raise InputError(Problem(message, file, rows[0].number, suggestion))
