"""What ``calibrate index`` leaves for other programs: JSON and CSV at full precision, in the user's units."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import ndtr

from calibrate.provenance import versions

if TYPE_CHECKING:
    from calibrate.reliability import Reliability
    from calibrate.study.index_curve import Curve
    from calibrate.study.index_inverse import Required
    from calibrate.study.one_situation import Analysis, OneSituation

FORMAT = "calibrate-index/1"
INDEX_FILE = "index.json"


def index_content(found: OneSituation) -> dict[str, Any]:
    """Return the content of index.json; None stands for a figure that does not exist."""
    study, unit = found.study, found.size_unit
    return {
        "format": FORMAT,
        "study": {"title": study.title, "file": study.file, "sha256": study.sha256},
        "versions": versions(),
        "seed": study.seed,
        "target_beta": study.target_beta,
        "reference_period": study.reference_period,
        "rule": found.rule.name,
        "situation": found.number,
        "situations": study.situations.n,
        "place": {p.name: {"value": p.value, "unit": p.unit.text} for p in found.place},
        "factors": dict(found.factors),
        "factors_from": found.asked.on,
        "factors_replaced": sorted(found.asked.factors),
        "size": None
        if unit is None
        else {"name": found.rule.size, "value": number(found.size), "unit": unit.text},
        "leading": found.leading or None,
        "alternatives": {k: number(v) for k, v in found.alternatives.items()},
        "variables": [
            {
                "name": v.name,
                "family": v.family,
                "mean": number(v.mean),
                "sd": number(v.sd),
                "cov": number(v.cov),
                "unit": v.unit.text,
                "given": list(v.given),
            }
            for v in found.variables
        ],
        "dependent": found.dependent,
        "status": found.status,
        "beta": number(found.beta),
        "pf": number(float(ndtr(-found.beta))),
        **({} if found.analysis is None else _methods(found, found.analysis)),
        "curve": None if found.curve is None else _curve(found, found.curve),
        "required": None if found.required is None else _required(found, found.required),
    }


def index_json(found: OneSituation) -> str:
    """Return the text of index.json."""
    return json.dumps(index_content(found), indent=2, ensure_ascii=False, allow_nan=False)


def number(value: Any) -> float | None:
    """Return a JSON number, or None for a figure that does not exist."""
    return float(value) if math.isfinite(value) else None


def _numbers(values: Iterable[Any]) -> list[float | None]:
    return [number(v) for v in values]


def _point(found: OneSituation, point: Reliability) -> dict[str, Any]:
    return {
        v.name: {
            "x": number(point.x[i, 0] / v.unit.factor),
            "u": number(point.u[i, 0]),
            "alpha": number(point.alpha[i, 0]),
        }
        for i, v in enumerate(found.variables)
    }


def _methods(found: OneSituation, analysis: Analysis) -> dict[str, Any]:
    second, several, simulated = analysis.second_order, analysis.further, analysis.simulation
    reliability = analysis.reliability
    return {
        "form": {
            "iterations": int(reliability.iterations[0]),
            "design_point": _point(found, reliability),
        },
        "trace": _trace(found, analysis),
        "second_order": {
            "status": str(second.status[0]),
            "sound": bool(second.sound[0]),
            "curvatures": _numbers(second.curvatures[:, 0]),
            "beta_breitung": number(second.beta_breitung[0]),
            "beta_hohenbichler_rackwitz": number(second.beta_hohenbichler_rackwitz[0]),
            "beta_tvedt": number(second.beta_tvedt[0]),
            "beta_paraboloid": number(second.beta_paraboloid[0]),
            "pf_paraboloid": number(second.paraboloid[0]),
        },
        "design_points": {
            "count": int(several.count[0]),
            "more": bool(several.more[0]),
            "nearer": bool(several.nearer[0]),
            "beta_series": number(analysis.series),
            "points": [
                {
                    "beta": number(beta),
                    "u": _numbers(several.u[k, :, 0]),
                    "alpha": _numbers(several.alpha[k, :, 0]),
                }
                for k, beta in enumerate(several.beta[:, 0])
                if np.isfinite(beta)
            ],
        },
        "simulation": None
        if simulated is None
        else {
            "method": simulated.method,
            "status": str(simulated.status[0]),
            "beta": number(simulated.beta[0]),
            "beta_interval": [number(simulated.beta_lower[0]), number(simulated.beta_upper[0])],
            "confidence": simulated.confidence,
            "pf": number(simulated.probability[0]),
            "cov": number(simulated.cov[0]),
            "samples": int(simulated.samples[0]),
        },
        "solvers": [
            {
                "name": name,
                "status": str(other.status[0]),
                "beta": number(other.beta[0]),
                "difference": number(other.beta[0] - reliability.beta[0]),
                "evaluations": int(other.evaluations),
                "design_point": _point(found, other),
            }
            for name, other in analysis.solvers
        ],
    }


def _trace(found: OneSituation, analysis: Analysis) -> list[dict[str, Any]]:
    steps = analysis.trace
    return [
        {
            "step": k,
            "what": what,
            "u": {v.name: number(steps.u[k, i]) for i, v in enumerate(found.variables)},
            "x": {v.name: number(steps.x[k, i] / v.unit.factor) for i, v in enumerate(found.variables)},
            "g": number(steps.g[k]),
            "beta": number(steps.beta[k]),
            "distance": number(steps.distance[k]),
        }
        for k, what in enumerate(steps.what)
    ]


def _curve(found: OneSituation, curve: Curve) -> dict[str, Any]:
    what = curve.varied
    return {
        "name": what.name,
        "kind": what.kind,
        "unit": what.unit.text,
        "present": number(what.present / what.unit.factor),
        "note": what.note,
        "points": [dict(zip(CURVE_COLUMNS, row, strict=True)) for row in curve_rows(found, curve)],
    }


CURVE_COLUMNS = ("value", "beta", "slope", "beta_second_order", "sound", "size", "governing", "status")


def curve_rows(found: OneSituation, curve: Curve) -> list[tuple[Any, ...]]:
    """Return one row per value, in the units of what is varied and of the size."""
    factor = curve.varied.unit.factor
    size_factor = 1.0 if found.size_unit is None else found.size_unit.factor
    size = np.full(curve.values.size, np.nan) if curve.size is None else curve.size
    return [
        (
            float(curve.values[k] / factor),
            number(curve.beta[k]),
            number(curve.slope[k] * factor),
            number(curve.second_order[k]),
            bool(curve.sound[k]),
            number(size[k] / size_factor),
            curve.governing[k] or None,
            str(curve.status[k]),
        )
        for k in range(curve.values.size)
    ]


def _required(found: OneSituation, required: Required) -> dict[str, Any]:
    what = required.varied
    factor = what.unit.factor
    return {
        "name": what.name,
        "kind": what.kind,
        "unit": what.unit.text,
        "target": required.target,
        "met": required.met,
        "status": required.status,
        "value": number(required.value / factor),
        "present": number(what.present / factor),
        "beta": number(required.beta),
        "slope": number(required.slope * factor),
        "size": None if found.size_unit is None else number(required.size / found.size_unit.factor),
        "looked_between": [required.lower / factor, required.upper / factor],
        "evaluations": required.evaluations,
        "note": what.note,
    }


def trace_csv(found: OneSituation) -> bytes:
    """Return trace.csv: one row per step, values in the units of the variables, g in SI units."""
    assert found.analysis is not None
    names = [v.name for v in found.variables]
    heads = ["step", "what", *(f"u_{n}" for n in names), *(f"x_{n}" for n in names), "g", "beta", "distance"]
    rows = [
        [r["step"], r["what"], *r["u"].values(), *r["x"].values(), r["g"], r["beta"], r["distance"]]
        for r in _trace(found, found.analysis)
    ]
    return _csv(heads, rows)


def curve_csv(found: OneSituation, curve: Curve) -> bytes:
    """Return curve.csv: one row per value, in the units of what is varied and of the size."""
    return _csv((curve.varied.name, *CURVE_COLUMNS[1:]), curve_rows(found, curve))


def _csv(heads: Sequence[str], rows: Iterable[Sequence[Any]]) -> bytes:
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(heads)
    writer.writerows(
        [["" if v is None else repr(v) if isinstance(v, float) else v for v in row] for row in rows]
    )
    return stream.getvalue().encode("utf-8")
