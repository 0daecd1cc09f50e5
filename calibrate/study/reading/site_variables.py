"""A variable over classes of sites: its moments and parameters use quantities and the columns of its site table."""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Mapping
from functools import partial
from typing import Any

import numpy as np

from calibrate.distributions import Family
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.study.model import SiteTable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.given import given_model
from calibrate.study.reading.names import OVER_SITES, Name, NameSpace
from calibrate.study.reading.schema import VariableEntry
from calibrate.study.reading.subject import Model, Subject
from calibrate.study.reading.values import Value
from calibrate.units import ONE, Unit

_SITUATION = re.compile(r"\bin situation (\d+)")


def over_sites_allowed(subject: Subject, content: VariableEntry) -> bool:
    """Check what a variable over sites says besides its model; False with problems."""
    before = len(subject.around.reading.problems)
    if content.records is not None:
        subject.problem(
            "takes the model of each class from its site table; the variable has records, which are one sample.",
            "sites",
            suggestion="Remove one of the two, or fit each class by itself and write what was found into the table.",
        )
    if content.size_ratio is not None:
        subject.problem("is for actions; the variable has a size_ratio.", "sites")
    if content.sites is not None and content.sites not in subject.around.sites:
        known = subject.around.sites
        subject.problem(
            f"names the site table '{content.sites}', which is not defined.",
            "sites",
            suggestion=did_you_mean(content.sites, known)
            if known
            else "Define it in a section [sites.NAME].",
        )
    return len(subject.around.reading.problems) == before


def site_model(
    subject: Subject, table: SiteTable, member: Family, values: Mapping[str, Value], unit: Unit | None
) -> Model | None:
    """Check a variable whose model differs by class of site; None with problems.

    Parameters
    ----------
    table : SiteTable
        Its own; the names of its columns count for this variable only.
    values : mapping
        Moments or parameters.
    """
    if member.is_constant:
        subject.problem(f"over sites needs a family with scatter; '{member.name}' has none.", "family")
        return None
    names = _local_names(subject, table)
    if _ambiguous(subject, table, values):
        return None
    around = dataclasses.replace(subject.around, names=names, use=OVER_SITES)
    local = dataclasses.replace(subject, around=around)
    model = given_model(local, member, values, unit, check=partial(_check_classes, table=table))
    if (
        model is None
        or unit is not None
        or any(v.unit is not None and v.unit is not ONE for v in values.values())
    ):
        return model
    return dataclasses.replace(model, unit=_shown(table, values, model))


def _shown(table: SiteTable, values: Mapping[str, Value], model: Model) -> Unit:
    """Return the unit of the first column that has the dimension of the variable, else what the model shows."""
    names = [name for value in values.values() for name in value.expression.names]
    own = [table.units[n] for n in names if n in table.units and table.units[n].dimension == model.dimension]
    return own[0] if own else model.unit


def _local_names(subject: Subject, table: SiteTable) -> NameSpace:
    """Return the names of the study with the columns of the table; sizes stand among them, to be refused."""
    everywhere, place = subject.around.names, ("sites", table.name)
    names = {s.name: s for s in everywhere.sizes.values()} | everywhere.names
    for column, unit in table.units.items():
        names[column] = Name(column, "site column", place, unit.dimension)
    for column, note in table.texts.items():
        names[column] = Name(column, "site label", place, note=note)
    return dataclasses.replace(everywhere, names=names, sizes={})


def _ambiguous(subject: Subject, table: SiteTable, values: Mapping[str, Value]) -> bool:
    """Report names that stand for a column of the table and for something else in the study."""
    everywhere, reading = subject.around.names.names, subject.around.reading
    found = False
    for key, value in values.items():
        for name in value.expression.names:
            if name in everywhere and (name in table.columns or name in table.texts):
                line = reading.line(everywhere[name].place)
                subject.problem(
                    f"uses '{name}', which stands for two things: a column of sites.{table.name} and what line {line} "
                    "defines.",
                    key,
                    suggestion="Rename one of them.",
                )
                found = True
    return found


def _check_classes(
    subject: Subject, member: Family, values: Mapping[str, Value], *, table: SiteTable
) -> None:
    """Check the numbers in every class of sites."""
    known = {**subject.around.constants, **table.columns}
    arrays = {}
    for key, value in values.items():
        if not all(name in known for name in value.expression.names):
            return
        with np.errstate(all="ignore"):
            array = np.broadcast_to(value.expression.value(known), (len(table.labels),))
        bad = np.flatnonzero(~np.isfinite(array))
        if bad.size:
            subject.problem(
                f"is not a finite number in class '{table.labels[bad[0]]}' of sites.{table.name}: '{value.text}' gives "
                f"{array[bad[0]]}.",
                key,
            )
            return
        arrays[key] = array if value.expression.names else np.asarray(array[0])
    try:
        with np.errstate(all="ignore"):
            solved = member.solve(arrays)
    except InputError as error:
        for problem in error.problems:
            named = [key for key in values if problem.message.startswith(f"{member.name}: {key} ")]
            subject.collect(InputError(_in_class(problem, table)), *named)
        return
    may_be_infinite = {q.name for q in member.parameters if q.kind == "bound"}
    for parameter, array in solved.items():
        if parameter not in may_be_infinite and not np.all(np.isfinite(array)):
            subject.problem(f"gives a {parameter} of '{member.name}' that is not a finite number.")


def _in_class(problem: Problem, table: SiteTable) -> Problem:
    """Return a problem of a batch in the words of the table: its elements are classes, not situations."""
    message = _SITUATION.sub(lambda m: f"in class '{table.labels[int(m[1]) - 1]}'", problem.message)
    return dataclasses.replace(problem, message=message)


def report_second(reading: Reading, raw: Mapping[str, Any]) -> None:
    """Report every variable after the first that is over sites."""
    over = [name for name, entry in raw.items() if isinstance(entry, dict) and entry.get("sites") is not None]
    for name in over[1:]:
        reading.problem(
            f"makes '{name}' a second variable over sites, beside '{over[0]}'; a study may have one.",
            ("variables", name, "sites"),
            "A site has a class for both at once, which their tables cannot say. Give one of them for the territory.",
        )
