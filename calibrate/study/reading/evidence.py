"""The records of a study: a column of a file, or a value derived from several, each specimen as it is known."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from typing import Any

from calibrate.errors import InputError
from calibrate.records import Covariate, Exclude, ReadOptions, Sample, TextForm, UnitBy, read_column
from calibrate.records import read_value as read_derived
from calibrate.study.paths import resolve_inside
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.names import check_name
from calibrate.study.reading.schema import CovariateTable, RecordsEntry
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import in_unit, read_unit, read_value
from calibrate.units import ONE, Unit, parse_unit


def read_records(reading: Reading, raw: Any) -> dict[str, Sample | None]:
    """Read every sample; None stands for records that exist but are faulty (reported)."""
    return {
        name: _sample(reading, name, entry) for name, entry in read_table(reading, raw, ("records",)).items()
    }


def _sample(reading: Reading, name: str, raw: Any) -> Sample | None:
    place = ("records", name)
    check_name(reading, name, "records", place)
    entry = read_entry(reading, RecordsEntry, raw, place)
    content = entry.content
    if content is None or entry.dropped:
        return None
    if (content.column is None) == (content.value is None):
        reading.problem("needs either 'column' or 'value' (an expression in columns).", place)
        return None
    unit = read_unit(reading, content.unit, (*place, "unit"))
    try:
        path = resolve_inside(
            content.file, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
    except InputError as error:
        reading.collect(error, (*place, "file"))
        return None
    if content.unit is not None and unit is None:
        return None
    options = _options(reading, content, unit or ONE, place)
    if options is None:
        return None
    try:
        if content.column is not None:
            return read_column(
                path,
                content.column,
                unit=unit or ONE,
                display=content.file,
                sheet=content.sheet,
                options=options,
            )
        assert content.value is not None
        return read_derived(
            path,
            content.value,
            name=name,
            unit=unit,
            display=content.file,
            sheet=content.sheet,
            options=options,
        )
    except InputError as error:
        first, *others = error.problems
        # The slip may be in the file or in what the study asks of it: the first problem names both.
        asked = f"(Asked for by records.{name} in line {reading.line(place)} of {reading.document.shown}.)"
        hint = f"{first.suggestion} {asked}" if first.suggestion else asked
        first = dataclasses.replace(first, suggestion=hint)
        reading.collect(InputError([first, *others]), (*place, "file"))
        return None


def read_blocks(raw: Any, records: Mapping[str, Sample | None]) -> dict[str, int]:
    """Return the number of blocks of records of maxima, where it is stated (checked with the records)."""
    stated = {name: raw[name].get("blocks") for name, sample in records.items() if sample is not None}
    return {name: count for name, count in stated.items() if isinstance(count, int)}


def read_declared(
    reading: Reading, raw: Any, records: Mapping[str, Sample | None]
) -> dict[str, tuple[float, float]]:
    """Return the range or nominal value that records are declared to have, in their unit."""
    found = {}
    for name, sample in records.items():
        entry = raw.get(name) if isinstance(raw, dict) else None
        stated = entry.get("declared") if isinstance(entry, dict) else None
        if sample is None or stated is None:
            continue
        place = ("records", name, "declared")
        texts = stated if isinstance(stated, list) else [stated, stated]
        if not all(isinstance(text, (str, int, float)) for text in texts):
            continue  # reported with the records
        if len(texts) != 2:
            reading.problem("must be one nominal value, or the two ends of a range.", place)
            continue
        low, high = (_limit(reading, text, sample.unit, place, math.nan) for text in texts)
        if low > high:
            reading.problem(f"has its ends {low:g} and {high:g} in the wrong order.", place)
        elif low <= high:
            found[name] = (low, high)
    return found


def _options(reading: Reading, content: RecordsEntry, unit: Unit, place: Place) -> ReadOptions | None:
    """Return what is asked of the reading; None with problems."""
    before = len(reading.problems)
    units = _units(reading, content.units, (*place, "units"))
    limits = {
        key: _limit(reading, getattr(content, key), unit, (*place, key), default)
        for key, default in (("above", -math.inf), ("below", math.inf), ("detection_limit", -math.inf))
    }
    covariates = tuple(
        c
        for column, raw in content.normalise.items()
        if (c := _covariate(reading, column, raw, (*place, "normalise", column))) is not None
    )
    unit_by = None
    if content.unit_by is not None:
        by = _units(reading, content.unit_by.units, (*place, "unit_by", "units"))
        unit_by = UnitBy(content.unit_by.column, by)
    time_unit = _time_unit(reading, content, place)
    if len(reading.problems) > before:
        return None
    try:
        return ReadOptions(
            form=TextForm(content.separator, content.decimal, content.encoding),
            censoring=True,
            censored=content.censored,
            above=limits["above"],
            below=limits["below"],
            lot=content.lot,
            laboratory=content.laboratory,
            mode=content.mode,
            specimen=content.specimen,
            order=content.order,
            time=content.time,
            time_unit=time_unit,
            detection_limit=limits["detection_limit"],
            coverage=content.coverage,
            exclude=tuple(
                Exclude(reason=e.reason, row=e.row, where=e.where, equals=e.equals) for e in content.exclude
            ),
            units=units,
            measured=content.measured,
            unit_by=unit_by,
            normalise=covariates,
        )
    except InputError as error:
        reading.collect(error, place)
        return None


def _time_unit(reading: Reading, content: RecordsEntry, place: Place) -> Unit | None:
    """Return the unit of a column of times; None without one, or with a problem."""
    if content.time_unit is None:
        return None
    place = (*place, "time_unit")
    if content.time is None:
        reading.problem("says in which unit the times are, but the records name no column 'time'.", place)
    unit = read_unit(reading, content.time_unit, place)
    if unit is not None and unit.dimension != parse_unit("s").dimension:
        reading.problem(
            f"'{unit.text}' is {unit.dimension.describe()}; it must be a unit of time.",
            place,
            "For example 'year', 'day' or 'h'.",
        )
    return unit


def _units(reading: Reading, texts: Mapping[str, str], place: Place) -> dict[str, Unit]:
    found = {name: read_unit(reading, text, (*place, name)) for name, text in texts.items()}
    return {name: unit for name, unit in found.items() if unit is not None}


def _limit(reading: Reading, raw: float | str | None, unit: Unit, place: Place, default: float) -> float:
    """Return a limit in the unit of the sample."""
    found = None if raw is None else in_unit(reading, raw, unit, place, "the sample is")
    return default if found is None else found


def _covariate(reading: Reading, column: str, raw: Any, place: Place) -> Covariate | None:
    content = read_entry(reading, CovariateTable, raw, place).content
    if content is None:
        return None
    reference = read_value(reading, content.reference, (*place, "reference"))
    if reference is None:
        return None
    if reference.number is None or reference.unit is None:
        reading.problem("must be a number with a unit, such as '1.5 mm'.", (*place, "reference"))
        return None
    try:
        return Covariate(
            column=column,
            reference=reference.number,
            unit=reference.unit,
            exponent=content.exponent,
            standard_error=content.standard_error,
        )
    except InputError as error:
        reading.collect(error, place)
        return None
