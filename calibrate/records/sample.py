"""What reading a file yields: one column as a sample, or all columns as a table."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.units import Unit


@dataclass(frozen=True, slots=True)
class Sample:
    """The values of one quantity, and where they came from.

    Attributes
    ----------
    name : str
        Name of the column.
    values : ndarray, shape (n,)
        As written in the file, in ``unit``; finite; in file order; read-only.
    unit : Unit
        Unit of ``values``.
    file : str
        The file as the user named it.
    sheet : str or None
        Sheet of a workbook; None for CSV.
    rows : ndarray of int, shape (n,)
        Row of each value, from 1, as a spreadsheet or an editor numbers it
        (the row with the column names counts); read-only.
    sha256 : str
        Digest of the file.
    """

    name: str
    values: NDArray[np.float64]
    unit: Unit
    file: str
    sheet: str | None
    rows: NDArray[np.int64]
    sha256: str

    @property
    def n(self) -> int:
        """Number of values."""
        return int(self.values.size)

    @property
    def si_values(self) -> NDArray[np.float64]:
        """The values in coherent SI units, shape (n,)."""
        return self.values * self.unit.factor


@dataclass(frozen=True, slots=True)
class Table:
    """All columns of a file.

    Attributes
    ----------
    columns : mapping of str to ndarray, shape (n,)
        In file order. A column in which every cell is a finite number is
        float64; any other is an object array of str, as written.
    rows : ndarray of int, shape (n,)
        Row numbers as in `Sample`.
    file, sheet, sha256
        As in `Sample`.
    not_numbers : mapping of str to tuple of Problem
        For each column of text, the cells that are not numbers, in row order:
        whoever needs numbers from that column can say where they fail.
    """

    columns: Mapping[str, NDArray[np.float64] | NDArray[np.object_]]
    rows: NDArray[np.int64]
    file: str
    sheet: str | None
    sha256: str
    not_numbers: Mapping[str, tuple[Problem, ...]]

    @property
    def n(self) -> int:
        """Number of rows below the column names."""
        return int(self.rows.size)

    def is_number(self, name: str) -> bool:
        """Whether every cell of the column is a finite number."""
        return name in self.columns and name not in self.not_numbers

    def numbers(self, name: str) -> NDArray[np.float64]:
        """Return a column of numbers, shape (n,).

        Raises
        ------
        InputError
            If there is no such column, or cells of it are not numbers: each
            is named with its row.
        """
        if name not in self.columns:
            message = f"There is no column '{name}'."
            raise InputError(Problem(message, self.file, None, did_you_mean(name, self.columns)))
        if name in self.not_numbers:
            raise InputError(self.not_numbers[name])
        return np.asarray(self.columns[name], dtype=np.float64)
