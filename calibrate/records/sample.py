"""What reading a file yields: one column as a sample, or all columns as a table."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.records.columns import which_column
from calibrate.records.normalise import Normalisation
from calibrate.records.observations import Observations
from calibrate.units import Unit


@dataclass(frozen=True, slots=True)
class Exclusion:
    """A row that was left out: its row in the file, why, and what stood in the cells of the value."""

    row: int
    reason: str
    value_text: str


@dataclass(frozen=True, slots=True)
class Sample:
    """The values of one quantity, and where they came from.

    Attributes
    ----------
    name : str
        Name of the column, or of the derived value.
    values : ndarray, shape (n,)
        In ``unit``; finite; in file order; read-only. As written in the file
        where the sample is complete and nothing was converted; of a specimen
        known by bounds the finite bound, or the middle of its interval.
    unit : Unit
        Unit of ``values`` and ``observations``.
    file : str
        The file as the user named it.
    sheet : str or None
        Sheet of a workbook; None for other files.
    rows : ndarray of int, shape (n,)
        Row of each value, from 1, as a spreadsheet or an editor numbers it
        (the row with the column names counts); read-only. In a Parquet file
        rows of data count from 1.
    sha256 : str
        Digest of the file.
    observations : Observations
        What is known of each specimen, and the truncation limits.
    labels : mapping of str to ndarray of str, shape (n,)
        By role: ``lot``, ``laboratory``, ``mode``, ``specimen``, as far as asked for.
    order : ndarray, shape (n,), or None
        Ranks in the order of testing, from 1; ties share their mean.
    times : ndarray, shape (n,), or None
        When each value occurred, in seconds from an arbitrary moment.
    coverage : ndarray, shape (n,), or None
        Part of each block that was observed.
    excluded : tuple of Exclusion
        What was left out, in row order.
    format_note : str
        How the file is written, such as "semicolons, decimal comma, Windows-1252".
    formula : str
        The expression of a derived value, else empty.
    normalisation : Normalisation or None
        How the values were brought to reference conditions.
    """

    name: str
    values: NDArray[np.float64]
    unit: Unit
    file: str
    sheet: str | None
    rows: NDArray[np.int64]
    sha256: str
    observations: Observations
    labels: Mapping[str, NDArray[np.object_]] = field(default_factory=dict)
    order: NDArray[np.float64] | None = None
    excluded: tuple[Exclusion, ...] = ()
    format_note: str = ""
    formula: str = ""
    normalisation: Normalisation | None = None
    times: NDArray[np.float64] | None = None
    coverage: NDArray[np.float64] | None = None

    @property
    def n(self) -> int:
        """Number of values."""
        return int(self.values.size)

    @property
    def si_values(self) -> NDArray[np.float64]:
        """The values in coherent SI units, shape (n,)."""
        return self.values * self.unit.factor

    @property
    def si_observations(self) -> Observations:
        """The observations in coherent SI units."""
        return self.observations.scaled(self.unit.factor)


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
    format_note : str
        As in `Sample`.
    """

    columns: Mapping[str, NDArray[np.float64] | NDArray[np.object_]]
    rows: NDArray[np.int64]
    file: str
    sheet: str | None
    sha256: str
    not_numbers: Mapping[str, tuple[Problem, ...]]
    format_note: str = ""

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
            raise InputError(Problem(message, self.file, None, which_column(name, self.columns)))
        if name in self.not_numbers:
            raise InputError(self.not_numbers[name])
        return np.asarray(self.columns[name], dtype=np.float64)
