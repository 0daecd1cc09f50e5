"""XLSX workbooks, the stored values of one sheet; formulas are never computed here."""

from __future__ import annotations

import datetime
import io
import warnings
import zipfile
from itertools import zip_longest
from typing import Any

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.records.grid import Cell, Oddity, Row

MAX_UNPACKED = 400_000_000
"""Bytes; a workbook is a compressed archive and may hide a thousand times its size."""

_UNREADABLE = "The file cannot be read as an XLSX workbook."
_SAVE_AGAIN = "Open it in a spreadsheet program and save it again as .xlsx, or save the sheet as CSV UTF-8."


def xlsx_rows(data: bytes, file: str, sheet: str | None) -> tuple[list[Row], str]:
    """Return the rows of one sheet and the name of that sheet.

    Parameters
    ----------
    data : bytes
        The file.
    file : str
        Its name, for messages.
    sheet : str or None
        Name of the sheet; None is the first.

    Raises
    ------
    InputError
        Not a workbook, too large when unpacked, unknown sheet.
    """
    _check_archive(data, file)
    with warnings.catch_warnings():
        # openpyxl warns of features that it drops (validation, drawings); none of them is a value.
        warnings.simplefilter("ignore")
        try:
            return _read(data, file, sheet)
        except InputError:
            raise
        except Exception as error:  # a damaged workbook fails in any part of zip, XML or openpyxl
            raise InputError(Problem(_UNREADABLE, file, None, _SAVE_AGAIN)) from error


def _check_archive(data: bytes, file: str) -> None:
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            unpacked = sum(info.file_size for info in archive.infolist())
            names = set(archive.namelist())
    except zipfile.BadZipFile as error:
        raise InputError(Problem(_UNREADABLE, file, None, _SAVE_AGAIN)) from error
    if "EncryptedPackage" in names or "[Content_Types].xml" not in names:
        raise InputError(Problem(_UNREADABLE, file, None, _SAVE_AGAIN))
    if unpacked > MAX_UNPACKED:
        message = (
            f"The workbook unpacks to {unpacked / 1e6:.0f} MB; the limit is {MAX_UNPACKED / 1e6:.0f} MB."
        )
        raise InputError(Problem(message, file, None, "Save the sheet as CSV UTF-8."))


def _read(data: bytes, file: str, sheet: str | None) -> tuple[list[Row], str]:
    import openpyxl

    book = openpyxl.load_workbook(io.BytesIO(data), read_only=True, data_only=True)
    try:
        name = _sheet_name(book, file, sheet)
        rows = _rows(book[name])
    finally:
        book.close()
    if any(cell is None for row in rows for cell in row.cells):
        rows = _with_formulas(data, name, rows)
    return rows, name


def _sheet_name(book: Any, file: str, sheet: str | None) -> str:
    names = [s.title for s in book.worksheets]
    if not names:
        raise InputError(Problem("The workbook has no sheet with cells.", file))
    if sheet is None:
        return str(names[0])
    if sheet not in names:
        message = f"The workbook has no sheet '{sheet}'."
        raise InputError(Problem(message, file, None, did_you_mean(sheet, names)))
    return sheet


def _rows(worksheet: Any) -> list[Row]:
    # The stored dimension is often wrong in files that other programs wrote.
    worksheet.reset_dimensions()
    rows = [tuple(_cell(c) for c in cells) for cells in worksheet.iter_rows()]
    # A sheet is a rectangle; rows are stored only as far as they hold something.
    width = max((len(cells) for cells in rows), default=0)
    return [
        Row(number, (*cells, *(None,) * (width - len(cells)))) for number, cells in enumerate(rows, start=1)
    ]


def _cell(cell: Any) -> Cell | Oddity:
    value = cell.value
    if value is None or isinstance(value, bool | int | float):
        return value
    if cell.data_type == "e":
        return Oddity(str(value), "the error of a formula", "Repair the formula or delete the row.")
    if isinstance(value, datetime.date | datetime.time | datetime.timedelta):
        return Oddity(str(value), "a date or time, not a number", "Set the cell's format to number.")
    return str(value)


def _with_formulas(data: bytes, name: str, rows: list[Row]) -> list[Row]:
    """Tell formulas without a stored value from empty cells: both read as nothing."""
    import openpyxl

    book = openpyxl.load_workbook(io.BytesIO(data), read_only=True, data_only=False)
    try:
        worksheet = book[name]
        worksheet.reset_dimensions()
        typed = [[_formula(c) for c in cells] for cells in worksheet.iter_rows()]
    finally:
        book.close()
    return [
        Row(row.number, tuple(f if c is None and f else c for c, f in zip_longest(row.cells, formulas)))
        for row, formulas in zip(rows, typed, strict=True)
    ]


def _formula(cell: Any) -> Oddity | None:
    if cell.data_type != "f":
        return None
    return Oddity(
        str(cell.value),
        "a formula whose result is not stored in the file",
        "Open the file in a spreadsheet program and save it, or write the value.",
    )
