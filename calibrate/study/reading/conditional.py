"""Basic variables whose moments or parameters are expressions of other basic variables."""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping
from typing import Any

from calibrate.errors import InputError
from calibrate.study.model import Variable
from calibrate.study.reading.subject import Subject, Surroundings
from calibrate.units import split_value

_WORD = re.compile(r"[A-Za-z][A-Za-z0-9_]*")


def in_order_of_dependence(raw: Mapping[str, Any], arguments: Collection[str]) -> tuple[list[str], list[str]]:
    """Return the names so that each comes after those that its arguments mention, and those that go in circles."""
    waiting = {name: _mentioned(entry, arguments, raw) for name, entry in raw.items()}
    order: list[str] = []
    while ready := [name for name, needs in waiting.items() if needs <= set(order)]:
        order.extend(ready)
        for name in ready:
            del waiting[name]
    # What only follows from a circle is in none itself, but cannot be read either.
    circles = [name for name in waiting if _reaches_itself(name, waiting)]
    return [*order, *waiting], circles


def _mentioned(entry: Any, arguments: Collection[str], names: Mapping[str, Any]) -> set[str]:
    if not isinstance(entry, dict):
        return set()
    texts = [v for k, v in entry.items() if k in arguments and isinstance(v, str) and not _is_number(v)]
    return {word for text in texts for word in _WORD.findall(text)} & set(names)


def _is_number(text: str) -> bool:
    """Whether a text is a number with a unit, in which no name stands."""
    try:
        return split_value(text.strip()) is not None
    except InputError:
        return True  # a number with a faulty unit, which is told elsewhere


def _reaches_itself(name: str, waiting: Mapping[str, set[str]]) -> bool:
    reached: set[str] = set()
    ahead = set(waiting[name])
    while ahead:
        reached |= ahead
        ahead = {n for a in ahead for n in waiting.get(a, ())} - reached
    return name in reached


def report_circles(around: Surroundings, circles: list[str]) -> None:
    """Report variables that depend on themselves, alone or through one another, once."""
    if not circles:
        return
    subject = Subject(circles[0], around)
    if len(circles) == 1:
        subject.problem("has a model that depends on the variable itself.")
        return
    others = ", ".join(f"'{name}'" for name in circles[1:])
    subject.problem(f"has a model that depends on itself through {others}.", suggestion="Break the circle.")


def conditional_on(variable: Variable, variables: Collection[str]) -> list[str]:
    """Return the basic variables that the model of a variable mentions."""
    used = {name for e in variable.arguments.values() for name in e.names}
    return [name for name in variables if name in used]


def may_be_conditional(subject: Subject, variable: Variable) -> bool:
    """Report what a variable that depends on others cannot be besides."""
    for key, is_so in (
        ("period", variable.period is not None),
        ("size_ratio", variable.size_ratio is not None),
        ("stress_profile", variable.stress_profile is not None),
    ):
        if is_so:
            subject.problem(
                "cannot be used together with moments or parameters that depend on other basic variables: the maximum "
                "or minimum of several would belong to several values of those.",
                key,
                suggestion="Give the model for the reference period and the size at hand.",
            )
            return False
    return True
