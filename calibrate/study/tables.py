"""The tables of a result: factors, design situations, basic variables; full precision, the user's units."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution, Extreme, Mixture
from calibrate.factors import Calibration, Evaluation, Response, Verification, required_factor
from calibrate.reliability.status import CONVERGED, SEVERAL, TEXTS
from calibrate.study.fits import FittedVariable, RecordModel
from calibrate.study.model import Rule, Study
from calibrate.study.result import FACTOR_SETS, VariableResult
from calibrate.units import Unit, si_unit

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]


def factor_table(study: Study, calibration: Calibration) -> pd.DataFrame:
    """Return one row per factor, in the order of the study: the columns of factors.csv."""
    import pandas as pd

    sets = {kind: getattr(calibration, kind).factors for kind in FACTOR_SETS}
    return pd.DataFrame(
        {
            "name": [f.name for f in study.factors],
            **{kind: [sets[kind][f.name] for f in study.factors] for kind in FACTOR_SETS},
            "held": [f.held for f in study.factors],
            "lower": [np.nan if f.held else f.lower for f in study.factors],
            "upper": [np.nan if f.held else f.upper for f in study.factors],
            "step": [np.nan if f.held or f.step is None else f.step for f in study.factors],
        }
    )


def size_unit(study: Study, rule: Rule) -> Unit:
    """Return the unit in which the size of a rule is shown."""
    return rule.size_unit if rule.size_unit is not None else si_unit(study.size_dimensions[rule.name])


def situation_table(
    study: Study, calibration: Calibration, verified: Verification | None = None
) -> tuple[pd.DataFrame, dict[str, str | dict[str, str]]]:
    """Return one row per rule and design situation, and the unit of every column.

    A situation without beta has NaN in every column that follows from beta. ``verified`` is the verification with the
    proposed factors, whose search may have found further design points.
    """
    import pandas as pd

    situations = study.situations
    rules = list(study.rules.values())
    repeat = len(study.judged)
    columns: dict[str, object] = {
        "rule": np.repeat(np.array(study.judged, dtype=object), situations.n),
        "situation": np.tile(np.arange(1, situations.n + 1), repeat),
    }
    units: dict[str, str | dict[str, str]] = {"rule": "", "situation": ""}
    for name, values in situations.columns.items():
        unit = situations.units.get(name)
        shown = values / unit.factor if unit is not None and values.dtype.kind == "f" else values
        columns[name] = np.tile(shown, repeat)
        units[name] = "" if unit is None else unit.text
    columns["weight"] = row_weights(study)
    units["weight"] = ""
    for kind in FACTOR_SETS:
        evaluation: Evaluation = getattr(calibration, kind).evaluation
        columns[f"size_{kind}"] = np.concatenate(
            [
                *(
                    np.full(situations.n, np.nan) if e.size is None else e.size / size_unit(study, r).factor
                    for r, e in zip(rules, evaluation.per_rule, strict=True)
                ),
                np.full(situations.n * len(study.systems), np.nan),
            ]
        )
        units[f"size_{kind}"] = _size_units(study, rules)
    for kind in FACTOR_SETS:
        columns[f"beta_{kind}"] = getattr(calibration, kind).evaluation.beta
        units[f"beta_{kind}"] = ""
    _design_points(study, calibration.proposed.evaluation, rules, columns, units)
    if verified is not None:
        status = np.asarray(columns["status"], dtype=object)
        several = (verified.points > 1) & (status == TEXTS[CONVERGED])
        columns["status"] = np.where(several, TEXTS[SEVERAL], status)
    return pd.DataFrame(columns), units


def required_table(study: Study, response: Response, calibration: Calibration) -> pd.DataFrame:
    """Return rule, situation and, for each free factor, the value that the situation alone would require.

    The other factors are those proposed.
    """
    import pandas as pd

    at = calibration.proposed.evaluation
    required = {f.name: required_factor(response, f.name, study.target_beta, at) for f in response.free}

    n = study.situations.n
    return pd.DataFrame(
        {
            "rule": np.repeat(np.array(study.judged, dtype=object), n),
            "situation": np.tile(np.arange(1, n + 1), len(study.judged)),
            **{f"required_{name}": values for name, values in required.items()},
        }
    )


def row_weights(study: Study) -> Array:
    """Return the weight of every row of the table of situations, sum 1."""
    return np.concatenate([study.situations.weight * (w / study.total_weight) for w in study.weights])


def _size_units(study: Study, rules: list[Rule]) -> str | dict[str, str]:
    by_rule = {r.name: size_unit(study, r).text for r in rules if r.size is not None}
    texts = set(by_rule.values())
    if len(texts) <= 1:
        return texts.pop() if texts else ""
    return by_rule


def _design_points(
    study: Study,
    evaluation: Evaluation,
    rules: list[Rule],
    columns: dict[str, object],
    units: dict[str, str | dict[str, str]],
) -> None:
    from scipy.special import ndtr

    n = study.situations.n
    beta = evaluation.beta
    columns["pf"] = ndtr(-beta)
    units["pf"] = ""
    alpha = {name: np.full(beta.size, np.nan) for name in study.variables}
    x = {name: np.full(beta.size, np.nan) for name in study.variables}
    for k, (rule, e) in enumerate(zip(rules, evaluation.per_rule, strict=True)):
        rows = slice(k * n, (k + 1) * n)
        found = np.isfinite(beta[rows])
        for i, name in enumerate(rule.variables):
            alpha[name][rows] = np.where(found, e.reliability.alpha[i], np.nan)
            x[name][rows] = np.where(found, e.reliability.x[i] / study.variables[name].unit.factor, np.nan)
    for k, s in enumerate(evaluation.systems, len(rules)):
        rows = slice(k * n, (k + 1) * n)
        if s.result.equivalent_alpha is not None:
            for name, row in zip(s.variables, s.result.equivalent_alpha, strict=True):
                alpha[name][rows] = row
    used = [name for name in study.variables if any(name in r.variables for r in rules)]
    for name in used:
        columns[f"alpha_{name}"] = alpha[name]
        units[f"alpha_{name}"] = ""
    for name in used:
        columns[f"x_{name}"] = x[name]
        units[f"x_{name}"] = study.variables[name].unit.text
    columns["status"] = np.asarray(evaluation.status, dtype=object)
    units["status"] = ""


def variable_results(
    study: Study,
    fitted: Mapping[str, RecordModel],
    calibration: Calibration,
) -> dict[str, VariableResult]:
    """Return every basic variable that a rule uses, as it stands with the proposed factors."""
    results: dict[str, VariableResult] = {}
    for name, variable in study.variables.items():
        distributions = _distributions(study, name, calibration.proposed.evaluation)
        if not distributions:
            continue
        unit, fit = variable.unit, fitted.get(name)
        shown = [_named(d).scaled(1.0 / unit.factor) for d in distributions]
        # A mixture over uncertain parameters is shown with those of the fit, one over sites with those of the classes;
        # its moments are its own.
        own = [_named_fit(d, fit, unit.factor) if variable.sites is None else _by_class(d) for d in shown]
        converted = any(isinstance(d, Extreme) for d in (*shown, *own))
        period = variable.period if converted else study.reference_period
        results[name] = VariableResult(
            name=name,
            family=own[0].family.name,
            unit=unit,
            parameters={p: _merge([d.parameters[p] for d in own]) for p in own[0].parameters},
            mean=_merge([d.mean for d in shown]),
            sd=_merge([d.sd for d in shown]),
            cov=_merge([d.cov for d in shown]),
            n=None if fit is None else fit.n,
            period=variable.period,
            parameters_period=study.reference_period if period is None else period,
            comparison=fit.comparison if isinstance(fit, FittedVariable) else None,
            predictive=variable.predictive,
        )
    return results


def used_distributions(study: Study, calibration: Calibration) -> dict[str, list[Distribution]]:
    """Return the distributions of each variable in each rule that uses it, with the proposed factors, in SI units."""
    return {name: _distributions(study, name, calibration.proposed.evaluation) for name in study.variables}


def _named_fit(shown: Distribution, fit: RecordModel | None, factor: float) -> Distribution:
    base = shown.base if isinstance(shown, Extreme) else shown
    if not isinstance(fit, FittedVariable) or not isinstance(base, Mixture):
        return shown
    assert fit.fit.distribution is not None
    return fit.fit.distribution.scaled(fit.fit_factor / factor)


def _by_class(shown: Distribution) -> Distribution:
    assert isinstance(shown, Mixture)
    return _named(shown.components)


def _distributions(study: Study, name: str, evaluation: Evaluation) -> list[Distribution]:
    found = []
    for rule, e in zip(study.rules.values(), evaluation.per_rule, strict=True):
        if name in rule.variables:
            found.append(e.distributions[rule.variables.index(name)])
    return found


def _named(distribution: Distribution) -> Distribution:
    """Return a converted action under its own parameters where its family is closed under maxima."""
    if isinstance(distribution, Extreme) and distribution.equivalent is not None:
        return distribution.equivalent
    return distribution


def _merge(parts: list[Array]) -> Array:
    """Join figures over rules and situations; length 1 where they are all the same."""
    flat = np.concatenate([np.atleast_1d(np.asarray(p, dtype=float)) for p in parts])
    return flat[:1] if np.all((flat == flat[0]) | (np.isnan(flat) & np.isnan(flat[0]))) else flat
