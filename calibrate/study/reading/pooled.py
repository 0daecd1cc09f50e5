"""A shape that stations share: which records ``pooled_shape`` may name, and beside what."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.errors import did_you_mean
from calibrate.records import Sample
from calibrate.study.reading.schema import VariableEntry
from calibrate.study.reading.subject import Subject
from calibrate.study.reading.values import Value

KEY = "pooled_shape"
FAMILY = "gev"
METHODS = ("likelihood", "l_moments")
LIKE_THIS = f'Write family = "{FAMILY}".'


def check_pooled(
    subject: Subject, content: VariableEntry, values: Mapping[str, Value], method: str, sample: Sample
) -> bool:
    """Check a variable whose shape is pooled over several records; False with problems.

    Parameters
    ----------
    values : mapping
        Arguments beside ``records``.
    method : str
        Estimator of location and scale.
    sample : Sample
        The variable's own records.
    """
    before = len(subject.around.reading.problems)
    families = list(dict.fromkeys(content.family))
    if families != [FAMILY]:
        subject.problem(
            f"shares the shape of the family '{FAMILY}' between stations; the variable names "
            f"{', '.join(repr(f) for f in families)}.",
            KEY,
            suggestion=LIKE_THIS,
        )
    if "shape" in values:
        subject.problem(
            "stands beside 'shape', which gives what it would estimate.", KEY, suggestion="Remove one."
        )
    if content.failure_mode is not None:
        subject.problem(
            "is about block maxima of actions; a failure mode belongs to a strength.",
            KEY,
            suggestion="Remove one.",
        )
    if method not in METHODS:
        known = " and ".join(f"'{m}'" for m in METHODS)
        subject.problem(
            f"leaves location and scale to the methods {known}; '{method}' is none of them.",
            KEY,
            suggestion="Leave 'method' out.",
        )
    _check_records(subject, content, sample)
    return len(subject.around.reading.problems) == before


def _check_records(subject: Subject, content: VariableEntry, sample: Sample) -> None:
    records, names = subject.around.records, list(dict.fromkeys(content.pooled_shape))
    unknown = [name for name in names if name not in records]
    for name in unknown:
        hint = did_you_mean(name, records)
        subject.problem(f"names the records '{name}', which are not defined.", KEY, suggestion=hint)
    if len(names) < 2:
        subject.problem(
            f"names {len(names)} station; a shape is pooled over at least two different ones.",
            KEY,
            suggestion="Name more records, or leave it out.",
        )
    elif content.records not in names and not unknown:
        subject.problem(
            f"does not name the variable's own records '{content.records}'.", KEY, suggestion="Add them."
        )
    dimension = sample.unit.dimension
    for name in names:
        other = records.get(name)
        if other is not None and other.unit.dimension != dimension:
            subject.problem(
                f"names '{name}', which is {other.unit.dimension.describe()}; the records '{content.records}' are "
                f"{dimension.describe()}.",
                KEY,
            )
