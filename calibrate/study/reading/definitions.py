"""Quantities and derived quantities: named definitions that may use one another."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from calibrate.study.model import Quantity
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_plain
from calibrate.study.reading.names import NameSpace, Use
from calibrate.study.reading.order import dependence_order
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import Value, read_value, value_dimension
from calibrate.units import ONE, Dimension, si_unit


@dataclass(frozen=True, slots=True)
class Definition:
    """A definition whose names and dimensions are in order."""

    value: Value
    dimension: Dimension
    place: Place


def read_definitions(
    reading: Reading,
    names: NameSpace,
    table: Mapping[str, Any],
    section: Place,
    use: Use,
    known: Mapping[str, Value] | None = None,
) -> dict[str, Definition]:
    """Read named values that may use one another; the names are already declared.

    ``known`` are values that were read already. Reports cycles, names that may not be used and wrong dimensions,
    and notes the dimension of each sound name.

    Returns
    -------
    dict of str to Definition
        The sound ones, each after those that it uses.
    """
    values: dict[str, Value] = {}
    for name, raw in table.items():
        if known is not None and name in known:
            values[name] = known[name]
            continue
        typed = read_plain(reading, "value", raw, (*section, name))
        value = None if typed is None else read_value(reading, typed, (*section, name))
        if value is not None:
            values[name] = value
    # A name may be taken by another section; then it means that, not this definition.
    own = {n: v for n, v in values.items() if (d := names.names.get(n)) and d.place == (*section, n)}
    order, cycles = dependence_order({n: v.expression.names for n, v in own.items()})
    for cycle in cycles:
        place = (*section, cycle[0])
        reading.raw_problem(
            f"{reading.dotted(place)} is defined by itself: {' -> '.join(cycle)}.",
            place,
            "Give one of them a value that uses none of the others.",
        )
    sound: dict[str, Definition] = {}
    for name in [*order, *(n for n in own if n not in order)]:
        value, place = own[name], (*section, name)
        if value.unit is not None:
            dimension: Dimension | None = value.unit.dimension
        else:
            dimension = value_dimension(names, value, place, use)
        if dimension is not None and name in order:
            names.set_dimension(name, dimension)
            sound[name] = Definition(value, dimension, place)
    return sound


def evaluate_quantities(reading: Reading, definitions: Mapping[str, Definition]) -> dict[str, Quantity]:
    """Return the quantities with their SI values; those that are not finite are reported and left out."""
    found: dict[str, Quantity] = {}
    values: dict[str, float] = {}
    for name, definition in definitions.items():
        expression, value = definition.value.expression, definition.value
        if not all(n in values for n in expression.names):
            continue
        with np.errstate(all="ignore"):
            number = float(expression.value(values))
        if not math.isfinite(number):
            reading.problem(f"is not a finite number: '{value.text}' gives {number}.", definition.place)
            continue
        values[name] = number
        unit = si_unit(definition.dimension) if value.unit is None else value.unit
        found[name] = Quantity(name, value.text, number, unit or ONE, reading.line(definition.place))
    return found
