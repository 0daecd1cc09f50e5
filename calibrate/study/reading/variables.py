"""The basic variables of a study: a family with moments or parameters, or records to be fitted."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

from calibrate.distributions import Family, family, family_names
from calibrate.errors import InputError, did_you_mean
from calibrate.expressions import Expression
from calibrate.study.model import ComponentRecords, Variable
from calibrate.study.reading import schema
from calibrate.study.reading.conditional import (
    conditional_on,
    in_order_of_dependence,
    may_be_conditional,
    report_circles,
)
from calibrate.study.reading.entries import read_entry, read_plain
from calibrate.study.reading.estimators import MethodChoice, read_method
from calibrate.study.reading.exceedances import exceedance_model
from calibrate.study.reading.fitted import fitted_model
from calibrate.study.reading.given import MOMENTS, given_model
from calibrate.study.reading.limits import read_upper_limit
from calibrate.study.reading.periods import check_conversion, read_size_ratio, renewed
from calibrate.study.reading.site_variables import over_sites_allowed, report_second, site_model
from calibrate.study.reading.stress import read_stress_profile
from calibrate.study.reading.subject import Model, Subject, Surroundings
from calibrate.study.reading.values import Value, read_unit, read_value
from calibrate.units import Unit

BEST = "best"
_HARMLESS = frozenset({"description", "source", "grade"})
"""Keys whose faults leave the model as it is."""


def argument_names() -> tuple[str, ...]:
    """Return every moment and every parameter of any family."""
    own = (q.name for name in family_names() for q in family(name).parameters)
    return tuple(dict.fromkeys((*MOMENTS, *own)))


def read_variables(around: Surroundings, raw: Mapping[str, Any]) -> dict[str, Variable | None]:
    """Read every variable; None stands for one that exists but is faulty (reported)."""
    report_second(around.reading, raw)
    order, circles = in_order_of_dependence(raw, argument_names())
    report_circles(around, circles)
    read = {
        name: None if name in circles else _dependence_allowed(Subject(name, around), raw[name], around)
        for name in order
    }
    return {name: read[name] for name in raw}


def _dependence_allowed(subject: Subject, entry: Any, around: Surroundings) -> Variable | None:
    variable = _read(subject, entry)
    if variable is None or not conditional_on(variable, around.names.of_kind("variable")):
        return variable
    return variable if may_be_conditional(subject, variable) else None


def _read(subject: Subject, raw: Any) -> Variable | None:
    reading = subject.around.reading
    known = argument_names()
    arguments = {k: v for k, v in raw.items() if k in known} if isinstance(raw, dict) else {}
    rest = {k: v for k, v in raw.items() if k not in known} if isinstance(raw, dict) else raw
    entry = read_entry(reading, schema.VariableEntry, rest, subject.place(), more_keys=known)
    values = _values(subject, arguments)
    content = None if entry.content is None else _completed(subject, entry.content)
    if content is None:
        return None
    families = _families(subject, content)
    unit = read_unit(reading, content.unit, subject.place("unit"))
    if content.exceedances is not None or "exceedances" in entry.dropped:
        return _from_exceedances(subject, content, families, values, unit, entry.dropped)
    method = read_method(subject, content)
    ratio = read_size_ratio(subject, content)
    profile = read_stress_profile(subject, content)
    if (
        method is None
        or not check_conversion(subject, content)
        or (content.size_ratio is not None and ratio is None)
        or (content.stress_profile is not None and profile is None)
    ):
        return None
    unit_is_faulty = content.unit is not None and unit is None
    if unit_is_faulty or values is None or families is None or entry.dropped - _HARMLESS:
        return None
    model = _model(subject, content, families, values, unit, method)
    if model is None:
        return None
    if profile is not None and any(set(e.names) & _sizes(subject) for e in model.arguments.values()):
        subject.problem("needs a model that does not depend on the size.", "stress_profile")
        return None
    limit = read_upper_limit(subject, content, model)
    variable = _variable(subject, content, model, values, method, ratio, limit)
    return variable if profile is None else dataclasses.replace(variable, stress_profile=profile)


def _completed(subject: Subject, content: schema.VariableEntry) -> schema.VariableEntry | None:
    """Return the entry with what other keys imply, and check the keys of a fit; None with problems."""
    content = renewed(subject, content)
    if content.resistance is not None:
        if not _model_factor_fits(subject, content):
            return None
        content = content.model_copy(update={"records": content.resistance})
    elif content.records in subject.around.resistances:
        subject.problem(
            f"names the component tests '{content.records}'.",
            "records",
            suggestion=f'Say resistance = "{content.records}" for their model factor.',
        )
        return None
    if content.records is None:
        for key in ("method", "estimate", "stands_for", "lot", "predictive", "failure_mode", "pooled_shape"):
            if getattr(content, key):
                subject.problem("says how to fit, but the variable has no records.", key)
    return content


def _model(
    subject: Subject,
    content: schema.VariableEntry,
    families: list[Family],
    values: dict[str, Value],
    unit: Unit | None,
    method: MethodChoice,
) -> Model | None:
    if content.sites is not None:
        if not over_sites_allowed(subject, content):
            return None
        table = subject.around.sites[content.sites]
        return None if table is None else site_model(subject, table, families[0], values, unit)
    if content.records is not None:
        return fitted_model(subject, content, families, values, unit, method.name)
    return given_model(subject, families[0], values, unit)


def _model_factor_fits(subject: Subject, content: schema.VariableEntry) -> bool:
    """Check a variable that is the model factor of component tests."""
    name, known = content.resistance or "", subject.around.resistances
    if content.records is not None:
        subject.problem("and records both say where the variable comes from; name one.", "resistance")
    elif name not in known:
        subject.problem(
            f"names '{name}', which is no table of component tests.",
            "resistance",
            suggestion=did_you_mean(name, known) or "Add a section [resistance.NAME].",
        )
    else:
        tests = known[name]
        return tests is not None and _own_scatter_can_be_known(subject, content, tests)
    return False


def _own_scatter_can_be_known(
    subject: Subject, content: schema.VariableEntry, tests: ComponentRecords
) -> bool:
    """Check that known scatter can be taken out of the model factor, which needs a plain lognormal one."""
    if not tests.known_scatter:
        return True
    parts = ", ".join(tests.known_scatter)
    states = f"but resistance.{tests.name} states known_scatter ({parts}), which can be taken out of"
    if content.predictive:
        subject.problem(
            f"makes the variable wider than a lognormal one, {states} a lognormal model factor only.",
            "predictive",
            suggestion="Leave out the one or the other.",
        )
    elif not {"lognormal", BEST} & set(content.family):
        subject.problem(
            f"is '{', '.join(content.family)}', {states} a lognormal model factor only.",
            "family",
            suggestion='Say family = "lognormal", or leave known_scatter out.',
        )
    else:
        return True
    return False


def _sizes(subject: Subject) -> set[str]:
    return {size.name for size in subject.around.names.sizes.values()}


def _from_exceedances(
    subject: Subject,
    content: schema.VariableEntry,
    families: list[Family] | None,
    values: dict[str, Value] | None,
    unit: Unit | None,
    dropped: frozenset[str],
) -> Variable | None:
    conversion_fits = check_conversion(subject, content)
    faulty = content.unit is not None and unit is None
    if families is None or values is None:
        return None
    found = exceedance_model(subject, content, families, values, None if faulty else unit)
    if found is None or faulty or not conversion_fits or dropped - _HARMLESS:
        return None
    model, asked = found
    limit = read_upper_limit(subject, content, model)
    variable = _variable(subject, content, model, values, MethodChoice(), None, limit)
    period = 1.0 if content.period is None else content.period
    return dataclasses.replace(variable, exceedances=asked, period=period)


def _values(subject: Subject, arguments: Mapping[str, Any]) -> dict[str, Value] | None:
    reading = subject.around.reading
    values: dict[str, Value] = {}
    for key, raw in arguments.items():
        typed = read_plain(reading, "value", raw, subject.place(key))
        value = None if typed is None else read_value(reading, typed, subject.place(key))
        if value is not None:
            values[key] = value
    return values if len(values) == len(arguments) else None


def _families(subject: Subject, content: schema.VariableEntry) -> list[Family] | None:
    """Return the candidates; [] for all of them; None with problems."""
    names = list(dict.fromkeys(content.family))
    if content.records is None and (len(content.family) > 1 or BEST in names):
        subject.problem(
            "chooses among families by their fit to records, but the variable has no records.",
            "family",
            suggestion="Name one family, or add 'records'.",
        )
        return None
    if BEST in names:
        if len(names) > 1:
            subject.problem(
                f"names '{BEST}' beside others.",
                "family",
                suggestion=f"'{BEST}' already means all of them.",
            )
            return None
        return []
    found: list[Family] = []
    for name in names:
        try:
            found.append(family(name))
        except InputError as error:
            subject.collect(error, "family")
    return found if len(found) == len(names) else None


def _variable(
    subject: Subject,
    content: schema.VariableEntry,
    model: Model,
    values: Mapping[str, Value],
    method: MethodChoice,
    size_ratio: Expression | None,
    upper_limit: float | None,
) -> Variable:
    names = subject.around.names
    if names.kind(subject.name) == "variable":
        names.set_dimension(subject.name, model.dimension)
    return Variable(
        name=subject.name,
        families=model.families,
        records=content.records,
        arguments=model.arguments,
        texts={key: values[key].text for key in model.arguments},
        period=content.period,
        unit=model.unit,
        dimension=model.dimension,
        line=subject.around.reading.line(subject.place()),
        method=method.name,
        method_options=method.options,
        stands_for=content.stands_for or "",
        lot=content.lot,
        predictive=content.predictive,
        role=content.role or "",
        converted=content.conversion != "none",
        conversion_reason=content.conversion_reason.strip(),
        size_ratio=size_ratio,
        upper_limit=upper_limit,
        tail=content.tail or "",
        failure_mode=content.failure_mode,
        may_be_negative=content.may_be_negative,
        description=content.description.strip(),
        source=content.source.strip(),
        grade=content.grade or "",
        estimate=tuple(content.estimate),
        sites=content.sites,
        resistance=content.resistance,
        pooled_shape=tuple(dict.fromkeys(content.pooled_shape)),
    )
