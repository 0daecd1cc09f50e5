"""A value as typed - a number, a number with a unit, or an expression - in SI units."""

from __future__ import annotations

from dataclasses import dataclass

from calibrate.errors import InputError
from calibrate.expressions import Expression, constant_expression, dimension_of, parse
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import NameSpace, Use
from calibrate.study.reading.toml_lines import Place
from calibrate.units import ANY_DIMENSION, ONE, Dimension, Unit, parse_unit, split_value


@dataclass(frozen=True, slots=True)
class Value:
    """What was typed, as an expression in SI units.

    ``unit`` is the unit in which a number was typed, None for an expression.
    ``number`` is the number as typed, in ``unit``; None for an expression.
    """

    text: str
    expression: Expression
    unit: Unit | None
    number: float | None

    @property
    def stated_dimension(self) -> Dimension | None:
        """Dimension of a number; a bare 0 agrees with any; None for an expression."""
        if self.unit is None:
            return None
        return ANY_DIMENSION if self.unit is ONE and self.number == 0.0 else self.unit.dimension


def number_text(number: float) -> str:
    """Return a number as one would type it."""
    return f"{number:.15g}"


def read_value(reading: Reading, raw: float | str, place: Place) -> Value | None:
    """Read a value; None with a problem if it is neither number, number with unit, nor expression."""
    if not isinstance(raw, str):
        return Value(number_text(raw), constant_expression(float(raw)), ONE, float(raw))
    text = raw.strip()
    try:
        split = split_value(text)
        if split is None:
            return Value(text, parse(raw), None, None)
    except InputError as error:
        reading.collect(error, place)
        return None
    number, unit = split
    return Value(text, constant_expression(number * unit.factor), unit, number)


def in_unit(reading: Reading, raw: float | str, unit: Unit, place: Place, whose: str) -> float | None:
    """Return a number with a unit in another unit; None with a problem, in which ``whose`` is "the sample is"."""
    value = read_value(reading, raw, place)
    if value is None:
        return None
    if value.number is None or value.unit is None:
        reading.problem("must be a number with a unit, such as '11 kN'.", place)
        return None
    stated = value.stated_dimension
    if stated is not None and not stated.agrees(unit.dimension):
        reading.problem(f"is {stated.describe()}, but {whose} {unit.dimension.describe()}.", place)
        return None
    return value.number * value.unit.factor / unit.factor


def read_unit(reading: Reading, text: str | None, place: Place) -> Unit | None:
    """Read a unit; None if there is none, or with a problem if it is not accepted."""
    if text is None:
        return None
    try:
        return parse_unit(text)
    except InputError as error:
        reading.collect(error, place)
        return None


def value_dimension(
    names: NameSpace, value: Value, place: Place, use: Use, rule: str | None = None
) -> Dimension | None:
    """Check the names and the dimensions of a value; None if they could not be checked or are wrong."""
    if value.stated_dimension is not None:
        return value.stated_dimension
    known = names.check_use(value.expression.names, place, use, rule)
    if known is None:
        return None
    try:
        return dimension_of(value.expression, known)
    except InputError as error:
        names.reading.collect(error, place)
        return None
