"""``[combination]``: variable actions that do not reach their maxima together."""

from __future__ import annotations

from typing import Any

from calibrate.actions.periods import in_years
from calibrate.errors import did_you_mean
from calibrate.study.model import CombinedAction, Variable
from calibrate.study.reading.conditional import conditional_on
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.schema import CombinedTable
from calibrate.study.reading.toml_lines import Place


def read_combination(
    reading: Reading, raw: Any, variables: dict[str, Variable | None], reference_period: float | None
) -> tuple[CombinedAction, ...]:
    """Return the combined actions in the order of the study."""
    found = []
    for name, entry in read_table(reading, raw, ("combination",)).items():
        place = ("combination", name)
        read = read_entry(reading, CombinedTable, entry, place)
        content = None if read.dropped else read.content
        if name not in variables:
            reading.raw_problem(
                f"combination: '{name}' is not a basic variable.", place, did_you_mean(name, variables)
            )
            continue
        variable = variables[name]
        if content is None or variable is None:
            continue
        if variable.role not in ("", "action"):
            reading.problem(
                f"has the role {variable.role}; only actions repeat themselves and are combined by their maxima.",
                place,
                f"Remove it here, or correct the role of variables.{name}.",
            )
            continue
        if variable.sites is not None:
            reading.problem(
                "is an action over sites, and a site keeps its class in all repetitions; it cannot be combined.",
                place,
                f"Remove it here, or give variables.{name} for one class.",
            )
            continue
        if conditional_on(variable, variables):
            reading.problem(
                "has a model that depends on other basic variables; it cannot be combined by its repetitions.",
                place,
                f"Remove it here, or give variables.{variable.name} moments of its own.",
            )
            continue
        repetitions = _repetitions(reading, content.repetitions, variable, reference_period, place)
        if repetitions is not None:
            found.append(CombinedAction(name, repetitions, content.presence, content.duration))
    if len(found) == 1 and len(read_table(reading, raw, ("combination",))) == 1:
        reading.problem("names one action; a combination needs at least two.", ("combination",))
    return tuple(found)


def _repetitions(
    reading: Reading, stated: float | None, variable: Variable, reference: float | None, place: Place
) -> float | None:
    """Return how often an action comes anew in the reference period: as stated, or by the period of its model."""
    if variable.size_ratio is not None:
        reading.problem(
            "is combined by its repetitions; a size_ratio belongs to a strength.",
            place,
            f"Remove it from variables.{variable.name}.",
        )
        return None
    if variable.period is None:
        if stated is None:
            reading.problem(
                "needs 'repetitions' in the reference period, or a period of its variable.",
                place,
                f"Write {variable.name} = {{ repetitions = 50 }}, or variables.{variable.name}.period = 1.",
            )
        return stated
    if not variable.converted:
        reading.problem(
            'is combined by its repetitions, but the variable says conversion = "none".',
            place,
            f"Remove the one or the other from variables.{variable.name}.",
        )
        return None
    if reference is None:
        return None
    implied = reference / variable.period
    if implied < 1.0:
        reading.problem(
            f"has a model for {in_years(variable.period)}, longer than the reference period of {in_years(reference)}.",
            place,
        )
        return None
    if stated is not None and abs(stated / implied - 1.0) > 1e-3:
        reading.problem(
            f"says {stated:g} repetitions, but its model is for {in_years(variable.period)}, of which the reference "
            f"period of {in_years(reference)} holds {implied:g}.",
            place,
            "Leave repetitions out, or correct the period.",
        )
        return None
    return implied
