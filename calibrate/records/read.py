"""Read a file of records as one sample, or as a table, with every slip told by row and column."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.provenance import sha256_of
from calibrate.records.blocks import below_detection, read_coverage
from calibrate.records.cells import as_text, shortened
from calibrate.records.columns import find, labels, numbers, row_numbers
from calibrate.records.derived import Derivation, derivation, derive
from calibrate.records.exclusions import leave_out
from calibrate.records.files import read_grid
from calibrate.records.grid import Grid, is_empty, limited
from calibrate.records.normalise import normalise, read_ratios
from calibrate.records.observations import Observations
from calibrate.records.options import DEFAULTS, ReadOptions
from calibrate.records.ordering import order_ranks, read_times
from calibrate.records.sample import Sample, Table
from calibrate.records.text_form import TextForm
from calibrate.records.value_columns import check_unit_labels, read_bounds, row_factors
from calibrate.units import ONE, Unit

_Scalar = TypeVar("_Scalar", bound=np.generic)
_Array = NDArray[np.float64]

_FOUND = TextForm()


def read_column(
    path: Path,
    column: str,
    *,
    unit: Unit,
    display: str | None = None,
    sheet: str | None = None,
    options: ReadOptions = DEFAULTS,
) -> Sample:
    """Read one column of numbers, or of numbers and bounds.

    Parameters
    ----------
    path : Path
        A CSV file, an XLSX workbook or a Parquet file. The first row of a CSV
        file or sheet holds the column names.
    column : str
        Name of the column, exactly.
    unit : Unit
        Unit of the numbers in the file.
    display : str, optional
        How messages name the file; default ``path`` as given.
    sheet : str, optional
        Sheet of a workbook; default the first.
    options : ReadOptions, optional
        Censoring, truncation, labels, exclusions, other units, normalisation.

    Raises
    ------
    InputError
        The file cannot be read, a column is unknown or named twice, a cell is
        empty or not a finite number (nor, where the caller allows it, a
        bound), or an option does not fit the file. Each problem of a cell
        carries file and row.
    """
    return _read(path, _Plan(column, unit, (column,), None), display, sheet, options)


def read_value(
    path: Path,
    value: str,
    *,
    name: str,
    unit: Unit | None = None,
    display: str | None = None,
    sheet: str | None = None,
    options: ReadOptions = DEFAULTS,
) -> Sample:
    """Read a value derived from columns by an expression, such as ``measured / nominal``.

    Parameters
    ----------
    path, display, sheet
        As in `read_column`.
    value : str
        Expression in the column names.
    name : str
        Name of the sample.
    unit : Unit, optional
        Unit of the result; default the SI unit that the expression implies.
    options : ReadOptions, optional
        ``units`` states the units of the columns; ``measured`` says of which
        of them ``censored`` and ``unit_by`` speak.

    Raises
    ------
    InputError
        As `read_column`; also parts of the expression that do not agree in
        dimension, a result that is not finite in some row, or one that does
        not rise or fall with a censored column.
    """
    plan = derivation(value, options.units, unit)
    return _read(path, _Plan(name, plan.unit, plan.columns, plan), display, sheet, options)


@dataclass(frozen=True, slots=True)
class _Plan:
    """What to read: one column as it stands, or a derivation from several."""

    name: str
    unit: Unit
    columns: tuple[str, ...]
    derivation: Derivation | None

    def unit_of(self, column: str, options: ReadOptions) -> Unit:
        return self.unit if self.derivation is None else options.units.get(column, ONE)


def _read(path: Path, plan: _Plan, display: str | None, sheet: str | None, options: ReadOptions) -> Sample:
    file = str(path) if display is None else display
    measured = _measured(plan, options)
    whole = read_grid(path, file, sheet, options.form)
    _check_units(whole, plan, options)
    for column in plan.columns:
        find(whole, column)
    if options.unit_by is not None:
        check_unit_labels(whole, options.unit_by)
    grid, excluded = leave_out(whole, options.exclude, plan.columns)

    problems: list[Problem] = []
    bounds = _column_bounds(grid, plan, measured, options, problems)
    marks = {
        role: _frozen(labels(grid, column, problems, gaps=role in {"mode", "specimen"}))
        for role, column in options.roles.items()
    }
    order = None if options.order is None else _frozen(order_ranks(grid, options.order, problems))
    times = (
        None if options.time is None else _frozen(read_times(grid, options.time, options.time_unit, problems))
    )
    coverage = None if options.coverage is None else _frozen(read_coverage(grid, options.coverage, problems))
    ratios = read_ratios(grid, options.normalise, options.units, problems)
    _stop_if_any(problems, file)
    lower, upper = _bounds_of_value(grid, plan, bounds, problems)
    _stop_if_any(problems, file)
    lower, upper = below_detection(lower, upper, options.detection_limit)
    _check_limits(grid, plan, lower, upper, options, problems)
    _stop_if_any(problems, file)

    observations = Observations(lower, upper, options.above, options.below)
    normalisation = None
    if options.normalise:
        observations, normalisation = normalise(grid, observations, options.normalise, ratios)
    for array in (observations.lower, observations.upper):
        _frozen(array)
    values = observations.values if observations.censored else observations.lower
    return Sample(
        plan.name,
        _frozen(values),
        plan.unit,
        file,
        grid.sheet,
        _frozen(row_numbers(grid)),
        sha256_of(path),
        observations,
        marks,
        order,
        excluded,
        grid.note,
        "" if plan.derivation is None else plan.derivation.text,
        normalisation,
        times,
        coverage,
    )


def _measured(plan: _Plan, options: ReadOptions) -> str | None:
    """Return the column of which the flag column and ``unit_by`` speak."""
    if options.measured is not None and options.measured not in plan.columns:
        known = did_you_mean(options.measured, plan.columns)
        message = f"'{options.measured}', stated as measured, is no column of the value."
        raise InputError(Problem(message, suggestion=known))
    if options.measured is not None or len(plan.columns) == 1:
        return options.measured or plan.columns[0]
    asked = [name for name in ("censored", "unit_by") if getattr(options, name) is not None]
    if asked:
        message = f"The value has the columns {', '.join(plan.columns)}; of which does '{asked[0]}' speak?"
        raise InputError(Problem(message, suggestion=f"State measured = '{plan.columns[0]}', for example."))
    return None


def _check_units(grid: Grid, plan: _Plan, options: ReadOptions) -> None:
    used = [covariate.column for covariate in options.normalise]
    if plan.derivation is not None:
        used += plan.columns
    for column in options.units:
        if column not in used:
            message = f"A unit is stated for column '{column}', which is not used."
            raise InputError(Problem(message, grid.file, None, did_you_mean(column, used)))


def _column_bounds(
    grid: Grid, plan: _Plan, measured: str | None, options: ReadOptions, problems: list[Problem]
) -> dict[str, tuple[_Array, _Array]]:
    """Return the bounds of each column of the value, in the column's unit."""
    found = {}
    for column in plan.columns:
        lower, upper = read_bounds(grid, column, options, problems, flagged=column == measured)
        if options.unit_by is not None and column == measured:
            factors = row_factors(grid, column, plan.unit_of(column, options), options.unit_by)
            lower, upper = lower * factors, upper * factors
        if plan.derivation is not None:
            factor = plan.unit_of(column, options).factor
            lower, upper = lower * factor, upper * factor
        found[column] = lower, upper
    return found


def _bounds_of_value(
    grid: Grid, plan: _Plan, bounds: dict[str, tuple[_Array, _Array]], problems: list[Problem]
) -> tuple[_Array, _Array]:
    if plan.derivation is None:
        return bounds[plan.columns[0]]
    return derive(plan.derivation, grid, bounds, problems)


def _check_limits(
    grid: Grid, plan: _Plan, lower: _Array, upper: _Array, options: ReadOptions, problems: list[Problem]
) -> None:
    """Refuse specimens that the truncation says could not have entered the sample."""
    unit = f" {plan.unit.text}" if plan.unit.text else ""
    for side, limit, value, outside in (
        ("above", options.above, upper, upper <= options.above),
        ("below", options.below, lower, lower >= options.below),
    ):
        for i in np.flatnonzero(outside):
            message = (
                f"'{plan.name}' is {value[i]:g}{unit}, but only specimens {side} {limit:g}{unit} are said to have "
                "entered the sample."
            )
            suggestion = f"Correct the limit '{side}', or exclude the row with its reason."
            problems.append(Problem(message, grid.file, grid.rows[i].number, suggestion))


def _stop_if_any(problems: list[Problem], file: str) -> None:
    if problems:
        raise InputError(limited(sorted(problems, key=lambda p: p.line or 0), file))


def read_table(
    path: Path, *, display: str | None = None, sheet: str | None = None, form: TextForm = _FOUND
) -> Table:
    """Read all columns; a column in which every cell is a number becomes float64, any other text.

    Parameters
    ----------
    path, display, sheet
        As in `read_column`.
    form : TextForm, optional
        What is stated about a CSV file rather than found.

    Raises
    ------
    InputError
        The file cannot be read, a column has no name or the name of another,
        or a cell is empty. Each problem carries file and row.
    """
    file = str(path) if display is None else display
    grid = read_grid(path, file, sheet, form)
    problems = _name_problems(grid)
    columns: dict[str, NDArray[np.float64] | NDArray[np.object_]] = {}
    not_numbers: dict[str, tuple[Problem, ...]] = {}
    for index, name in enumerate(grid.header):
        cells = [row.cells[index] for row in grid.rows]
        if not name and all(is_empty(c) for c in cells):
            continue  # a spare column between or before the table's own
        problems += [
            Problem(f"Column '{shortened(name)}': the cell is empty.", file, row.number, "Fill it.")
            for row, cell in zip(grid.rows, cells, strict=True)
            if is_empty(cell)
        ]
        slips: list[Problem] = []
        values = numbers(grid, index, slips)
        if slips:
            columns[name] = np.array([as_text(c) for c in cells], dtype=object)
            not_numbers[name] = tuple(limited(slips, file))
        else:
            columns[name] = values
        columns[name].flags.writeable = False
    if problems:
        raise InputError(limited(problems, file))
    return Table(
        columns, _frozen(row_numbers(grid)), file, grid.sheet, sha256_of(path), not_numbers, grid.note
    )


def _name_problems(grid: Grid) -> list[Problem]:
    problems = []
    before: set[str] = set()
    for index, name in enumerate(grid.header):
        if not name and any(not is_empty(row.cells[index]) for row in grid.rows):
            message = f"Column {index + 1} has no name."
            problems.append(Problem(message, grid.file, grid.header_row, "Name it, or delete its cells."))
        elif name and name in before:
            message = f"Column '{shortened(name)}' occurs more than once."
            problems.append(Problem(message, grid.file, grid.header_row, "Give each column its own name."))
        before.add(name)
    return problems


def _frozen(array: NDArray[_Scalar]) -> NDArray[_Scalar]:
    array.flags.writeable = False
    return array
