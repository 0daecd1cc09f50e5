"""From the validated study to the models that the lower layers compute with."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.factors import RuleModel
from calibrate.situations import BasicVariable
from calibrate.study.fits import FittedVariable
from calibrate.study.model import Rule, Study, Variable


def basic_variables(
    study: Study, fitted: Mapping[str, FittedVariable], period: float | None = None
) -> dict[str, BasicVariable]:
    """Return each variable as a model over design situations, in SI units, for the reference or another period."""
    years = study.reference_period if period is None else period
    return {name: _basic_variable(years, v, fitted.get(name)) for name, v in study.variables.items()}


def _basic_variable(years: float, variable: Variable, fit: FittedVariable | None) -> BasicVariable:
    ratio = years / variable.period if variable.period is not None and variable.converted else 1.0
    if fit is not None:
        return BasicVariable(variable.name, fit.fit.family, {}, ratio, fit.distribution, variable.size_ratio)
    return BasicVariable(
        variable.name, variable.families[0], variable.arguments, ratio, None, variable.size_ratio
    )


def rule_models(study: Study, variables: Mapping[str, BasicVariable]) -> list[RuleModel]:
    """Return one model per rule, in the order of the study."""
    situations = study.situations
    numeric = {n: v for n, v in situations.columns.items() if v.dtype.kind == "f"}
    values = {**{q.name: q.value for q in study.quantities.values()}, **numeric, **situations.derived}
    total = sum(rule.weight for rule in study.rules.values())
    return [_rule_model(rule, variables, values, situations.weight, total) for rule in study.rules.values()]


def _rule_model(
    rule: Rule,
    variables: Mapping[str, BasicVariable],
    values: Mapping[str, Any],
    weight: NDArray[np.float64],
    total: float,
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
    )
