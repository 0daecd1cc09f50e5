"""``[resistance.NAME]``: component tests with the prediction of each, and the model factor as a sample."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import parse
from calibrate.records import Exclude, Sample, TextForm, UnitBy
from calibrate.resistance import FORMATS, Format, LoadStatistics, Part, format_named
from calibrate.study.component_records import Slip, TestTable, component_records, slips
from calibrate.study.model import ComponentRecords, MeanValueQuestion, NorthAmericanQuestion
from calibrate.study.paths import resolve_inside
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.names import check_name
from calibrate.study.reading.schema import LoadsTable, MeanValueTable, NorthAmericanTable, ResistanceEntry
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import read_unit
from calibrate.units import ONE

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
                did_you_mean(tests.second_layer, others)
                if (others := [n for n in found if n != name])
                else f"Add a section [{SECTION}.{tests.second_layer}].",
            )
    return found


def _tests(reading: Reading, name: str, raw: Any, place: Place) -> ComponentRecords | None:
    entry = read_entry(reading, ResistanceEntry, raw, place)
    content = entry.content
    if content is None or entry.dropped:
        return None
    american = _north_american(reading, content.north_american, (*place, "north_american"))
    bias = _mean_value(reading, content.mean_value, (*place, "mean_value"))
    asked = _asked(reading, name, content, place)
    if asked is None:
        return None
    wrong = slips(asked) or _unknown_splits(asked, content)
    for key, problem in wrong:
        reading.problem(problem.message, (*place, key), problem.suggestion)
    if wrong:
        return None
    try:
        path = resolve_inside(
            content.file, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
        return component_records(
            path,
            asked,
            survivors=content.survivors,
            subsets=content.subsets,
            nominal_ratio=content.nominal_ratio,
            table_factors=content.factors == "table",
            trend_level=content.trend_level,
            split_at=dict(content.split_at),
            north_american=american,
            mean_value=bias,
            description=content.description.strip(),
            line=reading.line(place),
            tail_share=content.tail_share,
            second_layer=content.second_layer,
        )
    except InputError as error:
        first, *others = error.problems
        # The slip may be in the file or in what the study asks of it: the first problem names both.
        line = f"(Asked for by {SECTION}.{name} in line {reading.line(place)} of {reading.document.shown}.)"
        hint = f"{first.suggestion} {line}" if first.suggestion else line
        reading.collect(InputError([dataclasses.replace(first, suggestion=hint), *others]), (*place, "file"))
        return None


def _unknown_splits(asked: TestTable, content: ResistanceEntry) -> list[Slip]:
    known = ["prediction", *(asked.inputs or parse(content.prediction).names)]
    return [
        Slip(
            "split_at",
            Problem(
                f"divides '{name}', which is no input of the tests.", suggestion=did_you_mean(name, known)
            ),
        )
        for name in content.split_at
        if name not in known
    ]


def _asked(reading: Reading, name: str, content: ResistanceEntry, place: Place) -> TestTable | None:
    """Return which columns are read and how; None with problems."""
    unit = read_unit(reading, content.unit, (*place, "unit"))
    units = {
        column: read_unit(reading, text, (*place, "units", column)) for column, text in content.units.items()
    }
    known = {column: u for column, u in units.items() if u is not None}
    unit_by = None
    if content.unit_by is not None:
        by_label = {
            label: read_unit(reading, text, (*place, "unit_by", "units", label))
            for label, text in content.unit_by.units.items()
        }
        if None in by_label.values():
            return None
        unit_by = UnitBy(content.unit_by.column, {k: u for k, u in by_label.items() if u is not None})
    if (content.unit is not None and unit is None) or len(known) < len(units):
        return None
    try:
        return TestTable(
            name=name,
            file=content.file,
            measured=content.measured,
            prediction=content.prediction,
            unit=unit or ONE,
            units=known,
            inputs=tuple(content.inputs),
            nominal=tuple(content.nominal),
            survived=content.survived,
            subgroup=content.subgroup,
            cluster=content.cluster,
            specimen=content.specimen,
            sheet=content.sheet,
            form=TextForm(content.separator, content.decimal, content.encoding),
            exclude=tuple(
                Exclude(reason=e.reason, row=e.row, where=e.where, equals=e.equals) for e in content.exclude
            ),
            covs=content.covs,
            known_scatter=content.known_scatter,
            unit_by=unit_by,
        )
    except InputError as error:
        reading.collect(error, place)
        return None


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
    if content.loads is not None and content.coefficients == "printed":
        reading.problem(
            "are 'printed', which go with the loads of the standard; with loads of your own they are derived.",
            (*place, "coefficients"),
            "Leave coefficients out, or write 'derived'.",
        )
        return None
    if content.loads is not None:
        loads = _loads(reading, content.loads, (*place, "loads"))
        if loads is None:
            return None
        if loads.dead_to_live.size != 1:
            reading.problem("takes one ratio here.", (*place, "loads", "dead_to_live"))
            return None
        chosen = dataclasses.replace(chosen, name=f"{chosen.name}, own loads", loads=loads)
    if content.target is not None:
        chosen = dataclasses.replace(chosen, target=content.target)
    derived = "printed" if content.loads is None else "derived"
    return NorthAmericanQuestion(
        chosen,
        content.coefficients or derived,
        Part(content.material.mean, content.material.cov),
        Part(content.fabrication.mean, content.fabrication.cov),
    )


def _loads(reading: Reading, loads: LoadsTable, place: Place) -> LoadStatistics | None:
    ratios = np.array(loads.dead_to_live, dtype=np.float64)
    try:
        return LoadStatistics(
            dead_factor=loads.dead_factor,
            live_factor=loads.live_factor,
            dead_to_live=ratios[0] if ratios.size == 1 else ratios,
            dead_bias=loads.dead_bias,
            live_bias=loads.live_bias,
            dead_cov=loads.dead_cov,
            live_cov=loads.live_cov,
        )
    except InputError as error:
        reading.collect(InputError([Problem(p.message) for p in error.problems]), place)
        return None


def _mean_value(reading: Reading, content: MeanValueTable | None, place: Place) -> MeanValueQuestion | None:
    if content is None:
        return None
    statistics = _loads(reading, content.loads, (*place, "loads"))
    return None if statistics is None else MeanValueQuestion(content.target, statistics)
