"""The records of a study: one column of one file each."""

from __future__ import annotations

import dataclasses
from typing import Any

from calibrate.errors import InputError
from calibrate.records import Sample, read_column
from calibrate.study.paths import resolve_inside
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import check_name
from calibrate.study.reading.schema import RecordsEntry, read_entry, read_table
from calibrate.study.reading.values import read_unit


def read_records(reading: Reading, raw: Any) -> dict[str, Sample | None]:
    """Read every sample; None stands for records that exist but are faulty (reported)."""
    return {
        name: _sample(reading, name, entry) for name, entry in read_table(reading, raw, ("records",)).items()
    }


def _sample(reading: Reading, name: str, raw: Any) -> Sample | None:
    place = ("records", name)
    check_name(reading, name, "records", place)
    entry = read_entry(reading, RecordsEntry, raw, place).content
    if entry is None:
        return None
    unit = read_unit(reading, entry.unit, (*place, "unit"))
    try:
        path = resolve_inside(
            entry.file, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
    except InputError as error:
        reading.collect(error, (*place, "file"))
        return None
    if unit is None:
        return None
    try:
        return read_column(path, entry.column, unit=unit, display=entry.file, sheet=entry.sheet)
    except InputError as error:
        first, *others = error.problems
        # The slip may be in the file or in what the study asks of it: the first problem names both.
        asked = f"(Asked for by records.{name} in line {reading.line(place)} of {reading.document.shown}.)"
        hint = f"{first.suggestion} {asked}" if first.suggestion else asked
        first = dataclasses.replace(first, suggestion=hint)
        reading.collect(InputError([first, *others]), (*place, "file"))
        return None
