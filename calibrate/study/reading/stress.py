"""``stress_profile``: uneven stress along a part of Weibull material."""

from __future__ import annotations

from calibrate.errors import InputError
from calibrate.expressions import Expression, dimension_of
from calibrate.situations.variables import POSITION
from calibrate.study.reading.names import MODELS
from calibrate.study.reading.schema import VariableEntry
from calibrate.study.reading.subject import Subject
from calibrate.study.reading.values import read_value
from calibrate.units import DIMENSIONLESS


def read_stress_profile(subject: Subject, content: VariableEntry) -> Expression | None:
    """Return the profile as an expression in quantities and ``position``; None without one, or with a problem."""
    if content.stress_profile is None:
        return None
    key, around = "stress_profile", subject.around
    if content.family != ["weibull"] or content.predictive:
        subject.problem(
            'gives the equivalent size of a part of Weibull material; it needs family = "weibull", not predictive.',
            key,
            suggestion="For other families state the equivalent size yourself, in size_ratio.",
        )
        return None
    if content.period is not None:
        subject.problem("is of a strength, period of an action; a variable cannot have both.", key)
        return None
    if around.names.kind(POSITION) is not None:
        subject.problem(f"needs the name '{POSITION}', which the study gives to something else.", key)
        return None
    value = read_value(around.reading, content.stress_profile, subject.place(key))
    if value is None:
        return None
    others = tuple(n for n in value.expression.names if n != POSITION)
    known = around.names.check_use(others, subject.place(key), MODELS)
    if known is None:
        return None
    if varying := [n for n in others if n not in around.constants]:
        subject.problem(
            f"uses '{varying[0]}'; a stress profile is written in quantities and '{POSITION}', from 0 to 1.",
            key,
        )
        return None
    try:
        found = dimension_of(value.expression, {**known, POSITION: DIMENSIONLESS})
    except InputError as error:
        subject.collect(error, key)
        return None
    if not found.agrees(DIMENSIONLESS):
        subject.problem(
            f"must be dimensionless, stress over its largest value; it is {found.describe()}.", key
        )
        return None
    return value.expression
