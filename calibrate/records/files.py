"""Open a file of records, of whatever kind, as a grid of cells."""

from __future__ import annotations

import dataclasses
from pathlib import Path

from calibrate.errors import InputError, Problem, nearest
from calibrate.records.csv_file import csv_grid
from calibrate.records.grid import Grid, make_grid
from calibrate.records.parquet_file import parquet_grid
from calibrate.records.text_form import TextForm
from calibrate.records.xlsx_file import xlsx_rows

MAX_BYTES = 100_000_000
"""Largest file that is read."""

_CSV = frozenset({".csv", ".txt", ".tsv"})
_XLSX = frozenset({".xlsx", ".xlsm"})
_PARQUET = frozenset({".parquet"})


def read_grid(path: Path, file: str, sheet: str | None, form: TextForm) -> Grid:
    """Return the cells of a file.

    Parameters
    ----------
    path : Path
    file : str
        How messages name it.
    sheet : str or None
        Sheet of a workbook; None is the first.
    form : TextForm
        What is stated about a CSV file.

    Raises
    ------
    InputError
        The file cannot be opened or read.
    """
    data = _bytes(path, file)
    suffix = path.suffix.casefold()
    if suffix in _XLSX:
        _refuse_form(form, "An XLSX workbook", file)
        rows, name = xlsx_rows(data, file, sheet)
        return dataclasses.replace(make_grid(rows, file, name), note="XLSX")
    kind = "Parquet" if suffix in _PARQUET else "CSV"
    if suffix in _CSV | _PARQUET and sheet is not None:
        raise InputError(Problem(f"A {kind} file has no sheets, but sheet '{sheet}' is asked for.", file))
    if suffix in _CSV:
        return csv_grid(data, file, form)
    if suffix in _PARQUET:
        _refuse_form(form, "A Parquet file", file)
        return parquet_grid(data, file)
    named = f"A file of kind '{path.suffix}'" if path.suffix else "A file without a suffix"
    raise InputError(
        Problem(f"{named} cannot be read.", file, None, "Save it as .csv (UTF-8), .xlsx or .parquet.")
    )


def _refuse_form(form: TextForm, kind: str, file: str) -> None:
    stated = [f.name for f in dataclasses.fields(form) if getattr(form, f.name) is not None]
    if stated:
        message = f"{kind} has no {' and no '.join(stated)} to be stated; only a CSV file has."
        raise InputError(Problem(message, file, None, "Leave it out."))


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
    kinds = _CSV | _XLSX | _PARQUET
    try:
        there = sorted(p.name for p in path.parent.iterdir() if p.suffix.casefold() in kinds)
    except OSError:
        return Problem(f"The file does not exist, nor does its folder '{path.parent}'.", file)
    close = nearest(path.name, there)
    suggestion = f"Did you mean '{close}'?" if close else None
    return Problem("The file does not exist.", file, None, suggestion)
