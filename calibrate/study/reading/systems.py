"""``[systems.NAME]``: when several rules together fail."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from calibrate.errors import InputError
from calibrate.reliability.systems import failure_logic
from calibrate.study.model import CombinedAction, Rule, System, Variable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.names import check_name
from calibrate.study.reading.reliability_sections import SystemTable

_LEAST = 2


def read_systems(
    reading: Reading,
    raw: Any,
    drafted: Sequence[str],
    rules: Mapping[str, Rule],
    variables: Mapping[str, Variable | None],
    combination: Sequence[CombinedAction],
) -> dict[str, System]:
    """Return the sound systems in the order of the study.

    ``drafted`` are the names of all rules, ``rules`` those that are sound.
    """
    found: dict[str, System] = {}
    for name, entry in read_table(reading, raw, ("systems",)).items():
        place = ("systems", name)
        read = read_entry(reading, SystemTable, entry, place)
        content = read.content if read.sound else None
        if not check_name(reading, name, "rule", place) or content is None:
            continue
        if name in drafted:
            reading.raw_problem(
                f"the name '{name}' stands for a rule and for a system.",
                place,
                "Give the system another name.",
            )
            continue
        try:
            logic = failure_logic(content.fails_when, tuple(drafted))
        except InputError as error:
            reading.collect(error, (*place, "fails_when"))
            continue
        if len(logic.names) < _LEAST:
            reading.problem("names one rule; a system needs at least two.", (*place, "fails_when"))
            continue
        if not all(rule in rules for rule in logic.names):
            continue
        if _can_be_joined(
            reading, [rules[r] for r in logic.names], variables, combination, (*place, "fails_when")
        ):
            found[name] = System(
                name, logic, content.weight, reading.line(place), content.description.strip()
            )
    return found


def any_weight(raw: Any) -> bool:
    """Whether any system takes part in the objective, as far as can be told before it is read."""
    tables = raw.values() if isinstance(raw, dict) else ()
    return any(isinstance(t, dict) and t.get("weight", 0.0) not in (0, 0.0) for t in tables)


def _can_be_joined(
    reading: Reading,
    rules: Sequence[Rule],
    variables: Mapping[str, Variable | None],
    combination: Sequence[CombinedAction],
    place: tuple[str, ...],
) -> bool:
    combined = {a.name for a in combination}
    for rule in rules:
        for variable in rule.variables:
            if variable in combined:
                reading.problem(
                    f"names rules.{rule.name} with the combined action '{variable}': another action may lead in each "
                    "rule, and then they are no parts of one event.",
                    place,
                    f"Take '{variable}' out of [combination] for a study of systems.",
                )
                return False
            model = variables.get(variable)
            if model is not None and model.sites is not None:
                reading.problem(
                    f"names rules.{rule.name} with the action over sites '{variable}': a system is one at one site.",
                    place,
                    f"Give '{variable}' for one class of sites.",
                )
                return False
    return True
