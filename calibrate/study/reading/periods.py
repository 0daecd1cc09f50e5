"""Periods that must agree: the target's with the reference period, an action's with its conversion."""

from __future__ import annotations

from calibrate.actions.periods import beta_of_period, in_years
from calibrate.expressions import Expression
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import MODELS
from calibrate.study.reading.schema import StudySection, TargetSection, VariableEntry
from calibrate.study.reading.subject import Subject
from calibrate.study.reading.values import read_value, value_dimension
from calibrate.units import DIMENSIONLESS


def check_target_period(reading: Reading, head: StudySection | None, target: TargetSection | None) -> None:
    """Stop where the target is stated for another period than every beta of the study."""
    if head is None or target is None or target.period is None or target.period == head.reference_period:
        return
    reference = head.reference_period
    converted = float(beta_of_period(target.beta, reference / target.period))
    reading.problem(
        f"is {in_years(target.period)}, but every β of this study is for {in_years(reference)}. Under full "
        f"independence a target of {target.beta:g} for {in_years(target.period)} is "
        f"{converted:.2f} for {in_years(reference)}.",
        ("target", "period"),
        "Choose one period: change study.reference_period, or state the target for it.",
    )


def check_conversion(subject: Subject, content: VariableEntry) -> bool:
    """Check what a variable says of its conversion."""
    if content.conversion == "none" and not content.conversion_reason.strip():
        subject.problem(
            "leaves out the conversion to the reference period without a reason.",
            "conversion",
            suggestion="Say why in conversion_reason.",
        )
        return False
    if content.conversion is not None and content.period is None and content.exceedances is None:
        subject.problem("says how to convert, but the variable has no period.", "conversion")
        return False
    if content.period is not None and content.size_ratio is not None:
        subject.problem("is of a strength, period of an action; a variable cannot have both.", "size_ratio")
        return False
    return True


def renewed(subject: Subject, content: VariableEntry) -> VariableEntry:
    """Return the entry with the period between renewals, where it says how often a year the value comes anew."""
    if content.renewal_rate is None:
        return content
    if content.period is not None:
        subject.problem("says how often the value comes anew, and so does period; state one.", "renewal_rate")
        return content
    return content.model_copy(update={"period": 1.0 / content.renewal_rate})


def read_size_ratio(subject: Subject, content: VariableEntry) -> Expression | None:
    """Return the ratio of sizes of a strength; None without one, or with a problem."""
    if content.size_ratio is None:
        return None
    place = subject.place("size_ratio")
    value = read_value(subject.around.reading, content.size_ratio, place)
    if value is None:
        return None
    found = value_dimension(subject.around.names, value, place, MODELS)
    if found is None:
        return None
    if not found.agrees(DIMENSIONLESS):
        subject.problem(f"must be dimensionless; it is {found.describe()}.", "size_ratio")
        return None
    return value.expression
