"""The result files that other programs read: JSON and CSV at full precision."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.study.reliability_export import correlation_content, systems_content, verification_content
from calibrate.study.resistance_export import resistance_content, tests_csv

if TYPE_CHECKING:
    from calibrate.actions.return_levels import ReturnLevels
    from calibrate.factors import FactorSet
    from calibrate.study.exceedances import ExceedanceModel
    from calibrate.study.fits import FittedVariable
    from calibrate.study.result import Result, VariableResult
    from calibrate.study.sites import SiteBeta

FORMAT = "calibrate-result/1"


def _number(value: float | None) -> float | int | None:
    """Return a JSON number, or None for a figure that does not exist."""
    if value is None or not math.isfinite(value):
        return None
    return float(value)


def _range(values: NDArray[np.float64], varies: bool) -> Any:
    finite = np.asarray(values, dtype=float).ravel()
    finite = finite[np.isfinite(finite)]
    if not finite.size:
        return [None, None] if varies else None
    return [float(finite.min()), float(finite.max())] if varies else float(finite[0])


def _variable(variable: VariableResult, model: ExceedanceModel | None) -> dict[str, Any]:
    varies = variable.varies
    figures: dict[str, Any] = {
        "family": variable.family,
        "unit": variable.unit.text,
        "parameters": {k: _range(v, varies) for k, v in variable.parameters.items()},
        "mean": _range(variable.mean, varies),
        "sd": _range(variable.sd, varies),
        "cov": _range(variable.cov, varies),
        "n": variable.n,
    }
    if varies:
        figures["varies"] = True
    if variable.predictive:
        figures["predictive"] = True
    if variable.period is not None:
        figures["period"] = variable.period
        figures["parameters_for_period"] = variable.parameters_period
    if model is not None:
        figures["exceedances"] = _exceedances(model)
    return figures


def _exceedances(model: ExceedanceModel) -> dict[str, Any]:
    """Return the fit of the excesses, in the unit of the records."""
    fit, events = model.fit, model.events
    return {
        "threshold": fit.threshold,
        "events": fit.n,
        "years": fit.years,
        "rate": fit.rate,
        "exceedances": int(events.exceedances.size),
        "run_length_years": model.run_length,
        "extremal_index": events.extremal_index,
        "scale": fit.scale,
        "shape": fit.shape,
        "standard_errors": {name: _number(v) for name, v in fit.standard_errors.items()},
        "upper_end": _number(fit.upper_end),
        "dispersion": None
        if model.dispersion is None
        else {"index": model.dispersion[0], "p_value": model.dispersion[1]},
    }


def _levels(levels: ReturnLevels, unit: str) -> dict[str, Any]:
    return {
        "unit": unit,
        "years": [float(t) for t in levels.years],
        "level": [_number(v) for v in levels.levels],
        "lower": [_number(v) for v in levels.lower],
        "upper": [_number(v) for v in levels.upper],
        "confidence": levels.confidence,
        "method": levels.method,
    }


def _pooled_shape(fitted: FittedVariable | None) -> dict[str, Any]:
    if fitted is None or fitted.stations is None:
        return {}
    found = fitted.stations.found
    shape = {
        "records": list(fitted.stations.records),
        "shape": found.shape,
        "standard_error": _number(found.standard_error),
        "interval": [_number(v) for v in found.interval],
        "p_value": _number(found.p_value),
    }
    return {"pooled_shape": shape}


def _summary(result: Result, chosen: FactorSet) -> dict[str, Any]:
    worst = None
    if chosen.worst is not None:
        row = result.situations.iloc[chosen.worst]
        worst = {"rule": str(row["rule"]), "situation": int(row["situation"])}
    return {
        "mean": _number(chosen.mean),
        "sd": _number(chosen.sd),
        "min": _number(chosen.min),
        "max": _number(chosen.max),
        "rms_from_target": _number(chosen.rms_from_target),
        "worst": worst,
    }


def _weighted(result: Result, beta: NDArray[np.float64]) -> float | None:
    weight = result.situations["weight"].to_numpy(float)
    there = np.isfinite(beta) & (weight > 0)
    return _number(float(np.average(beta[there], weights=weight[there]))) if there.any() else None


def _smallest(result: Result, beta: NDArray[np.float64]) -> float | None:
    there = np.isfinite(beta) & (result.situations["weight"].to_numpy(float) > 0)
    return _number(float(beta[there].min())) if there.any() else None


def _sites(result: Result) -> dict[str, Any]:
    """Return beta by class of site with the proposed factors; empty without an action over sites."""
    found = result.site_beta
    if found is None:
        return {}
    reliability = found.reliability

    def figures(beta: NDArray[np.float64]) -> dict[str, Any]:
        return {"mean": _weighted(result, beta), "min": _smallest(result, beta)}

    content = {
        "variable": found.variable,
        "file": found.table.file,
        "classes": [
            {"name": label, "weight": float(weight), "beta": figures(beta)}
            for label, weight, beta in zip(
                found.table.labels, found.table.weights, reliability.by_site, strict=True
            )
        ],
        "average": figures(reliability.average),
        "worst": {**figures(reliability.worst), "class": _worst_class(result, found)},
        "mixture": figures(found.mixture),
    }
    if found.table.file is not None:
        content["sha256"] = found.table.sha256
    return {found.table.name: content}


def _worst_class(result: Result, found: SiteBeta) -> str | None:
    """Return the class in which the smallest beta of all occurs."""
    there = found.uses & np.isfinite(found.reliability.worst)
    there &= result.situations["weight"].to_numpy(float) > 0.0
    if not there.any():
        return None
    row = int(np.argmin(np.where(there, found.reliability.worst, np.inf)))
    return found.table.labels[int(found.reliability.worst_site[row])]


def result_dict(result: Result) -> dict[str, Any]:
    """Return the content of result.json: plain dictionaries, lists, numbers and None."""
    study, calibration = result.study, result.calibration
    sets = {"present": calibration.present, "optimal": calibration.optimal, "proposed": calibration.proposed}
    provenance = result.provenance
    return {
        "format": FORMAT,
        "study": {"title": study.title, "file": study.file, "sha256": study.sha256},
        "target_beta": study.target_beta,
        "reference_period": study.reference_period,
        "seed": study.seed,
        "provenance": {
            "versions": dict(provenance.versions),
            "started": provenance.started,
            "seconds": provenance.seconds,
            "command": provenance.command,
        },
        "records": {
            name: {
                "file": sample.file,
                "column": sample.name,
                "unit": sample.unit.text,
                "n": sample.n,
                "sha256": sample.sha256,
                "n_exact": sample.observations.n_exact,
                "excluded": [{"row": e.row, "reason": e.reason} for e in sample.excluded],
            }
            for name, sample in study.records.items()
        },
        "other_periods": [
            {
                "period": p.period,
                **{
                    kind: {"mean": _weighted(result, values), "min": _smallest(result, values)}
                    for kind, values in (("converted", p.converted), ("direct", p.direct))
                },
            }
            for p in result.other_periods
        ],
        "sites": _sites(result),
        "resistance": {name: resistance_content(found, study) for name, found in result.resistances.items()},
        "return_levels": {
            name: _levels(levels, result.study.records[result.study.variables[name].records or ""].unit.text)
            for name, levels in result.return_levels.items()
        },
        "bonds": [
            {
                "quantity": b.quantity,
                "variable": b.variable,
                "value_type": b.value_type,
                "bias": [_number(v) for v in b.bias],
                "probability_below": [_number(v) for v in b.fractile],
                "period": b.period if b.period is not None else result.study.reference_period,
            }
            for b in result.biases
        ],
        "pedigree": [
            {"grade": p.grade, "variables": list(p.variables), "share_of_alpha_squared": _number(p.share)}
            for p in result.pedigree
        ],
        "variables": {
            name: {**_variable(v, result.exceedances.get(name)), **_pooled_shape(result.fitted.get(name))}
            for name, v in result.variables.items()
        },
        "factors": {
            factor.name: {
                **{kind: _number(chosen.factors[factor.name]) for kind, chosen in sets.items()},
                "held": factor.held,
            }
            for factor in study.factors
        },
        "beta": {kind: _summary(result, chosen) for kind, chosen in sets.items()},
        "objective": {kind: _number(chosen.objective) for kind, chosen in sets.items()},
        "index": study.objective.index,
        "verification": {kind: verification_content(result, kind) for kind in result.verifications},
        "systems": systems_content(result),
        "correlations": [correlation_content(c) for c in study.correlations],
        "situations": len(result.situations),
        "unconverged": result.unconverged,
        "constraint_failures": list(result.constraint_failures),
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in result.doubts],
    }


def result_json(result: Result) -> str:
    """Return the text of result.json."""
    return json.dumps(result_dict(result), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def table_files(result: Result) -> dict[str, bytes]:
    """Return result.json and the tables of a result (situations.csv, factors.csv and so on) as bytes by file name."""
    texts = {
        "result.json": result_json(result),
        "situations.csv": result.situations.to_csv(index=False, lineterminator="\n"),
        "required_factors.csv": result.required.to_csv(index=False, lineterminator="\n"),
        "factors.csv": result.factors.to_csv(index=False, lineterminator="\n"),
        "units.json": json.dumps(dict(result.units), indent=2, ensure_ascii=False) + "\n",
    }
    texts["elasticities.csv"] = result.elasticities.to_csv(index=False, lineterminator="\n")
    if result.verification is not None:
        texts["verification.csv"] = result.verification.to_csv(index=False, lineterminator="\n")
    if result.systems is not None:
        texts["systems.csv"] = result.systems.to_csv(index=False, lineterminator="\n")
    if result.sites is not None:
        texts["sites.csv"] = result.sites.to_csv(index=False, lineterminator="\n")
    if result.combinations is not None:
        texts["combinations.csv"] = result.combinations.to_csv(index=False, lineterminator="\n")
    if result.accompanying is not None:
        texts["accompanying.csv"] = result.accompanying.to_csv(index=False, lineterminator="\n")
    for name, found in result.resistances.items():
        texts[f"tests_{name}.csv"] = tests_csv(found)
    return {name: text.encode("utf-8") for name, text in texts.items()}
