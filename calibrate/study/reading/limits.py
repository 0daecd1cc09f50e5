"""``upper_limit``: the largest value of a basic variable that is physically possible."""

from __future__ import annotations

from calibrate.study.reading.names import MODELS
from calibrate.study.reading.schema import VariableEntry
from calibrate.study.reading.subject import Model, Subject, constants_only
from calibrate.study.reading.values import read_value, value_dimension


def read_upper_limit(subject: Subject, content: VariableEntry, model: Model) -> float | None:
    """Return the limit in SI units; None without one, or with a problem."""
    if content.upper_limit is None:
        return None
    place = subject.place("upper_limit")
    value = read_value(subject.around.reading, content.upper_limit, place)
    found = None if value is None else value_dimension(subject.around.names, value, place, MODELS)
    if value is None or found is None:
        return None
    if not found.agrees(model.dimension):
        subject.problem(
            f"is {found.describe()}, but the variable is {model.dimension.describe()}.", "upper_limit"
        )
        return None
    if not constants_only(value, subject.around.constants):
        subject.problem(
            "differs between design situations; what is physically possible is one value.",
            "upper_limit",
            suggestion="Use quantities only.",
        )
        return None
    return float(value.expression.value(subject.around.constants))
