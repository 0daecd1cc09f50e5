"""A basic variable that is fitted to records: candidates, what the fit keeps fixed, what it estimates."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.distributions import Family, family, family_names
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import Expression, constant_expression
from calibrate.fitting.registry import model_of
from calibrate.fitting.settings import settle
from calibrate.records import Sample
from calibrate.study.reading.names import MODELS
from calibrate.study.reading.pooled import check_pooled
from calibrate.study.reading.schema import VariableEntry
from calibrate.study.reading.subject import Model, Subject, constants_only, defaults_fit, listed
from calibrate.study.reading.values import Value, value_dimension
from calibrate.units import DIMENSIONLESS, Dimension, Unit


def fitted_model(
    subject: Subject,
    content: VariableEntry,
    families: list[Family],
    values: Mapping[str, Value],
    unit: Unit | None,
    method: str,
) -> Model | None:
    """Check a variable that names records; None with problems.

    Parameters
    ----------
    families : list of Family
        The candidates; none for all that can be fitted.
    values : mapping
        Arguments beside ``records``.  Only what moments leave open (thresholds,
        bounds, the shape of ``gev``, the freedom of ``student_t``) may stand
        there, and the fit keeps it as it is.
    method : str
        Estimator.
    """
    if not _only_kept(subject, families, values):
        return None
    sample = _sample(subject, content.records or "")
    if sample is None:
        return None
    dimension = sample.unit.dimension
    if unit is not None and unit.dimension != dimension:
        subject.problem(
            f"'{unit.text}' is {unit.dimension.describe()}, but the records '{content.records}' are "
            f"{dimension.describe()}.",
            "unit",
        )
        return None
    if content.pooled_shape and not check_pooled(subject, content, values, method, sample):
        return None
    arguments: dict[str, Expression] = {}
    for key, value in values.items():
        fixed = _fixed(subject, key, value, families, dimension)
        if fixed is None:
            return None
        arguments[key] = fixed
    if not all(defaults_fit(subject, f, arguments, dimension, sample.unit) for f in families):
        return None
    if not _can_be_fitted(subject, families, arguments, tuple(content.estimate)):
        return None
    return Model(tuple(f.name for f in families), arguments, unit or sample.unit, dimension)


def _candidates(families: list[Family]) -> list[Family]:
    return families or [family(name) for name in family_names()]


def _only_kept(subject: Subject, families: list[Family], values: Mapping[str, Value]) -> bool:
    kept = {k for f in _candidates(families) for k in f.moments_keep}
    others = [k for k in values if k not in kept]
    if not others:
        return True
    only = f" Only {listed(sorted(kept))} may be kept fixed." if kept else ""
    subject.around.reading.raw_problem(
        f"variables.{subject.name} has records and {', '.join(others)}; records take the place of moments and "
        "parameters.",
        subject.place(others[0]),
        f"Remove one of the two.{only}",
    )
    return False


def _sample(subject: Subject, name: str) -> Sample | None:
    records = subject.around.records
    if name not in records:
        subject.problem(
            f"names '{name}', which is not defined.", "records", suggestion=did_you_mean(name, records)
        )
        return None
    return records[name]


def _fixed(
    subject: Subject, key: str, value: Value, families: list[Family], dimension: Dimension
) -> Expression | None:
    """Return a parameter that the fit keeps, as a constant in SI units."""
    found = value_dimension(subject.around.names, value, subject.place(key), MODELS)
    if found is None:
        return None
    needed = dimension if any(f.carries_unit(key) for f in _candidates(families)) else DIMENSIONLESS
    if not found.agrees(needed):
        subject.problem(f"is {found.describe()}; with these records it must be {needed.describe()}.", key)
        return None
    constants = subject.around.constants
    if not constants_only(value, constants):
        subject.problem(
            "differs between design situations, but records are fitted once.",
            key,
            suggestion="Use quantities only.",
        )
        return None
    return constant_expression(float(value.expression.value(constants)))


def _can_be_fitted(
    subject: Subject, families: list[Family], arguments: Mapping[str, Expression], estimate: tuple[str, ...]
) -> bool:
    """Check that at least one candidate has all that a fit needs; several compete, so one is enough."""
    fixed = {key: expression.constant for key, expression in arguments.items()}
    refusals: list[Problem] = []
    for member in families:
        own = {k: v for k, v in fixed.items() if len(families) == 1 or k in member.parameter_names}
        asked = tuple(e for e in estimate if len(families) == 1 or e in member.parameter_names)
        try:
            settle(model_of(member.name), own, asked)
        except InputError as error:
            refusals += error.problems
        else:
            return True
    if refusals:
        subject.collect(InputError(refusals), "family")
    return not refusals
