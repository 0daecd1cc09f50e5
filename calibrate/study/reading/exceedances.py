"""``[variables.NAME.exceedances]``: a variable that is the maximum of a period from the values above a threshold."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calibrate.distributions import Family
from calibrate.errors import did_you_mean
from calibrate.records import Sample
from calibrate.study.events import YEAR, find_events
from calibrate.study.model import Exceedances, Variable
from calibrate.study.reading import schema
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry
from calibrate.study.reading.subject import Model, Subject
from calibrate.study.reading.values import Value, in_unit, read_value
from calibrate.units import Unit, format_unit, parse_unit

FAMILIES = ("gev", "gumbel")
LEAST = 3
"""Events; one more than there are parameters."""

_TIME = parse_unit("s").dimension

_ALONE = {
    "method": "are fitted by maximum likelihood; leave the method out",
    "estimate": "estimate scale and shape; leave 'estimate' out",
    "stands_for": "cannot be separated into lots",
    "lot": "cannot be separated into lots",
    "predictive": "carry no parameter uncertainty in this version",
    "failure_mode": "are of an action, failure modes of a strength",
    "size_ratio": "are of an action, size_ratio of a strength",
}
"""Keys that a variable with exceedances cannot have, and why: continues "exceedances"."""


def exceedance_model(
    subject: Subject,
    content: schema.VariableEntry,
    families: list[Family],
    values: Mapping[str, Value],
    unit: Unit | None,
) -> tuple[Model, Exceedances] | None:
    """Check a variable with exceedances; None with problems."""
    if content.records is None:
        subject.problem("needs 'records': the values above the threshold come from them.", "exceedances")
        return None
    sound = _keys_fit(subject, content, values)
    entry = read_entry(
        subject.around.reading, schema.ExceedancesTable, content.exceedances, subject.place("exceedances")
    )
    if content.records not in subject.around.records:
        known = did_you_mean(content.records, subject.around.records)
        subject.problem(f"names '{content.records}', which is not defined.", "records", suggestion=known)
        return None
    sample = subject.around.records[content.records]
    if sample is None:
        return None
    sound &= _family_fits(subject, families)
    sound &= _unit_fits(subject, content.records, unit, sample)
    sound &= _sample_fits(subject, content.records, sample)
    table = entry.content
    if table is None or entry.dropped:
        return None
    asked = _read(subject, content.records, table, sample)
    if asked is None or not sound or not _enough(subject, content.records, asked, sample):
        return None
    return Model((families[0].name,), {}, unit or sample.unit, sample.unit.dimension), asked


def check_blocks(
    reading: Reading,
    variables: Mapping[str, Variable | None],
    blocks: Mapping[str, int],
    records: Mapping[str, Sample | None],
) -> None:
    """Refuse records that are said to be block maxima while a variable takes them for something else."""
    for name, variable in variables.items():
        if variable is None or variable.records is None:
            continue
        place, sample = ("records", variable.records), records[variable.records]
        covered = sample is not None and sample.coverage is not None
        if variable.exceedances is not None and (variable.records in blocks or covered):
            reading.problem(
                f"says that these are block maxima, but variables.{name} takes their exceedances of a threshold.",
                (*place, "coverage" if covered else "blocks"),
                "Remove one of the two.",
            )
        elif covered and variable.period is None:
            reading.problem(
                f"is the observed part of blocks, but variables.{name} has no period, which is their length.",
                (*place, "coverage"),
                f"Write variables.{name}.period = 1 for years.",
            )


def _keys_fit(subject: Subject, content: schema.VariableEntry, values: Mapping[str, Value]) -> bool:
    sound = True
    for key, why in _ALONE.items():
        if getattr(content, key):
            subject.problem(f"does not go with exceedances: they {why}.", key)
            sound = False
    for key in values:
        subject.problem(
            "does not go with exceedances: scale and shape are estimated, the threshold stands with them.",
            key,
            suggestion="Remove it; the family gumbel holds the shape at 0.",
        )
        sound = False
    if content.role not in (None, "action"):
        subject.problem(f"is {content.role}, but exceedances of a threshold are of an action.", "role")
        sound = False
    return sound


def _family_fits(subject: Subject, families: list[Family]) -> bool:
    if len(families) == 1 and families[0].name in FAMILIES:
        return True
    got = " and ".join(f.name for f in families) or "best"
    subject.problem(
        "must be 'gev' (shape estimated) or 'gumbel' (exponential excesses, shape 0) where exceedances make the "
        f"variable; got {got}.",
        "family",
        suggestion="The maximum of a period from exceedances has no other family.",
    )
    return False


def _unit_fits(subject: Subject, records: str, unit: Unit | None, sample: Sample) -> bool:
    if unit is None or unit.dimension == sample.unit.dimension:
        return True
    subject.problem(
        f"'{unit.text}' is {unit.dimension.describe()}, but the records '{records}' are "
        f"{sample.unit.dimension.describe()}.",
        "unit",
    )
    return False


def _sample_fits(subject: Subject, records: str, sample: Sample) -> bool:
    seen = sample.observations
    if seen.censored:
        bounds = seen.n - seen.n_exact
        subject.problem(
            f"names '{records}', with {bounds} of {seen.n} values known by bounds only; exceedances need exact values.",
            "records",
        )
    elif np.isfinite(seen.below):
        subject.problem(
            f"names '{records}', where only values below {seen.below:g} could enter; the largest are missing.",
            "records",
        )
    elif sample.normalisation is not None:
        subject.problem(f"names '{records}', which are normalised; exceedances are not.", "records")
    else:
        return True
    return False


def _read(
    subject: Subject, records: str, table: schema.ExceedancesTable, sample: Sample
) -> Exceedances | None:
    reading, place = subject.around.reading, subject.place("exceedances")
    threshold = in_unit(reading, table.threshold, sample.unit, (*place, "threshold"), "the records are")
    run_length = None
    if table.run_length is not None:
        run_length = _run_length(subject, records, table.run_length, sample)
        if run_length is None:
            return None
    if threshold is None:
        return None
    above = sample.observations.above
    if threshold < above:
        subject.problem(
            f"is {threshold:g}, but only values above {above:g} could enter the records '{records}'.",
            "exceedances",
            "threshold",
            suggestion="Take a threshold that is not lower.",
        )
        return None
    return Exceedances(threshold, table.years, run_length)


def _run_length(subject: Subject, records: str, raw: float | str, sample: Sample) -> float | None:
    """Return a run length in years; None with a problem."""
    where = ("exceedances", "run_length")
    value = read_value(subject.around.reading, raw, subject.place(*where))
    if value is None:
        return None
    stated = value.stated_dimension
    if value.number is None or value.unit is None or stated is None or not stated.agrees(_TIME):
        subject.problem(f"must be a time, such as '3 day' or '72 h'; got '{value.text}'.", *where)
        return None
    if value.number <= 0.0:
        subject.problem(f"must be positive; got '{value.text}'.", *where)
        return None
    if sample.times is None:
        subject.problem(
            f"needs the time of each value, but the records '{records}' name no column of times.",
            *where,
            suggestion='Add time = "COLUMN" to the records.',
        )
        return None
    return value.number * value.unit.factor / YEAR


def _enough(subject: Subject, records: str, asked: Exceedances, sample: Sample) -> bool:
    """Check that the threshold leaves events enough."""
    over = int(np.count_nonzero(sample.values > asked.threshold))
    unit = f" {format_unit(sample.unit.text)}" if sample.unit.text else ""
    low, high = float(sample.values.min()), float(sample.values.max())
    if over < LEAST:
        subject.problem(
            f"{asked.threshold:g}{unit} is exceeded by {over} of the {sample.n} values of '{records}'; at least "
            f"{LEAST} are needed.",
            "exceedances",
            "threshold",
            suggestion=f"The values lie between {low:g} and {high:g}{unit}.",
        )
        return False
    events = find_events(sample, asked).n
    if events < LEAST:
        subject.problem(
            f"leaves {events} of the {over} exceedances as events; at least {LEAST} are needed.",
            "exceedances",
            "run_length",
            suggestion="Shorten the run length, or lower the threshold.",
        )
        return False
    return True
