"""``[resistance.NAME]``: component tests with the prediction of each, and the model factor as a sample."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import parse
from calibrate.records import Exclude, ReadOptions, Sample, TextForm, UnitBy, read_column
from calibrate.records import read_value as read_derived
from calibrate.resistance import FORMATS, ComponentTests, Format, LoadStatistics, Part, format_named
from calibrate.study.model import ComponentRecords, MeanValueQuestion, NorthAmericanQuestion
from calibrate.study.paths import resolve_inside
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import check_name
from calibrate.study.reading.schema import (
    MeanValueTable,
    NorthAmericanTable,
    ResistanceEntry,
    read_entry,
    read_table,
)
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import read_unit
from calibrate.units import ONE, Unit, parse_unit

SECTION = "resistance"


def read_resistances(
    reading: Reading, raw: Any, records: Mapping[str, Sample | None]
) -> dict[str, ComponentRecords | None]:
    """Read every table of component tests; None stands for one that exists but is faulty (reported)."""
    found: dict[str, ComponentRecords | None] = {}
    for name, entry in read_table(reading, raw, (SECTION,)).items():
        place = (SECTION, name)
        check_name(reading, name, SECTION, place)
        if name in records:
            reading.problem(
                f"has the name of records.{name}; their samples would be one.", place, "Rename one."
            )
            found[name] = None
            continue
        found[name] = _tests(reading, name, entry, place)
    for name, tests in found.items():
        if tests is not None and tests.second_layer is not None and tests.second_layer not in found:
            reading.problem(
                f"names '{tests.second_layer}', which is no other table of component tests.",
                (SECTION, name, "second_layer"),
                did_you_mean(tests.second_layer, [n for n in found if n != name]),
            )
    return found


def _tests(reading: Reading, name: str, raw: Any, place: Place) -> ComponentRecords | None:
    entry = read_entry(reading, ResistanceEntry, raw, place)
    content = entry.content
    if content is None or entry.dropped:
        return None
    unit = read_unit(reading, content.unit, (*place, "unit"))
    units = {
        column: read_unit(reading, text, (*place, "units", column)) for column, text in content.units.items()
    }
    if (content.unit is not None and unit is None) or None in units.values():
        return None
    if not _measured_only(reading, content, place):
        return None
    american = _north_american(reading, content.north_american, (*place, "north_american"))
    bias = _mean_value(reading, content.mean_value, (*place, "mean_value"))
    try:
        path = resolve_inside(
            content.file, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
        known = {c: u for c, u in units.items() if u is not None}
        ratio, tests = _read(path, content, name, unit or ONE, known)
        return ComponentRecords(
            name=name,
            file=content.file,
            measured=content.measured,
            prediction=content.prediction,
            unit=unit or ONE,
            tests=tests,
            ratio=ratio,
            survivors=content.survivors,
            subsets=content.subsets,
            covs=dict(content.covs),
            nominal_ratio=content.nominal_ratio,
            known_scatter=dict(content.known_scatter),
            table_factors=content.factors == "table",
            trend_level=content.trend_level,
            split_at=content.split_at,
            north_american=american,
            mean_value=bias,
            description=content.description.strip(),
            line=reading.line(place),
            gradient=_elasticities(path, content, known),
            tail_share=content.tail_share,
            second_layer=content.second_layer,
        )
    except InputError as error:
        first, *others = error.problems
        asked = f"(Asked for by {SECTION}.{name} in line {reading.line(place)} of {reading.document.shown}.)"
        hint = f"{first.suggestion} {asked}" if first.suggestion else asked
        reading.collect(InputError([dataclasses.replace(first, suggestion=hint), *others]), (*place, "file"))
        return None


def _measured_only(reading: Reading, content: ResistanceEntry, place: Place) -> bool:
    """Stop where the prediction uses a column of nominal values: its scatter would be counted twice."""
    try:
        names = parse(content.prediction).names
    except InputError as error:
        reading.collect(error, (*place, "prediction"))
        return False
    used = [n for n in names if n in content.nominal]
    if used:
        reading.problem(
            f"uses '{used[0]}', a column of nominal values: the model factor would contain the scatter of that "
            "property, and the limit state adds it again.",
            (*place, "prediction"),
            "Predict every test from its measured properties.",
        )
    return not used


def _read(
    path: Any, content: ResistanceEntry, name: str, unit: Unit, units: Mapping[str, Unit]
) -> tuple[Sample, ComponentTests]:
    """Return measured over predicted as a sample, and the tests."""
    unit_by = None
    if content.unit_by is not None:
        unit_by = UnitBy(
            content.unit_by.column, {k: parse_unit(text) for k, text in content.unit_by.units.items()}
        )
    options = ReadOptions(
        form=TextForm(content.separator, content.decimal, content.encoding),
        censoring=True,
        censored=content.survived,
        lot=content.cluster,
        mode=content.subgroup,
        specimen=content.specimen,
        unit_by=unit_by,
        measured=content.measured,
        exclude=tuple(
            Exclude(reason=e.reason, row=e.row, where=e.where, equals=e.equals) for e in content.exclude
        ),
    )
    measured = read_column(
        path, content.measured, unit=unit, display=content.file, sheet=content.sheet, options=options
    )
    derived = dataclasses.replace(options, units={**units, content.measured: unit}, measured=content.measured)
    ratio = read_derived(
        path,
        f"{content.measured} / ({content.prediction})",
        name=name,
        unit=parse_unit(""),
        display=content.file,
        sheet=content.sheet,
        options=derived,
    )
    inputs = {
        column: _numbers(path, content, column)
        for column in content.inputs or parse(content.prediction).names
    }
    reached = measured.observations.lower
    with np.errstate(all="ignore"):
        predicted = reached / ratio.observations.lower
    tests = ComponentTests(
        reached,
        predicted,
        measured.observations.right,
        inputs,
        measured.labels.get("mode"),
        measured.labels.get("lot"),
        measured.rows,
    )
    return ratio, tests


def _elasticities(path: Any, content: ResistanceEntry, units: Mapping[str, Unit]) -> dict[str, float]:
    """Return (dr/dx_i) sd_i/r of each basic variable with a cov, at the means of its column.

    A basic variable that is no column of the prediction counts as a factor of it.
    """
    expression = parse(content.prediction)
    moving = tuple(name for name in content.covs if name in expression.names)
    if not moving:
        return {}
    values = {
        name: float(np.mean(_numbers(path, content, name))) * units.get(name, ONE).factor
        for name in expression.names
    }
    whole, slopes = expression.gradient(values, moving)
    share = {n: float(s) * values[n] / float(whole) for n, s in zip(moving, slopes, strict=True)}
    return {name: share.get(name, 1.0) * cov for name, cov in content.covs.items()}


def _numbers(path: Any, content: ResistanceEntry, column: str) -> NDArray[np.float64]:
    """Return a column of plain numbers for the tests that count."""
    options = ReadOptions(
        form=TextForm(content.separator, content.decimal, content.encoding),
        exclude=tuple(
            Exclude(reason=e.reason, row=e.row, where=e.where, equals=e.equals) for e in content.exclude
        ),
    )
    return read_column(
        path, column, unit=ONE, display=content.file, sheet=content.sheet, options=options
    ).values


def _north_american(
    reading: Reading, content: NorthAmericanTable | None, place: Place
) -> NorthAmericanQuestion | None:
    if content is None:
        return None
    names = list(FORMATS)
    if content.format not in names:
        reading.raw_problem(
            f"{reading.dotted((*place, 'format'))} is '{content.format}'; there are {', '.join(names)}.",
            (*place, "format"),
            did_you_mean(content.format, names),
        )
        return None
    chosen: Format = format_named(content.format)
    return NorthAmericanQuestion(
        chosen,
        content.coefficients,
        Part(content.material.mean, content.material.cov),
        Part(content.fabrication.mean, content.fabrication.cov),
    )


def _mean_value(reading: Reading, content: MeanValueTable | None, place: Place) -> MeanValueQuestion | None:
    if content is None:
        return None
    loads = content.loads
    try:
        statistics = LoadStatistics(
            dead_factor=loads.dead_factor,
            live_factor=loads.live_factor,
            dead_to_live=np.array(loads.dead_to_live, dtype=np.float64),
            dead_bias=loads.dead_bias,
            live_bias=loads.live_bias,
            dead_cov=loads.dead_cov,
            live_cov=loads.live_cov,
        )
    except InputError as error:
        reading.collect(InputError([Problem(p.message) for p in error.problems]), (*place, "loads"))
        return None
    return MeanValueQuestion(content.target, statistics)
