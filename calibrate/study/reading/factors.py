"""The factors of a study: a number is held, a table with bounds is free."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from calibrate.factors import Factor
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.names import NameSpace
from calibrate.study.reading.schema import FactorTable
from calibrate.study.reading.sentences import describe
from calibrate.study.reading.toml_lines import Place
from calibrate.units import DIMENSIONLESS

# How far, in steps, a bound may lie off the lattice to count as on it (1.3 / 0.05 is 26.000000000000004).
_ON_LATTICE = 1e-9
_WITHOUT_BOUNDS = frozenset({"present", "value", "description"})
_FORMS = (
    "Write 'gamma = 1.35' to hold it, or 'gamma = { present = 1.25, lower = 1.0, upper = 2.0, step = 0.05 }'."
)


def read_factors(reading: Reading, names: NameSpace, raw: Any) -> tuple[tuple[Factor, ...], dict[str, str]]:
    """Read every factor and declare its name; returns the sound ones and descriptions by name."""
    section: Place = ("factors",)
    table = read_table(reading, raw, section)
    if not table and (raw is None or isinstance(raw, dict)):
        reading.raw_problem("at least one factor is needed, in the section [factors].", section, _FORMS)
    factors: list[Factor] = []
    descriptions: dict[str, str] = {}
    for name, entry in table.items():
        place = (*section, name)
        if names.declare(name, "factor", place):
            names.set_dimension(name, DIMENSIONLESS)
        factor, description = _factor(reading, name, entry, place)
        if factor is not None:
            factors.append(factor)
            if description:
                descriptions[name] = description
    return tuple(factors), descriptions


def _factor(reading: Reading, name: str, raw: Any, place: Place) -> tuple[Factor | None, str]:
    if isinstance(raw, dict):
        if raw and raw.keys() <= _WITHOUT_BOUNDS:
            reading.problem("gives a value but no bounds.", place, _FORMS)
            return None, ""
        entry = read_entry(reading, FactorTable, raw, place)
        if entry.content is None or not entry.sound:
            return None, ""
        return _free(reading, name, entry.content, place), entry.content.description
    if isinstance(raw, bool) or not isinstance(raw, (int, float)):
        hint = (
            "Factors are dimensionless numbers without quotation marks." if isinstance(raw, str) else _FORMS
        )
        reading.problem(f"must be a number or a table; got {describe(raw)}.", place, hint)
        return None, ""
    try:
        value = float(raw)
    except OverflowError:
        value = math.inf
    if not math.isfinite(value):
        reading.problem(f"must be a finite number; got {describe(raw)}.", place)
        return None, ""
    _doubt_negative(reading, name, value)
    return Factor(name, value, value, value, None, held=True), ""


def _free(reading: Reading, name: str, table: FactorTable, place: Place) -> Factor | None:
    lower, upper, step = table.lower, table.upper, table.step
    if lower > upper:
        reading.problem(f"has lower = {lower:g} above upper = {upper:g}.", place, "Exchange the two.")
        return None
    if lower == upper:
        reading.problem(
            f"has lower = upper = {lower:g}, which leaves nothing to choose.",
            place,
            f"Write '{name} = {lower:g}' to hold it.",
        )
        return None
    if step is not None and np.ceil(lower / step - _ON_LATTICE) > np.floor(upper / step + _ON_LATTICE):
        reading.problem(
            f"has no multiple of step = {step:g} between lower = {lower:g} and upper = {upper:g}.",
            place,
            "Use a smaller step or wider bounds.",
        )
        return None
    _doubt_negative(reading, name, min(lower, table.present))
    return Factor(name, table.present, lower, upper, step, held=False)


def _doubt_negative(reading: Reading, name: str, value: float) -> None:
    if value < 0.0:
        reading.doubt(
            "negative-factor", f"The factor '{name}' may become negative ({value:g}).", f"factors.{name}"
        )
