"""The basic variables of a study that come from records: fit, choose, convert to SI."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError, ProblemList
from calibrate.fitting import Comparison, Fit, compare
from calibrate.study.model import Study, Variable


@dataclass(frozen=True, slots=True)
class FittedVariable:
    """The fit that a variable uses, its rivals, and its distribution in SI units."""

    fit: Fit
    comparison: Comparison
    distribution: Distribution


def fit_variables(study: Study) -> dict[str, FittedVariable]:
    """Fit every variable that names records.

    Returns
    -------
    dict
        By variable name, in the order of the study; variables without records
        are left out.

    Raises
    ------
    InputError
        For each variable whose sample is too small for its family or that no
        candidate fits, with the line of the variable in the study file.
    """
    problems = ProblemList(study.shown)
    fitted: dict[str, FittedVariable] = {}
    for name, variable in study.variables.items():
        if variable.records is None:
            continue
        try:
            fitted[name] = _fit(study, variable)
        except InputError as error:
            for problem in error.problems:
                problems.add(f"[variables.{name}] {problem.message}", variable.line, problem.suggestion)
    problems.stop_if_any()
    return fitted


def _fit(study: Study, variable: Variable) -> FittedVariable:
    assert variable.records is not None
    sample = study.records[variable.records]
    fixed = _fixed_in_sample_unit(variable, sample.unit.factor)
    comparison = compare(
        sample.values,
        variable.families or None,
        method=variable.method,
        fixed=fixed,
        estimate=variable.estimate,
    )
    chosen = next((c for c in comparison.candidates if c.family == comparison.recommended), None)
    if chosen is None or chosen.distribution is None:
        reasons = "; ".join(f"{c.family}: {c.reason}" for c in comparison.candidates)
        raise InputError(f"No distribution can be fitted to records '{variable.records}' ({reasons}).")
    return FittedVariable(chosen, comparison, chosen.distribution.scaled(sample.unit.factor))


def _fixed_in_sample_unit(variable: Variable, factor: float) -> dict[str, float]:
    """Return the parameters that stay fixed (threshold, bounds) in the unit of the records."""
    fixed: dict[str, float] = {}
    for name, expression in variable.arguments.items():
        value = expression.constant
        if value is None:
            raise InputError(f"'{name}' of a variable with records must be a constant.")
        fixed[name] = value / factor if name in UNIT_BEARING else value
    return fixed


UNIT_BEARING = frozenset({"threshold", "lower", "upper"})


def fit_doubts(fitted: Mapping[str, FittedVariable]) -> list[Doubt]:
    """Return the reservations of the chosen fits, placed at their variables."""
    return [
        Doubt(doubt.code, doubt.message, f"variables.{name}")
        for name, variable in fitted.items()
        for doubt in variable.fit.doubts
    ]
