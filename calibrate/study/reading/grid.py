"""Axes of a full factorial grid, as a study writes them."""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Context, Decimal
from typing import Any

import numpy as np

from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.situations import Axis
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import Entry, read_entry, read_plain
from calibrate.study.reading.schema import AxisTable
from calibrate.study.reading.sentences import describe
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import read_unit
from calibrate.units import ONE, Unit, split_value

MAX_SITUATIONS = 1_000_000
"""Of one study; more would not fit into the memory of an ordinary computer with all results."""

# Decimal arithmetic, so that 0.1 to 0.8 in 8 values holds 0.3 and not 0.30000000000000004.
_DECIMAL = Context(prec=34)
# How far, in steps, `to` may lie off the lattice to count as on it (numbers as typed are rounded).
_ON_LATTICE = Decimal("1e-9")
_FORMS = (
    "Write { from = 0.1, to = 0.8, count = 8 }, { from = 0.1, to = 0.8, step = 0.1 }, [0.1, 0.2], or "
    '{ values = [1, 2], unit = "mm" }.'
)

Number = tuple[float, Unit]
"""A number as typed, with its unit (ONE: none was typed)."""


def read_axis(reading: Reading, name: str, raw: Any) -> tuple[Axis | None, str]:
    """Read one axis; returns it (None with problems if it is faulty) and its description."""
    place: Place = ("situations", "axes", name)
    if isinstance(raw, list):
        return _listed(reading, name, raw, None, place), ""
    if not isinstance(raw, dict):
        reading.problem(f"must be an array or a table; got {describe(raw)}.", place, _FORMS)
        return None, ""
    entry = read_entry(reading, AxisTable, raw, place)
    if entry.content is None or not entry.sound:
        return None, ""
    unit = read_unit(reading, entry.content.unit, (*place, "unit"))
    if entry.content.unit is not None and unit is None:
        return None, ""
    return _from_table(reading, name, entry, raw, unit, place), entry.content.description


def _from_table(
    reading: Reading, name: str, entry: Entry[AxisTable], raw: dict[str, Any], unit: Unit | None, place: Place
) -> Axis | None:
    table = entry.content
    assert table is not None
    given = [k for k in ("from", "to", "count", "step", "values") if k in raw]
    if given == ["values"]:
        return _listed(reading, name, table.values or [], unit, (*place, "values"))
    if given not in (["from", "to", "count"], ["from", "to", "step"]):
        shown = ", ".join(f"'{k}'" for k in given) or "none of its keys"
        reading.problem(f"does not describe an axis: {shown} given.", place, _FORMS)
        return None
    numbers = in_one_unit(reading, [table.from_, table.to], unit, [(*place, "from"), (*place, "to")])
    if numbers is None:
        return None
    (first, last), shown_unit = numbers
    if first > last:
        reading.problem(f"has 'from' {first} above 'to' {last}.", place, "Exchange the two.")
        return None
    if table.count is not None:
        values = _by_count(reading, first, last, table.count, place)
    else:
        values = _by_step(reading, first, last, table.step, unit or shown_unit, place)
    return None if values is None else _axis(reading, name, values, shown_unit)


def _axis(reading: Reading, name: str, values: Sequence[Decimal], unit: Unit) -> Axis:
    if len(set(values)) < len(values):
        reading.doubt(
            "axis-repeats-values",
            f"The axis '{name}' holds a value more than once, so some situations occur several times.",
            f"situations.axes.{name}",
        )
    array = np.array([float(v) for v in values], dtype=np.float64) * unit.factor
    return Axis(name, array, unit)


def _by_count(
    reading: Reading, first: Decimal, last: Decimal, count: int, place: Place
) -> list[Decimal] | None:
    if count > MAX_SITUATIONS:
        reading.problem(f"has {count} values; a study may have {MAX_SITUATIONS:,} situations.", place)
        return None
    if count == 1:
        if first != last:
            reading.problem(
                f"has count = 1 but runs from {first} to {last}.",
                place,
                "Use at least 2, or make the two equal.",
            )
            return None
        return [first]
    span = _DECIMAL.subtract(last, first)
    return [
        *(
            _DECIMAL.add(first, _DECIMAL.divide(_DECIMAL.multiply(span, Decimal(i)), Decimal(count - 1)))
            for i in range(count - 1)
        ),
        last,
    ]


def _by_step(
    reading: Reading, first: Decimal, last: Decimal, raw: float | str | None, unit: Unit, place: Place
) -> list[Decimal] | None:
    assert raw is not None
    numbers = in_one_unit(reading, [raw], unit, [(*place, "step")])
    if numbers is None:
        return None
    step = numbers[0][0]
    if step <= 0:
        reading.problem(f"must be greater than 0; got {step}.", (*place, "step"))
        return None
    steps = _DECIMAL.divide(_DECIMAL.subtract(last, first), step)
    if steps >= MAX_SITUATIONS:
        reading.problem(f"gives {steps:.3g} values; a study may have {MAX_SITUATIONS:,} situations.", place)
        return None
    whole = int(steps.to_integral_value())
    ends_on_to = abs(steps - whole) <= _ON_LATTICE
    if not ends_on_to:
        whole = int(steps)
    values = [_DECIMAL.add(first, _DECIMAL.multiply(step, Decimal(i))) for i in range(whole + 1)]
    if ends_on_to:
        values[-1] = last
    else:
        reading.doubt(
            "axis-stops-short",
            f"The step does not lead to the end of the axis '{place[-1]}': its last value is {values[-1]}, "
            f"'to' is {last}.",
            reading.dotted(place),
        )
    return values


def _listed(reading: Reading, name: str, raw: Sequence[Any], unit: Unit | None, place: Place) -> Axis | None:
    if not raw:
        reading.problem("has no values, so the grid is empty.", place)
        return None
    if len(raw) > MAX_SITUATIONS:
        reading.problem(f"has {len(raw)} values; a study may have {MAX_SITUATIONS:,} situations.", place)
        return None
    typed = [read_plain(reading, "value", v, (*place, i)) for i, v in enumerate(raw)]
    if any(v is None for v in typed):
        return None
    numbers = in_one_unit(reading, typed, unit, [(*place, i) for i in range(len(typed))])
    if numbers is None:
        return None
    values, shown_unit = numbers
    return _axis(reading, name, values, shown_unit)


def in_one_unit(
    reading: Reading, raw: Sequence[Any], unit: Unit | None, places: Sequence[Place], what: str = "axis"
) -> tuple[list[Decimal], Unit] | None:
    """Return numbers in the given unit, else in the first unit that was typed; None with problems.

    ``what`` they belong to is said in messages.
    """
    found: list[Number] = []
    for text, where in zip(raw, places, strict=True):
        number = _number(reading, text, where)
        if number is None:
            return None
        found.append(number)
    shown = unit or next((u for _, u in found if u is not ONE), ONE)
    values: list[Decimal] = []
    for (size, own), where in zip(found, places, strict=True):
        if own is ONE:
            # A bare number counts in the unit of the axis, if the axis states one; 0 is 0 in every unit.
            if unit is None and shown is not ONE and size != 0.0:
                reading.problem(
                    f"has no unit, but others of the {what} have ('{shown.text}').",
                    where,
                    "Give all of them a unit.",
                )
                return None
            values.append(Decimal(repr(size)))
        elif own.dimension != shown.dimension:
            reading.problem(
                f"is {own.dimension.describe()}, the {what} is {shown.dimension.describe()}.", where
            )
            return None
        elif own.factor == shown.factor:
            values.append(Decimal(repr(size)))
        else:
            values.append(Decimal(repr(size * own.factor / shown.factor)))
    return values, shown


def _number(reading: Reading, raw: Any, place: Place) -> Number | None:
    if not isinstance(raw, str):
        return float(raw), ONE
    try:
        split = split_value(raw)
    except InputError as error:
        reading.collect(error, place)
        return None
    constant = _constant(raw) if split is None else None
    if constant is not None:
        return constant, ONE
    if split is None:
        reading.problem(
            f"must be a number or a number with a unit; got {describe(raw)}.",
            place,
            "Expressions belong in [situations.derived], labels in a table.",
        )
    return split


def _constant(text: str) -> float | None:
    """Return the value of an expression without names, such as ``1/3``."""
    try:
        return parse(text).constant
    except InputError:
        return None
