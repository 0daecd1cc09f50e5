"""What β is sensitive to with the proposed factors: moments, correlations, quantities, factors, and scatter itself."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.factors import Calibration, RuleEvaluation
from calibrate.reliability.importance import elasticities, importance_vector, omission_factors
from calibrate.study.model import Rule, Study

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
Rows = dict[tuple[str, str, str], tuple[Array, Array]]

COLUMNS = ("rule", "kind", "name", "argument", "slope", "elasticity", "elasticity_min", "elasticity_max")
ALPHA, IMPORTANCE, OMISSION = "sensitivity factor", "importance", "omission factor"
"""Kinds whose ``slope`` is the measure itself."""


def elasticity_table(study: Study, calibration: Calibration) -> pd.DataFrame:
    """Return the columns of elasticities.csv: one row per rule and argument, weighted over its design situations.

    ``slope`` is the weighted mean of d beta/d p in units of 1/p (SI), ``elasticity`` that of (d beta/d p) p/beta. Sizes
    stay as they are designed, except for factors, whose change goes through the size. Of the kinds
    ``sensitivity factor``, ``importance`` and ``omission factor`` the slope is the measure itself.
    """
    import pandas as pd

    free = [f for f in study.factors if not f.held]
    proposed = calibration.proposed
    rows: list[tuple[object, ...]] = []
    n = study.situations.n
    for k, (rule, e) in enumerate(zip(study.rules.values(), proposed.evaluation.per_rule, strict=True)):
        part = slice(k * n, (k + 1) * n)
        beta = np.where(proposed.evaluation.valid[part], e.reliability.beta, np.nan)
        weight = np.where(np.isfinite(beta), study.situations.weight, 0.0)
        if not weight.any():
            continue
        found = _measures(study, rule, e, beta)
        for f, factor in enumerate(free):
            slope = proposed.evaluation.jacobian[f, part]
            with np.errstate(all="ignore"):
                relative = slope * proposed.factors[factor.name] / beta
            found["factor", factor.name, "value"] = (slope, relative)
        rows += _weighted(rule.name, found, weight)
    return pd.DataFrame(rows, columns=list(COLUMNS))


def _measures(study: Study, rule: Rule, e: RuleEvaluation, beta: Array) -> Rows:
    """Return slope and elasticity of every argument in every situation of a rule, NaN where there is none."""
    pairs = [c.pair for c in study.correlations]
    found: Rows = {}
    there = np.isfinite(beta)
    for k, problem in enumerate(e.problems):
        at = np.flatnonzero(there & (e.governing == k))
        if not at.size:
            continue
        part, reliability = problem.take(at, at.size), e.reliability.take(at)
        table = elasticities(part, reliability, pairs)
        arguments = zip(table.kinds, table.names, table.arguments, strict=True)
        for key, slope, relative in zip(arguments, table.slopes, table.elasticities, strict=True):
            _enter(found, key, at, slope, relative, beta.size)
        omitted = omission_factors(part, reliability).replaced
        for kind, values in (
            (ALPHA, reliability.alpha),
            (IMPORTANCE, importance_vector(part, reliability)),
            (OMISSION, omitted),
        ):
            for name, row in zip(rule.variables, values, strict=True):
                _enter(found, (kind, name, ""), at, row, np.full(at.size, np.nan), beta.size)
    return found


def _enter(
    found: Rows, key: tuple[str, str, str], at: NDArray[np.intp], slope: Array, relative: Array, n: int
) -> None:
    if key not in found:
        found[key] = (np.full(n, np.nan), np.full(n, np.nan))
    found[key][0][at] = slope
    found[key][1][at] = relative


def _weighted(
    rule: str, found: Mapping[tuple[str, str, str], tuple[Array, Array]], weight: Array
) -> Iterator[tuple[object, ...]]:
    for (kind, name, argument), (slope, relative) in found.items():
        known = weight * np.isfinite(slope)
        if not known.any():
            continue
        mean = float(np.sum(np.where(known > 0, slope, 0.0) * known) / known.sum())
        own = weight * np.isfinite(relative)
        if own.any():
            elasticity = float(np.sum(np.where(own > 0, relative, 0.0) * own) / own.sum())
            spread = (float(np.min(relative[own > 0])), float(np.max(relative[own > 0])))
        else:
            elasticity, spread = float("nan"), (float("nan"), float("nan"))
        yield (rule, kind, name, argument, mean, elasticity, *spread)
