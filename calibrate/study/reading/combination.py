"""``[combination]``: variable actions that do not reach their maxima together."""

from __future__ import annotations

from typing import Any

from calibrate.errors import did_you_mean
from calibrate.study.model import CombinedAction, Variable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.schema import CombinedTable, read_entry, read_table


def read_combination(
    reading: Reading, raw: Any, variables: dict[str, Variable | None]
) -> tuple[CombinedAction, ...]:
    """Return the combined actions in the order of the study."""
    found = []
    for name, entry in read_table(reading, raw, ("combination",)).items():
        place = ("combination", name)
        content = read_entry(reading, CombinedTable, entry, place).content
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
        if variable.exceedances is not None:
            reading.problem(
                "is the maximum of a period from exceedances, not that of one repetition; it cannot be combined in "
                "this version.",
                place,
                f"Remove it here, or give variables.{name} by the parameters of one repetition.",
            )
            continue
        if variable.period is not None or variable.size_ratio is not None:
            reading.problem(
                "is combined by its repetitions; its model is that of one of them and takes no period or size_ratio.",
                place,
                f"Remove them from variables.{name}.",
            )
            continue
        found.append(CombinedAction(name, content.repetitions, content.presence, content.duration))
    if len(found) == 1 and len(read_table(reading, raw, ("combination",))) == 1:
        reading.problem("names one action; a combination needs at least two.", ("combination",))
    return tuple(found)
