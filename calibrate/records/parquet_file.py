"""Parquet files, read with the optional pyarrow."""

from __future__ import annotations

import datetime
from decimal import Decimal
from typing import Any

from calibrate.errors import InputError, Problem
from calibrate.records.grid import Cell, Grid, Oddity, Row

MAX_CELLS = 20_000_000
"""A few bytes of a compressed file can stand for any number of rows."""

_UNREADABLE = "The file cannot be read as Parquet."
_SAVE_AGAIN = "Write it again as .parquet, or save the records as CSV UTF-8."
_INSTALL = (
    "Install the extra 'parquet' (pip install 'calibrate[parquet]'), or save the records as .csv or .xlsx."
)


def parquet_grid(data: bytes, file: str) -> Grid:
    """Return the cells of a Parquet file; its rows count from 1.

    Raises
    ------
    InputError
        pyarrow is not installed, the file is damaged or too large, or it has
        no rows.
    """
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        raise InputError(Problem("Parquet files need the package pyarrow.", file, None, _INSTALL)) from error
    try:
        with pq.ParquetFile(pa.BufferReader(data)) as plain:
            schema, meta = plain.schema_arrow, plain.metadata
        _check_size(meta, file)
        # A text that repeats is stored once; unpacked, a small file could fill the memory.
        texts = [f.name for f in schema if pa.types.is_string(f.type) or pa.types.is_binary(f.type)]
        with pq.ParquetFile(pa.BufferReader(data), read_dictionary=texts) as stream:
            table = stream.read(use_threads=False)
        columns = [_cells(column, pa) for column in table.columns]
    except InputError:
        raise
    except Exception as error:  # a damaged file fails in any part of the reader
        raise InputError(Problem(_UNREADABLE, file, None, _SAVE_AGAIN)) from error
    if not columns or not meta.num_rows:
        raise InputError(Problem("The file has no rows.", file))
    rows = tuple(Row(number, cells) for number, cells in enumerate(zip(*columns, strict=True), start=1))
    return Grid(file, None, None, tuple(str(name) for name in table.column_names), rows, note="Parquet")


def _check_size(meta: Any, file: str) -> None:
    groups = [meta.row_group(g) for g in range(meta.num_row_groups)]
    cells = sum(group.column(c).num_values for group in groups for c in range(group.num_columns))
    if max(cells, meta.num_rows) > MAX_CELLS:
        message = f"The file has {cells} cells in {meta.num_rows} rows; the limit is {MAX_CELLS} cells."
        raise InputError(Problem(message, file, None, "Write only the columns and rows that are needed."))


def _cells(column: Any, pa: Any) -> list[Cell | Oddity]:
    cells: list[Cell | Oddity] = []
    for chunk in column.chunks:
        if pa.types.is_dictionary(chunk.type):
            words = [_cell(value) for value in chunk.dictionary.to_pylist()]
            cells += [None if i is None else words[i] for i in chunk.indices.to_pylist()]
        else:
            cells += [_cell(value) for value in chunk.to_pylist()]
    return cells


def _cell(value: Any) -> Cell | Oddity:
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if isinstance(value, Decimal):
        return float(value)
    if isinstance(value, datetime.date | datetime.time | datetime.timedelta):
        return Oddity(str(value), "a date or time, not a number", "Choose a column of numbers.")
    return Oddity(
        type(value).__name__, "a nested or binary entry, not a number", "Choose a column of numbers."
    )
