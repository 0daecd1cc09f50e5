"""The basic variables of a study: a family with moments or parameters, or records to be fitted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Family, family, family_names
from calibrate.errors import InputError, did_you_mean
from calibrate.expressions import Expression, constant_expression
from calibrate.records import Sample
from calibrate.study.model import Quantity, Variable
from calibrate.study.reading import schema
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import MODELS, NameSpace
from calibrate.study.reading.rules import Draft, limit_state_names
from calibrate.study.reading.situations import Grid, on_grid, report_not_finite
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import Value, read_unit, read_value, value_dimension
from calibrate.units import DIMENSIONLESS, ONE, Dimension, Unit, si_unit

BEST = "best"
_MOMENTS = ("mean", "cov", "sd")
# Whose unit is shown, the most telling first.
_SHOWN_FIRST = ("mean", "median", "location", "value", "scale", "sd", "lower", "upper", "threshold")


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the models of variables may refer to."""

    names: NameSpace
    records: Mapping[str, Sample | None]
    quantities: Mapping[str, Quantity]
    derived: Mapping[str, NDArray[np.float64]]
    grid: Grid
    drafts: Mapping[str, Draft]


def argument_names() -> tuple[str, ...]:
    """Return every moment and every parameter of any family."""
    own = (q.name for name in family_names() for q in family(name).parameters)
    return tuple(dict.fromkeys((*_MOMENTS, *own)))


def read_variables(
    reading: Reading, around: Surroundings, raw: Mapping[str, Any]
) -> dict[str, Variable | None]:
    """Read every variable; None stands for one that exists but is faulty (reported)."""
    return {name: _Reader(reading, around, name).read(entry) for name, entry in raw.items()}


class _Reader:
    """Reads one variable."""

    def __init__(self, reading: Reading, around: Surroundings, name: str) -> None:
        self.reading = reading
        self.around = around
        self.name = name
        self.place: Place = ("variables", name)

    def read(self, raw: Any) -> Variable | None:
        known = argument_names()
        arguments = {k: v for k, v in raw.items() if k in known} if isinstance(raw, dict) else {}
        rest = {k: v for k, v in raw.items() if k not in known} if isinstance(raw, dict) else raw
        entry = schema.read_entry(self.reading, schema.VariableEntry, rest, self.place, more_keys=known)
        values = self._values(arguments)
        content = entry.content
        if content is None:
            return None
        families = self._families(content)
        unit = read_unit(self.reading, content.unit, (*self.place, "unit"))
        if (content.unit is not None and unit is None) or values is None or families is None:
            return None
        if content.records is not None:
            return self._fitted(content, families, values, unit)
        if not entry.sound or not families:
            return None
        return self._given(content, families[0], values, unit)

    def _values(self, arguments: Mapping[str, Any]) -> dict[str, Value] | None:
        values: dict[str, Value] = {}
        for key, raw in arguments.items():
            typed = schema.read_plain(self.reading, "value", raw, (*self.place, key))
            value = None if typed is None else read_value(self.reading, typed, (*self.place, key))
            if value is not None:
                values[key] = value
        return values if len(values) == len(arguments) else None

    def _families(self, content: schema.VariableEntry) -> list[Family] | None:
        """Return the candidates; [] for all of them; None with problems."""
        place = (*self.place, "family")
        listed = list(dict.fromkeys(content.family))
        if content.records is None and (len(content.family) > 1 or BEST in listed):
            self.reading.problem(
                "chooses among families by their fit to records, but the variable has no records.",
                place,
                "Name one family, or add 'records'.",
            )
            return None
        if BEST in listed:
            if len(listed) > 1:
                self.reading.problem(
                    f"names '{BEST}' beside others.", place, f"'{BEST}' already means all of them."
                )
                return None
            return []
        found: list[Family] = []
        for name in listed:
            try:
                found.append(family(name))
            except InputError as error:
                self.reading.collect(error, place)
        return found if len(found) == len(listed) else None

    # --------------------------------------------------------- given by numbers

    def _given(
        self, content: schema.VariableEntry, member: Family, values: dict[str, Value], unit: Unit | None
    ) -> Variable | None:
        if content.method is not None:
            self.reading.problem("says how to fit, but the variable has no records.", (*self.place, "method"))
        if not self._complete(member, values):
            return None
        dimension = self._dimension(member, values, unit)
        if dimension is None:
            return None
        self._check_values(member, values)
        arguments = {key: value.expression for key, value in values.items()}
        return self._variable(
            content, (member.name,), arguments, values, unit or _shown(values, dimension), dimension
        )

    def _complete(self, member: Family, values: Mapping[str, Value]) -> bool:
        """Check which arguments are given."""
        optional = {q.name for q in member.parameters if q.default is not None}
        sets = member.argument_sets()
        given = set(values)
        for accepted in sets:
            may = optional if not given & set(_MOMENTS) else optional & set(member.moments_keep)
            if set(accepted) <= given <= set(accepted) | may:
                return True
        shown = ", ".join(values) or "nothing"
        takes = "; or ".join(_listed(s) for s in sets)
        more = f" (and optionally {', '.join(sorted(optional))})" if optional else ""
        self.reading.problem(
            f"gives {shown}; the family '{member.name}' takes {takes}{more}.",
            self.place,
            "Or name 'records'." if not values else None,
        )
        return False

    def _dimension(self, member: Family, values: Mapping[str, Value], unit: Unit | None) -> Dimension | None:
        """Return the common dimension of what carries the variable's unit; None with problems."""
        carrying: list[tuple[str, Dimension]] = []
        sound = True
        for key in (*(k for k in _SHOWN_FIRST if k in values), *(k for k in values if k not in _SHOWN_FIRST)):
            found = self._argument_dimensions(key, values[key])
            if found is None:
                sound = False
            elif member.carries_unit(key):
                carrying += [(key, d) for d in found]
            else:
                for d in found:
                    if not d.agrees(DIMENSIONLESS):
                        self.reading.problem(
                            f"must be dimensionless; it is {d.describe()}.", (*self.place, key)
                        )
                        sound = False
        stated = None if unit is None else unit.dimension
        base = stated or next((d for _, d in carrying if not d.anything), DIMENSIONLESS)
        other = "its unit" if stated else f"'{next((k for k, d in carrying if not d.anything), '')}'"
        for key, d in carrying:
            if not d.agrees(base):
                self.reading.problem(
                    f"is {d.describe()}, but {other} is {base.describe()}.", (*self.place, key)
                )
                sound = False
        if sound and not self._defaults_fit(member, values, base):
            sound = False
        return base if sound else None

    def _defaults_fit(self, member: Family, values: Mapping[str, Value], dimension: Dimension) -> bool:
        """A bound that defaults to 1 has no unit: it must be given for a variable that has one."""
        for q in member.parameters:
            if q.name in values or not q.carries_unit or q.default in {None, 0.0, np.inf, -np.inf}:
                continue
            if not dimension.is_dimensionless:
                self.reading.problem(
                    f"needs '{q.name}': its default {q.default:g} is dimensionless, the variable is "
                    f"{dimension.describe()}.",
                    self.place,
                )
                return False
        return True

    def _argument_dimensions(self, key: str, value: Value) -> list[Dimension] | None:
        """Return the dimension of an argument, for each rule if it depends on the rule's size."""
        place = (*self.place, key)
        names = self.around.names
        sizes = self._sizes_in(value)
        if not sizes:
            dimension = value_dimension(names, value, place, MODELS)
            return None if dimension is None else [dimension]
        users = [d for d in self.around.drafts.values() if self.name in limit_state_names(d)]
        dimensions: list[Dimension] = []
        for draft in users or [d for d in self.around.drafts.values() if d.size in sizes][:1]:
            if other := sorted(sizes - {draft.size}):
                has = f"sizes '{draft.size}'" if draft.size else "sizes nothing"
                self.reading.problem(
                    f"uses the size '{other[0]}', but rules.{draft.name}, which uses '{self.name}', {has}.",
                    place,
                    "Define a variable for each rule.",
                )
                return None
            dimension = value_dimension(names, value, place, MODELS, draft.name)
            if dimension is None:
                return None
            dimensions.append(dimension)
        return dimensions

    def _sizes_in(self, value: Value) -> set[str]:
        all_sizes = {s.name for s in self.around.names.sizes.values()}
        return {n for n in value.expression.names if n in all_sizes}

    def _check_values(self, member: Family, values: Mapping[str, Value]) -> None:
        """Check the numbers in every situation, unless they depend on the size, which is not known yet."""
        grid = self.around.grid
        if grid.n is None or any(self._sizes_in(v) for v in values.values()):
            return
        known: dict[str, Any] = {q.name: q.value for q in self.around.quantities.values()}
        known |= {**grid.numbers, **self.around.derived}
        arrays: dict[str, NDArray[np.float64]] = {}
        for key, value in values.items():
            array = on_grid(value.expression, known, grid.n)
            if array is None or report_not_finite(self.reading, value.text, array, (*self.place, key), grid):
                return
            varies = any(n not in self.around.quantities for n in value.expression.names)
            arrays[key] = array if varies else array[0]
        try:
            with np.errstate(all="ignore"):
                solved = member.solve(arrays)
        except InputError as error:
            self.reading.collect(error, self.place)
            return
        infinite_allowed = {q.name for q in member.parameters if q.kind == "bound"}
        for parameter, array in solved.items():
            if parameter not in infinite_allowed and not np.all(np.isfinite(array)):
                self.reading.problem(
                    f"gives a {parameter} of '{member.name}' that is not a finite number.", self.place
                )

    # ------------------------------------------------------ fitted to records

    def _fitted(
        self,
        content: schema.VariableEntry,
        families: list[Family],
        values: dict[str, Value],
        unit: Unit | None,
    ) -> Variable | None:
        assert content.records is not None
        # What moments leave open (thresholds, bounds, the shape of gev) a fit may keep as given.
        kept = {k for f in families or map(family, family_names()) for k in f.moments_keep}
        others = [k for k in values if k not in kept]
        if others:
            self.reading.raw_problem(
                f"variables.{self.name} has records and {', '.join(others)}; records take the place of moments and parameters.",
                (*self.place, others[0]),
                "Remove one of the two."
                + (f" Only {_listed(sorted(kept))} may be kept fixed." if kept else ""),
            )
            return None
        if any(f.is_constant for f in families):
            self.reading.problem(
                "'constant' cannot be fitted to records.",
                (*self.place, "family"),
                "Remove 'records' or the family.",
            )
        if content.records not in self.around.records:
            self.reading.problem(
                f"names '{content.records}', which is not defined.",
                (*self.place, "records"),
                did_you_mean(content.records, self.around.records),
            )
            return None
        sample = self.around.records[content.records]
        if sample is None:
            return None
        dimension = sample.unit.dimension
        if unit is not None and unit.dimension != dimension:
            self.reading.problem(
                f"'{unit.text}' is {unit.dimension.describe()}, but the records '{content.records}' are "
                f"{dimension.describe()}.",
                (*self.place, "unit"),
            )
            return None
        arguments: dict[str, Expression] = {}
        for key in values:
            fixed = self._fixed(key, values[key], families, dimension)
            if fixed is None:
                return None
            arguments[key] = fixed
        names = tuple(f.name for f in families)
        return self._variable(content, names, arguments, values, unit or sample.unit, dimension)

    def _fixed(
        self, key: str, value: Value, families: list[Family], dimension: Dimension
    ) -> Expression | None:
        """Return a parameter that the fit keeps, as a constant."""
        place = (*self.place, key)
        found = value_dimension(self.around.names, value, place, MODELS)
        if found is None:
            return None
        if not any(f.carries_unit(key) for f in families or map(family, family_names())):
            dimension = DIMENSIONLESS
        if not found.agrees(dimension):
            self.reading.problem(
                f"is {found.describe()}; with these records it must be {dimension.describe()}.", place
            )
            return None
        known = {q.name: q.value for q in self.around.quantities.values()}
        if not all(n in known for n in value.expression.names):
            self.reading.problem(
                "differs between design situations, but records are fitted once.",
                place,
                "Use quantities only.",
            )
            return None
        return constant_expression(float(value.expression.value(known)))

    def _variable(
        self,
        content: schema.VariableEntry,
        families: tuple[str, ...],
        arguments: Mapping[str, Expression],
        values: Mapping[str, Value],
        unit: Unit,
        dimension: Dimension,
    ) -> Variable:
        if self.around.names.kind(self.name) == "variable":
            self.around.names.set_dimension(self.name, dimension)
        return Variable(
            name=self.name,
            families=families,
            records=content.records,
            arguments=arguments,
            texts={key: values[key].text for key in arguments},
            period=content.period,
            unit=unit,
            dimension=dimension,
            line=self.reading.line(self.place),
            method=content.method or "likelihood",
            description=content.description.strip(),
            source=content.source.strip(),
            grade=content.grade or "",
            may_be_negative=content.may_be_negative,
        )


def _shown(values: Mapping[str, Value], dimension: Dimension) -> Unit:
    """Return the unit that the user typed, else the coherent SI unit."""
    for key in _SHOWN_FIRST:
        unit = values[key].unit if key in values else None
        if unit is not None and unit is not ONE and unit.dimension == dimension:
            return unit
    return si_unit(dimension)


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
