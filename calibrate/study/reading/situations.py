"""The design situations of a study: a grid of axes or a table, derived quantities, weights."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, did_you_mean
from calibrate.expressions import Expression
from calibrate.records import Table, read_table
from calibrate.situations import Axis, Situations, full_factorial, normalised_weights
from calibrate.study.model import Quantity
from calibrate.study.paths import resolve_inside
from calibrate.study.reading import schema
from calibrate.study.reading.context import Reading
from calibrate.study.reading.definitions import Definition
from calibrate.study.reading.entries import read_entry, read_plain
from calibrate.study.reading.grid import MAX_SITUATIONS, read_axis
from calibrate.study.reading.names import WEIGHTS, NameSpace
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import Value, read_unit, read_value, value_dimension
from calibrate.units import DIMENSIONLESS, ONE, Unit, si_unit

_HERE: Place = ("situations",)
_TABLE: Place = ("situations", "table")
_WEIGHT: Place = ("situations", "weight")

Column = NDArray[np.float64] | NDArray[np.object_]


@dataclass(slots=True)
class Grid:
    """Axes or table columns, before anything is computed from them; ``n`` is None where that failed."""

    content: schema.SituationsSection
    n: int | None = 1
    columns: dict[str, Column] = field(default_factory=dict)
    units: dict[str, Unit] = field(default_factory=dict)
    axes: tuple[Axis, ...] = ()
    table: Table | None = None
    descriptions: dict[str, str] = field(default_factory=dict)

    @property
    def numbers(self) -> dict[str, NDArray[np.float64]]:
        """Columns of numbers in SI units."""
        return {k: np.asarray(v, dtype=np.float64) for k, v in self.columns.items() if v.dtype.kind == "f"}


def read_grid(reading: Reading, names: NameSpace, raw: Any) -> Grid:
    """Read axes or table and declare their names, without units' dimensions where they are faulty."""
    entry = read_entry(reading, schema.SituationsSection, {} if raw is None else raw, _HERE)
    grid = Grid(entry.content or schema.SituationsSection())
    content = grid.content
    if not entry.sound:
        names.incomplete = True
        grid.n = None
    if content.table is not None and content.axes is not None:
        reading.raw_problem(
            "situations has both 'table' and 'axes'; one excludes the other.",
            ("situations", "axes"),
            "Keep one. A table may hold what axes would give as columns.",
        )
        grid.n = None
    if content.axes is not None:
        _read_axes(reading, names, content.axes, grid)
    if content.table is not None:
        _read_table(reading, names, content, grid)
    elif content.units and "table" not in entry.dropped:
        reading.raw_problem(
            "situations.units gives units of table columns, but there is no table.",
            ("situations", "units"),
            'The unit of an axis stands in the axis: { values = [1, 2], unit = "mm" }.',
        )
    return grid


def _read_axes(reading: Reading, names: NameSpace, raw: Mapping[str, Any], grid: Grid) -> None:
    if not raw:
        reading.problem("holds no axis.", ("situations", "axes"), "Leave it out for a single situation.")
    axes: list[Axis] = []
    for name, axis_raw in raw.items():
        declared = names.declare(name, "axis", ("situations", "axes", name))
        axis, description = read_axis(reading, name, axis_raw)
        if axis is None or not declared:
            grid.n = None
            continue
        names.set_dimension(name, axis.unit.dimension)
        axes.append(axis)
        grid.units[name] = axis.unit
        if description:
            grid.descriptions[name] = description
    count = math.prod(len(a.values) for a in axes)
    if count > MAX_SITUATIONS:
        sizes = " x ".join(str(len(a.values)) for a in axes)
        reading.problem(
            f"gives {sizes} = {count:,} situations; at most {MAX_SITUATIONS:,} are possible.",
            ("situations", "axes"),
            "Use fewer values.",
        )
        grid.n = None
    if grid.n is None:
        return
    grid.axes = tuple(axes)
    grid.columns.update(full_factorial(axes))
    grid.n = count


def _read_table(reading: Reading, names: NameSpace, content: schema.SituationsSection, grid: Grid) -> None:
    assert content.table is not None
    try:
        path = resolve_inside(
            content.table, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
        table = read_table(path, display=content.table, sheet=content.sheet)
    except InputError as error:
        reading.collect(error, _TABLE)
        names.incomplete = True
        grid.n = None
        return
    grid.table = table
    if grid.n is not None:
        grid.n = table.n
    if table.n > MAX_SITUATIONS:
        reading.problem(f"has {table.n:,} rows; at most {MAX_SITUATIONS:,} are possible.", _TABLE)
        grid.n = None
    units = _units_of_columns(reading, content, table)
    for name in table.columns:
        kind = "column" if table.is_number(name) else "label"
        if not names.declare(name, kind, _TABLE):
            grid.n = None
            continue
        unit = units.get(name, ONE)
        if kind == "label":
            _label_column(reading, names, table, name, grid, has_unit=name in units)
        elif unit is not None:
            names.set_dimension(name, unit.dimension)
            grid.units[name] = unit
            grid.columns[name] = table.numbers(name) * unit.factor


def _label_column(
    reading: Reading, names: NameSpace, table: Table, name: str, grid: Grid, *, has_unit: bool
) -> None:
    slips = table.not_numbers[name]
    if has_unit:
        reading.collect(InputError(slips), _TABLE)
        names.refused.add(name)
        grid.n = None
    elif len(slips) < table.n:
        names.names[name].note = f"Not all of its cells are numbers: {slips[0]}"
    grid.columns[name] = np.asarray(table.columns[name], dtype=object)
    grid.units[name] = ONE


def _units_of_columns(
    reading: Reading, content: schema.SituationsSection, table: Table
) -> dict[str, Unit | None]:
    """Return the unit of each column that has one; None stands for a faulty one."""
    units: dict[str, Unit | None] = {}
    for name, raw in (content.units or {}).items():
        place = ("situations", "units", name)
        if name not in table.columns:
            reading.raw_problem(
                f"situations.units names '{name}', but the table '{content.table}' has no such column.",
                place,
                did_you_mean(name, table.columns),
            )
            continue
        text = read_plain(reading, "text", raw, place)
        units[name] = read_unit(reading, text, place)
    return units


# ------------------------------------------------------------- what is computed


def read_weight(reading: Reading, names: NameSpace, grid: Grid) -> Value | None:
    """Read the weight; None with problems."""
    value = read_value(reading, grid.content.weight, _WEIGHT)
    if value is None:
        return None
    dimension = value_dimension(names, value, _WEIGHT, WEIGHTS)
    if dimension is None:
        return None
    # A single column counts as it is: 12 tonnes against 6 tonnes is 2 to 1.
    is_column = names.kind(value.text) == "column"
    if not is_column and not dimension.agrees(DIMENSIONLESS):
        reading.problem(f"must be dimensionless; '{value.text}' is {dimension.describe()}.", _WEIGHT)
        return None
    return value


def finish_situations(
    reading: Reading,
    grid: Grid,
    quantities: Mapping[str, Quantity],
    derived: Mapping[str, Definition],
    weight: Value | None,
) -> Situations | None:
    """Compute derived quantities and weights in every situation; None with problems."""
    if grid.n is None:
        return None
    known: dict[str, Any] = {q.name: q.value for q in quantities.values()} | grid.numbers
    values: dict[str, NDArray[np.float64]] = {}
    for name, definition in derived.items():
        array = on_grid(definition.value.expression, {**known, **values}, grid.n)
        if array is None:
            continue
        if report_not_finite(reading, definition.value.text, array, definition.place, grid):
            continue
        values[name] = array
    if weight is None:
        return None
    raw = on_grid(weight.expression, {**known, **values}, grid.n)
    if raw is None or report_not_finite(reading, weight.text, raw, _WEIGHT, grid):
        return None
    try:
        normalised = normalised_weights(raw, grid.n)
    except InputError as error:
        reading.collect(error, _WEIGHT)
        return None
    units = grid.units | {name: si_unit(definition.dimension) for name, definition in derived.items()}
    return Situations(grid.n, grid.columns, units, values, normalised)


def on_grid(expression: Expression, values: Mapping[str, Any], n: int) -> NDArray[np.float64] | None:
    """Evaluate in every situation, shape (n,); None if a name has no value (reported elsewhere)."""
    if not all(name in values for name in expression.names):
        return None
    with np.errstate(all="ignore"):
        return np.array(np.broadcast_to(expression.value(values), (n,)))


def report_not_finite(
    reading: Reading, text: str, values: NDArray[np.float64], place: Place, grid: Grid
) -> bool:
    """Report the first situation in which a value is not finite."""
    bad = np.flatnonzero(~np.isfinite(values))
    if not bad.size:
        return False
    first = int(bad[0])
    more = f" and {bad.size - 1} more" if bad.size > 1 else ""
    reading.problem(
        f"is not a finite number in situation {first + 1}{more}: '{text}' gives {values[first]}"
        f"{describe_situation(grid, first)}.",
        place,
    )
    return True


def describe_situation(grid: Grid, index: int) -> str:
    """Return " at chi = 0.1, Q_k = 5 kN" for a message."""
    parts = []
    for name, column in grid.columns.items():
        unit = grid.units[name]
        shown = f"{column[index] / unit.factor:g}" if column.dtype.kind == "f" else f"'{column[index]}'"
        parts.append(f"{name} = {shown}{' ' + unit.text if unit.text else ''}")
    return f" at {', '.join(parts)}" if parts else ""
