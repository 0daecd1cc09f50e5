"""One basic variable while it is read: where it stands and what its model may refer to."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Family
from calibrate.errors import InputError
from calibrate.expressions import Expression
from calibrate.records import Sample
from calibrate.study.model import ComponentRecords, Quantity, SiteTable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import GIVEN_MODELS, NameSpace, Use
from calibrate.study.reading.rules import Draft
from calibrate.study.reading.situations import Grid
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import Value
from calibrate.units import Dimension, Unit


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the models of variables may refer to; ``derived`` in SI units, shape (n,)."""

    reading: Reading
    names: NameSpace
    records: Mapping[str, Sample | None]
    quantities: Mapping[str, Quantity]
    derived: Mapping[str, NDArray[np.float64]]
    grid: Grid
    drafts: Mapping[str, Draft]
    sites: Mapping[str, SiteTable | None] = field(default_factory=dict)
    resistances: Mapping[str, ComponentRecords | None] = field(default_factory=dict)
    use: Use = GIVEN_MODELS
    """What moments and parameters may use."""

    @property
    def constants(self) -> dict[str, float]:
        """Quantities in SI units."""
        return {q.name: q.value for q in self.quantities.values()}


@dataclass(frozen=True, slots=True)
class Subject:
    """The variable that is read."""

    name: str
    around: Surroundings

    def place(self, *keys: str) -> Place:
        """Return the place of the variable, or of a key of it."""
        return ("variables", self.name, *keys)

    def problem(self, message: str, *keys: str, suggestion: str | None = None) -> None:
        """Record a problem whose message continues the name of the variable or of a key of it."""
        self.around.reading.problem(message, self.place(*keys), suggestion)

    def collect(self, error: InputError, *keys: str) -> None:
        """Record the problems of a lower layer."""
        self.around.reading.collect(error, self.place(*keys))


@dataclass(frozen=True, slots=True)
class Model:
    """The checked model of a variable: candidates, arguments in SI units, unit shown, dimension."""

    families: tuple[str, ...]
    arguments: Mapping[str, Expression]
    unit: Unit
    dimension: Dimension


def defaults_fit(
    subject: Subject, member: Family, given: Iterable[str], dimension: Dimension, unit: Unit
) -> bool:
    """Report a bound that is left at its default 1 though the variable is no plain number."""
    given = set(given)
    for q in member.parameters:
        if q.name in given or not q.carries_unit or q.default in {None, 0.0, np.inf, -np.inf}:
            continue
        if not dimension.is_dimensionless or unit.factor != 1.0:
            is_what = dimension.describe() if not dimension.is_dimensionless else f"in {unit.text}"
            subject.problem(
                f"needs '{q.name}': its default {q.default:g} has no unit, the variable is {is_what}."
            )
            return False
    return True


def listed(names: Sequence[str]) -> str:
    """Return "a", "a and b" or "a, b and c"."""
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def constants_only(value: Value, constants: Mapping[str, float]) -> bool:
    """Whether a value is the same in every situation."""
    return all(name in constants for name in value.expression.names)
