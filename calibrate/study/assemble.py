"""From the validated study to the models that the lower layers compute with."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.combination import leading_repetitions
from calibrate.factors import Alternative, RuleEvaluation, RuleModel, SystemModel
from calibrate.situations import BasicVariable
from calibrate.study.fits import RecordModel
from calibrate.study.model import Rule, Study, Variable
from calibrate.study.sites import site_model


def basic_variables(
    study: Study, fitted: Mapping[str, RecordModel], period: float | None = None
) -> dict[str, BasicVariable]:
    """Return each variable as a model over design situations, in SI units, for the reference or another period."""
    years = study.reference_period if period is None else period
    return {
        name: _basic_variable(years, v, fitted.get(name)) if v.sites is None else _over_sites(study, v, years)
        for name, v in study.variables.items()
    }


def _over_sites(study: Study, variable: Variable, years: float) -> BasicVariable:
    """Return the action at a site drawn at random, converted class by class before it was mixed."""
    mixed = site_model(study, variable, years).average
    return BasicVariable(variable.name, variable.families[0], {}, 1.0, mixed, of_classes=True)


def _basic_variable(years: float, variable: Variable, fit: RecordModel | None) -> BasicVariable:
    ratio = years / variable.period if variable.period is not None and variable.converted else 1.0
    return BasicVariable(
        variable.name,
        variable.families[0] if fit is None else fit.family,
        variable.arguments if fit is None else {},
        ratio,
        None if fit is None else fit.distribution,
        variable.size_ratio,
        stress_profile=variable.stress_profile,
    )


def rule_models(
    study: Study, variables: Mapping[str, BasicVariable], years: float | None = None
) -> list[RuleModel]:
    """Return one model per rule, in the order of the study.

    ``years`` is the period of the variables, by default the reference period; the repetitions of combined actions
    follow it.
    """
    situations = study.situations
    numeric = {n: v for n, v in situations.columns.items() if v.dtype.kind == "f"}
    values = {**{q.name: q.value for q in study.quantities.values()}, **numeric, **situations.derived}
    total = study.total_weight
    share = 1.0 if years is None else years / study.reference_period
    return [
        dataclasses.replace(
            _rule_model(
                rule,
                variables,
                values,
                situations.weight,
                total,
                _alternatives(study, rule, variables, share),
            ),
            correlations=tuple(c.pair for c in study.correlations),
        )
        for rule in study.rules.values()
    ]


def system_models(study: Study) -> list[SystemModel]:
    """Return the systems of rules, in the order of the study."""
    return [
        SystemModel(
            system.name,
            system.logic,
            tuple(study.variables),
            study.situations.weight,
            system.weight / study.total_weight,
        )
        for system in study.systems.values()
    ]


def values_at(model: RuleModel, found: RuleEvaluation, factors: Mapping[str, float]) -> dict[str, Any]:
    """Return every value that a rule's models and limit state use, with the sizes of an evaluation.

    Situations without size get a stand-in, so that the batch stays whole; what comes of them is not to be used.
    """
    values: dict[str, Any] = {**model.values, **factors}
    if found.size is not None and model.size_name is not None:
        solved = np.isfinite(found.size)
        usual = float(np.median(found.size[solved])) if solved.any() else 1.0
        values[model.size_name] = np.where(solved, found.size, usual)
    return values


def _alternatives(
    study: Study, rule: Rule, variables: Mapping[str, BasicVariable], share: float
) -> tuple[Alternative, ...]:
    """Return one alternative for each leading action of a rule (Turkstra); none where no combined action acts in it."""
    acting = [a for a in study.combination if a.name in rule.variables]
    totals = [max(a.repetitions * share, 1.0) for a in acting]
    found = []
    for lead, leading in enumerate(acting):
        repeats = leading_repetitions(totals, lead)
        own = {
            a.name: dataclasses.replace(variables[a.name], ratio=r, presence=a.presence)
            for a, r in zip(acting, repeats, strict=True)
        }
        found.append(Alternative(leading.name, tuple(own.get(n, variables[n]) for n in rule.variables)))
    return tuple(found)


def _rule_model(
    rule: Rule,
    variables: Mapping[str, BasicVariable],
    values: Mapping[str, Any],
    weight: NDArray[np.float64],
    total: float,
    alternatives: tuple[Alternative, ...],
) -> RuleModel:
    return RuleModel(
        name=rule.name,
        check=None if rule.design_check is None else rule.design_check.margin,
        size_name=rule.size,
        limit_state=rule.limit_state.margin,
        variables=tuple(variables[name] for name in rule.variables),
        values=values,
        weight=weight,
        rule_weight=rule.weight / total,
        alternatives=alternatives,
    )
