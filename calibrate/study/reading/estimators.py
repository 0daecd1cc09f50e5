"""How a variable is fitted: the estimator with its options, and what the variable stands for among lots."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from calibrate.errors import InputError, did_you_mean
from calibrate.fitting.methods.registry import method_of
from calibrate.study.reading import schema
from calibrate.study.reading.entries import read_entry
from calibrate.study.reading.subject import Subject
from calibrate.study.reading.values import read_value

LOT_FAMILIES = ("normal", "lognormal")


@dataclass(frozen=True, slots=True)
class MethodChoice:
    """An estimator and its options, in the unit of the records."""

    name: str = "likelihood"
    options: Mapping[str, float] = field(default_factory=dict)


def read_method(subject: Subject, content: schema.VariableEntry) -> MethodChoice | None:
    """Return how a variable is fitted; None with problems."""
    if not _lots_fit(subject, content) or not _mode_fits(subject, content):
        return None
    raw = content.method
    if raw is None:
        return MethodChoice()
    if isinstance(raw, str):
        raw = {"name": raw}
    reading = subject.around.reading
    entry = read_entry(reading, schema.MethodTable, raw, subject.place("method"))
    table = entry.content
    if table is None or entry.dropped:
        return None
    options: dict[str, float] = {}
    for key in ("fraction", "cov", "prior_cov", "prior_n", "prior_nu"):
        value = getattr(table, key)
        if value is not None:
            options[key] = value
    if table.prior_mean is not None:
        mean = _prior_mean(subject, content, table.prior_mean)
        if mean is None:
            return None
        options["prior_mean"] = mean
    try:
        method_of(table.name).check_options(options)
    except InputError as error:
        subject.collect(error, "method")
        return None
    return MethodChoice(table.name, options)


def _prior_mean(subject: Subject, content: schema.VariableEntry, raw: float | str) -> float | None:
    place = subject.place("method", "prior_mean")
    value = read_value(subject.around.reading, raw, place)
    sample = subject.around.records.get(content.records or "")
    if value is None or sample is None:
        return None
    stated = value.stated_dimension
    if value.number is None or value.unit is None or stated is None:
        subject.problem("must be a number with a unit.", "method", "prior_mean")
        return None
    if not stated.agrees(sample.unit.dimension):
        subject.problem(
            f"is {stated.describe()}, but the records are {sample.unit.dimension.describe()}.",
            "method",
            "prior_mean",
        )
        return None
    return value.number * value.unit.factor / sample.unit.factor


def _mode_fits(subject: Subject, content: schema.VariableEntry) -> bool:
    """Check the failure mode that a variable names."""
    if content.failure_mode is None:
        return True
    sample = subject.around.records.get(content.records or "")
    if sample is None:
        return False
    if "mode" not in sample.labels:
        subject.problem(
            f"names a failure mode, but the records '{content.records}' name no column of modes.",
            "failure_mode",
            suggestion='Add mode = "COLUMN" to the records.',
        )
        return False
    known = list(dict.fromkeys(str(m) for m in sample.labels["mode"] if m))
    if content.failure_mode not in known:
        subject.problem(
            f"'{content.failure_mode}' does not occur among the failure modes of the records.",
            "failure_mode",
            suggestion=did_you_mean(content.failure_mode, known),
        )
        return False
    return True


def _lots_fit(subject: Subject, content: schema.VariableEntry) -> bool:
    """Check what a variable says of lots."""
    if content.stands_for is None:
        if content.lot is not None:
            subject.problem(
                "names a lot, but the variable does not say that it stands_for 'within a lot'.", "lot"
            )
        return content.lot is None
    sample = subject.around.records.get(content.records or "")
    if sample is not None and "lot" not in sample.labels:
        subject.problem(
            f"is about lots, but the records '{content.records}' name no column of lots.",
            "stands_for",
            suggestion='Add lot = "COLUMN" to the records.',
        )
        return False
    if len(content.family) != 1 or content.family[0] not in LOT_FAMILIES:
        subject.problem(
            "separates scatter between and within lots, which is known for the families normal and lognormal only.",
            "stands_for",
            suggestion="Name one of the two as family.",
        )
        return False
    if content.method is not None or content.predictive:
        subject.problem("has its own estimator; leave method and predictive out.", "stands_for")
        return False
    return True
