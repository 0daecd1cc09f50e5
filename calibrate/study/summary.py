"""What ``calibrate check`` understood of a study, as plain data."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.expressions import Comparison
from calibrate.study.events import find_events
from calibrate.study.model import ComponentRecords, Rule, Study, Variable
from calibrate.units import Unit

FORMAT = "calibrate-check/1"


def check_summary(study: Study) -> dict[str, Any]:
    """Return what a study says, for the console and for ``--json``.

    Parameters
    ----------
    study : Study
        As returned by ``read_study``; nothing is fitted, sized or computed.

    Returns
    -------
    dict
        Of dictionaries, lists, texts, numbers, booleans and None only. Numbers
        that carry a unit are in the unit named beside them, at full precision.
    """
    return {
        "format": FORMAT,
        "study": {"title": study.title, "file": study.file, "sha256": study.sha256},
        "target_beta": study.target_beta,
        "reference_period": study.reference_period,
        "seed": study.seed,
        "records": {
            name: {
                "n": s.n,
                "n_exact": s.observations.n_exact,
                "excluded": len(s.excluded),
                "unit": s.unit.text,
                "file": s.file,
                "column": s.name,
                "value": s.formula,
                "sha256": s.sha256,
            }
            for name, s in study.records.items()
        },
        "quantities": {
            name: {
                "value": q.value / q.unit.factor,
                "unit": q.unit.text,
                "text": q.text,
                "of": q.of,
                "value_type": q.value_type,
            }
            for name, q in study.quantities.items()
        },
        "resistances": {name: _resistance(r) for name, r in study.resistances.items()},
        "variables": {name: _variable(study, v) for name, v in study.variables.items()},
        "correlations": [
            {
                "variables": [c.pair.first, c.pair.second],
                "coefficient": c.pair.coefficient,
                "kind": c.pair.kind,
                "n": None if c.estimate is None else c.estimate.n,
            }
            for c in study.correlations
        ],
        "verification": {
            "method": study.verification.settings.method,
            "on": list(study.verification.on),
            "situations": "all" if study.verification.settings.everywhere else "chosen",
            "cov": study.verification.settings.cov,
        },
        "sites": {
            name: {
                "file": t.file,
                "classes": dict(zip(t.labels, t.weights.tolist(), strict=True)),
                "columns": {c: _range(v, t.units[c]) for c, v in t.columns.items()},
            }
            for name, t in study.sites.items()
        },
        "situations": _situations(study),
        "weights": _weights(study),
        "rules": {name: _rule(study, rule) for name, rule in study.rules.items()},
        "systems": {
            name: {
                "fails_when": system.logic.text,
                "components": list(system.logic.names),
                "weight": system.weight,
            }
            for name, system in study.systems.items()
        },
        "factors": {
            f.name: {
                "present": f.present,
                "held": f.held,
                "lower": None if f.held else f.lower,
                "upper": None if f.held else f.upper,
                "step": None if f.held else f.step,
            }
            for f in study.factors
        },
        "objective": {
            "penalty": study.objective.penalty,
            "floor": study.objective.floor,
            "d": study.objective.scale if study.objective.penalty == "asymmetric" else None,
            "index": study.objective.index,
        },
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in study.doubts],
    }


def _resistance(records: ComponentRecords) -> dict[str, Any]:
    tests = records.tests
    return {
        "file": records.file,
        "measured": records.measured,
        "prediction": records.prediction,
        "unit": records.unit.text,
        "n": tests.n,
        "survived": tests.n - tests.n_failed,
        "subgroups": len(tests.subgroups),
        "clusters": 0 if tests.cluster is None else len(set(tests.cluster.tolist())),
    }


def _variable(study: Study, variable: Variable) -> dict[str, Any]:
    families = list(variable.families)
    return {
        "family": "best" if not families else families[0] if len(families) == 1 else families,
        "dimension": str(variable.dimension),
        "unit": variable.unit.text,
        "records": variable.records,
        "method": variable.method if variable.records is not None else None,
        "arguments": dict(variable.texts),
        "sites": variable.sites,
        "pooled_shape": list(variable.pooled_shape),
        "period": variable.period,
        "description": variable.description,
        "source": variable.source,
        "grade": variable.grade,
        "exceedances": _exceedances(study, variable),
    }


def _exceedances(study: Study, variable: Variable) -> dict[str, Any] | None:
    """Return the threshold, in the unit of the records, and the events above it."""
    asked = variable.exceedances
    if asked is None or variable.records is None:
        return None
    sample = study.records[variable.records]
    events = find_events(sample, asked)
    return {
        "threshold": asked.threshold,
        "unit": sample.unit.text,
        "years": asked.years,
        "run_length_years": asked.run_length,
        "exceedances": int(events.exceedances.size),
        "events": events.n,
    }


def _situations(study: Study) -> dict[str, Any]:
    situations = study.situations
    columns = {
        name: _range(values, situations.units[name])
        if values.dtype.kind == "f"
        else {"labels": len(set(values.tolist())), "n": int(values.size)}
        for name, values in situations.columns.items()
    }
    return {
        "count": situations.n,
        "table": study.table,
        "axes": columns if study.table is None else {},
        "columns": {} if study.table is None else columns,
        "derived": {
            name: {"expression": study.derived[name].text, **_range(values, situations.units[name])}
            for name, values in situations.derived.items()
        },
    }


def _range(values: NDArray[np.float64], unit: Unit) -> dict[str, Any]:
    shown = np.unique(values / unit.factor)
    return {"n": int(shown.size), "smallest": float(shown[0]), "largest": float(shown[-1]), "unit": unit.text}


def _weights(study: Study) -> dict[str, Any]:
    weight = study.situations.weight
    return {
        "expression": study.weight_text,
        "positive": int(np.count_nonzero(weight > 0)),
        "smallest": float(weight.min()),
        "largest": float(weight.max()),
    }


def _rule(study: Study, rule: Rule) -> dict[str, Any]:
    used = _names(rule.limit_state) | (_names(rule.design_check) if rule.design_check else set())
    dimension = study.size_dimensions.get(rule.name)
    return {
        "design_check": None if rule.design_check is None else rule.design_check.text,
        "size": rule.size,
        "size_dimension": None if dimension is None else str(dimension),
        "size_unit": None if rule.size_unit is None else rule.size_unit.text,
        "limit_state": rule.limit_state.text,
        "variables": list(rule.variables),
        "factors": [f.name for f in study.factors if f.name in used],
        "weight": rule.weight,
        "description": rule.description,
    }


def _names(comparison: Comparison) -> set[str]:
    return {*comparison.left.names, *comparison.right.names}
