"""Dependence and verification in result.json."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np

from calibrate.study.model import Correlated
from calibrate.study.verification import place_of

if TYPE_CHECKING:
    from calibrate.study.result import Result


def correlation_content(correlated: Correlated) -> dict[str, Any]:
    """Return a correlated pair; interval and number of specimens where it was estimated."""
    pair, estimate = correlated.pair, correlated.estimate
    content: dict[str, Any] = {
        "variables": [pair.first, pair.second],
        "coefficient": pair.coefficient,
        "kind": pair.kind,
    }
    if estimate is not None:
        content["estimate"] = {
            "n": estimate.n,
            "interval": [estimate.lower, estimate.upper],
            "confidence": estimate.confidence,
        }
    return content


def verification_content(result: Result, kind: str) -> dict[str, Any]:
    """Return what verification found with one set of factors: how many, how far off, where most."""
    v, study = result.verifications[kind], result.study
    weight = result.situations["weight"].to_numpy(float)
    there = np.isfinite(v.form) & (weight > 0.0)
    difference = np.where(there & np.isfinite(v.difference), v.difference, 0.0)
    ratio = v.ratio[there & np.isfinite(v.ratio)]
    tolerance = v.settings.tolerance
    outside = np.flatnonzero(np.abs(difference) > tolerance)
    return {
        "method": v.settings.method,
        "cov": v.settings.cov,
        "tolerance": tolerance,
        "simulated": int(np.count_nonzero(v.is_simulated)),
        "samples": int(np.sum(v.samples)),
        "largest_difference": _row(result, kind, int(np.argmax(np.abs(difference)))) if there.any() else None,
        "pf_ratio": [float(ratio.min()), float(ratio.max())] if ratio.size else None,
        "outside_tolerance": [
            {"rule": rule, "situation": situation}
            for rule, situation in (place_of(study, int(i)) for i in outside)
        ],
    }


def systems_content(result: Result) -> dict[str, Any]:
    """Return logic and weighted index of each system with the proposed factors."""
    if result.systems is None:
        return {}
    content = {}
    for name, system in result.study.systems.items():
        own = result.systems[result.systems["system"] == name]
        beta, weight = own["beta"].to_numpy(float), own["weight"].to_numpy(float)
        there = np.isfinite(beta) & (weight > 0.0)
        content[name] = {
            "fails_when": system.logic.text,
            "components": list(system.logic.names),
            "weight": system.weight,
            "beta": {
                "mean": float(np.average(beta[there], weights=weight[there])) if there.any() else None,
                "min": float(beta[there].min()) if there.any() else None,
                "max": float(beta[there].max()) if there.any() else None,
            },
        }
    return content


def _row(result: Result, kind: str, row: int) -> dict[str, Any]:
    v = result.verifications[kind]
    rule, situation = place_of(result.study, row)

    def number(value: float) -> float | None:
        return float(value) if math.isfinite(value) else None

    return {
        "rule": rule,
        "situation": situation,
        "form": number(v.form[row]),
        "verified": number(v.verified[row]),
        "basis": str(v.basis[row]),
        "interval": [number(v.lower[row]), number(v.upper[row])] if v.is_simulated[row] else None,
    }
