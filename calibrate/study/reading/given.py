"""A basic variable given by moments or parameters: which, of what dimension, with what values."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Family
from calibrate.errors import InputError
from calibrate.study.reading.rules import limit_state_names
from calibrate.study.reading.situations import on_grid, report_not_finite
from calibrate.study.reading.subject import Model, Subject, constants_only, defaults_fit, listed
from calibrate.study.reading.values import Value, value_dimension
from calibrate.units import DIMENSIONLESS, ONE, Dimension, Unit, si_unit

Check = Callable[[Subject, Family, Mapping[str, Value]], None]

MOMENTS = ("mean", "cov", "sd")
# Whose unit is shown, the most telling first.
_SHOWN_FIRST = ("mean", "median", "location", "value", "scale", "sd", "lower", "upper", "threshold")


def given_model(
    subject: Subject,
    member: Family,
    values: Mapping[str, Value],
    unit: Unit | None,
    check: Check | None = None,
) -> Model | None:
    """Check a variable that is given by numbers and expressions; None with problems.

    ``check`` looks at the numbers themselves; by default in every design situation.
    """
    if not _complete(subject, member, values):
        return None
    dimension = _dimension(subject, member, values, unit)
    if dimension is None:
        return None
    shown = unit or _shown(values, dimension)
    if not defaults_fit(subject, member, values, dimension, ONE):
        return None
    (check or _check_values)(subject, member, values)
    return Model((member.name,), {k: v.expression for k, v in values.items()}, shown, dimension)


def _complete(subject: Subject, member: Family, values: Mapping[str, Value]) -> bool:
    """Check which arguments are given."""
    optional = {q.name for q in member.parameters if q.default is not None}
    sets = member.argument_sets()
    given = set(values)
    for accepted in sets:
        may = optional & set(member.moments_keep) if given & set(MOMENTS) else optional
        if set(accepted) <= given <= set(accepted) | may:
            return True
    shown = ", ".join(values) or "nothing"
    takes = "; or ".join(listed(s) for s in sets)
    more = f" (and optionally {', '.join(sorted(optional))})" if optional else ""
    subject.problem(
        f"gives {shown}; the family '{member.name}' takes {takes}{more}.",
        suggestion="Or name 'records'." if not values else None,
    )
    return False


def _dimension(
    subject: Subject, member: Family, values: Mapping[str, Value], unit: Unit | None
) -> Dimension | None:
    """Return the common dimension of what carries the variable's unit; None with problems."""
    carrying: list[tuple[str, Dimension]] = []
    sound = True
    for key in sorted(
        values, key=lambda k: _SHOWN_FIRST.index(k) if k in _SHOWN_FIRST else len(_SHOWN_FIRST)
    ):
        found = _argument_dimensions(subject, key, values[key])
        if found is None:
            sound = False
        elif member.carries_unit(key):
            carrying += [(key, d) for d in found]
        elif wrong := [d for d in found if not d.agrees(DIMENSIONLESS)]:
            subject.problem(f"must be dimensionless; it is {wrong[0].describe()}.", key)
            sound = False
    leading = next(((f"'{k}'", d) for k, d in carrying if not d.anything), ("", DIMENSIONLESS))
    other, base = ("its unit", unit.dimension) if unit is not None else leading
    for key, d in carrying:
        if not d.agrees(base):
            subject.problem(f"is {d.describe()}, but {other} is {base.describe()}.", key)
            sound = False
    return base if sound else None


def _argument_dimensions(subject: Subject, key: str, value: Value) -> list[Dimension] | None:
    """Return the dimension of an argument, for each rule if it depends on the rule's size."""
    names, drafts = subject.around.names, subject.around.drafts.values()
    sizes = _sizes_in(subject, value)
    if not sizes:
        dimension = value_dimension(names, value, subject.place(key), subject.around.use)
        return None if dimension is None else [dimension]
    users = [d for d in drafts if subject.name in limit_state_names(d)]
    dimensions: list[Dimension] = []
    for draft in users or [d for d in drafts if d.size in sizes][:1]:
        if other := sorted(sizes - {draft.size}):
            has = f"sizes '{draft.size}'" if draft.size else "sizes nothing"
            subject.problem(
                f"uses the size '{other[0]}', but rules.{draft.name}, which uses '{subject.name}', {has}.",
                key,
                suggestion="Define a variable for each rule.",
            )
            return None
        dimension = value_dimension(names, value, subject.place(key), subject.around.use, draft.name)
        if dimension is None:
            return None
        dimensions.append(dimension)
    return dimensions


def _sizes_in(subject: Subject, value: Value) -> set[str]:
    all_sizes = {s.name for s in subject.around.names.sizes.values()}
    return {n for n in value.expression.names if n in all_sizes}


def _check_values(subject: Subject, member: Family, values: Mapping[str, Value]) -> None:
    """Check the numbers in every situation, unless they depend on the size or on variables, which are not known."""
    around = subject.around
    moving = {*(s.name for s in around.names.sizes.values()), *around.names.of_kind("variable")}
    if around.grid.n is None or any(moving.intersection(v.expression.names) for v in values.values()):
        return
    known: dict[str, Any] = {**around.constants, **around.grid.numbers, **around.derived}
    arrays: dict[str, NDArray[np.float64]] = {}
    for key, value in values.items():
        array = on_grid(value.expression, known, around.grid.n)
        if array is None:
            return
        if report_not_finite(around.reading, value.text, array, subject.place(key), around.grid):
            return
        arrays[key] = array[0] if constants_only(value, around.constants) else array
    try:
        with np.errstate(all="ignore"):
            solved = member.solve(arrays)
    except InputError as error:
        for problem in error.problems:
            named = [key for key in values if problem.message.startswith(f"{member.name}: {key} ")]
            subject.collect(InputError(problem), *named)
        return
    may_be_infinite = {q.name for q in member.parameters if q.kind == "bound"}
    for parameter, array in solved.items():
        if parameter not in may_be_infinite and not np.all(np.isfinite(array)):
            subject.problem(f"gives a {parameter} of '{member.name}' that is not a finite number.")


def _shown(values: Mapping[str, Value], dimension: Dimension) -> Unit:
    """Return the unit that the user typed, else the coherent SI unit."""
    for key in _SHOWN_FIRST:
        unit = values[key].unit if key in values else None
        if unit is not None and unit is not ONE and unit.dimension == dimension:
            return unit
    return si_unit(dimension)
