"""An evaluation of component tests as plain data, for JSON: numbers at full precision, null where there is none."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

if TYPE_CHECKING:
    from calibrate.resistance import (
        AnnexD8,
        ClusterEffects,
        ScatterSeparation,
        SubsetsD8,
        TrendOptions,
        Trends,
    )
    from calibrate.study.component_tests import ResistanceResult

FORMAT = "calibrate-resistance/1"


def number(value: float | None) -> float | None:
    """Return a float; None for what is not finite."""
    return None if value is None or not math.isfinite(value) else float(value)


def _numbers(values: ArrayLike) -> list[float | None]:
    return [number(float(x)) for x in np.atleast_1d(np.asarray(values, dtype=np.float64)).ravel()]


def resistance_dict(found: ResistanceResult) -> dict[str, Any]:
    """Return the evaluation without its study; resistances are over the prediction from mean properties."""
    records, tests = found.records, found.records.tests
    subsets, clusters, separation = found.subsets, found.clusters, found.separation
    return {
        "name": records.name,
        "file": records.file,
        "sha256": records.ratio.sha256,
        "measured": records.measured,
        "prediction": records.prediction,
        "unit": records.unit.text,
        "n": tests.n,
        "n_failed": tests.n_failed,
        "survivors": records.survivors if tests.survived.any() else None,
        "excluded": [{"row": e.row, "reason": e.reason} for e in records.ratio.excluded],
        "b": number(found.annex.b),
        "v_delta": number(found.annex.v_delta),
        "annex_d8": _annex(found.annex),
        "subsets": None if subsets is None else _subsets(subsets),
        "trends": _trends(found.trends),
        "trend_options": [_options(o) for o in found.options],
        "clusters": None if clusters is None else _clusters(clusters),
        "sample_d7": {
            "r_k": number(found.direct.x_k),
            "r_d": number(found.direct.x_d),
            "gamma_m": number(found.direct.gamma_m),
            "k_n": number(found.direct.k_n),
            "k_d_n": number(found.direct.k_d_n),
            "log_mean": number(found.direct.mean),
            "log_sd": number(found.direct.sd),
        },
        "own_scatter": None if separation is None else _separation(separation),
        "routes": [
            {
                "name": r.name,
                "factor": r.kind,
                "value": number(r.factor),
                "r_k": number(r.r_k),
                "r_d": number(r.r_d),
                "statement": r.statement,
            }
            for r in found.routes
        ],
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in found.doubts],
    }


def _annex(annex: AnnexD8) -> dict[str, Any]:
    model, factors = annex.model, annex.factors
    normality = getattr(model, "normality", None)
    return {
        "b": number(annex.b),
        "v_delta": number(annex.v_delta),
        "correlation": number(getattr(model, "correlation", math.nan)),
        "anderson_darling_p": None if normality is None else number(normality.anderson_darling_p),
        "shapiro_wilk_p": None if normality is None else number(normality.shapiro_wilk_p),
        "covs": dict(annex.predicted.covs),
        "v_rt": number(annex.v_rt),
        "v_rt_lognormal_product": number(annex.predicted.from_lognormal_product),
        "v_r": number(annex.v_r),
        "v_r_first_order": number(annex.v_r_first_order),
        "alpha_rt": number(annex.alpha_rt),
        "alpha_delta": number(annex.alpha_delta),
        "factors": factors.source,
        "k_infinity": number(factors.k_infinity),
        "k_n": number(factors.k_n),
        "k_d_infinity": number(factors.k_d_infinity),
        "k_d_n": number(factors.k_d_n),
        "large_sample": annex.many,
        "r_k": number(annex.r_k),
        "r_d": number(annex.r_d),
        "gamma_m": number(annex.gamma_m),
        "gamma_m_star": _single(annex.gamma_m_star),
    }


def _single(values: ArrayLike) -> float | None:
    (value, *_) = _numbers(values)
    return value


def _subsets(subsets: SubsetsD8) -> dict[str, Any]:
    return {
        "scatter": subsets.scatter,
        "pooled_v_delta": number(subsets.pooled_v_delta),
        "freedom": subsets.freedom,
        "equal_scatter_p": number(subsets.equal_scatter_p),
        "subgroups": {str(label): _annex(annex) for label, annex in subsets.subsets.items()},
    }


def _trends(found: Trends) -> dict[str, Any]:
    return {
        "n": found.n,
        "stopped": found.stopped,
        "stopped_are": found.stopped_are,
        "decided_by": found.decided_by,
        "level": found.level,
        "covariates": [
            {
                "name": name,
                "spearman": number(found.spearman[j]),
                "spearman_p": number(found.spearman_p[j]),
                "kendall": number(found.kendall[j]),
                "kendall_p": number(found.kendall_p[j]),
                "slope": number(found.slope[j]),
                "slope_interval": _numbers(found.slope_interval[j]),
                "adjusted_p": number(found.adjusted_p[j]),
                "trend": bool(found.flagged[j]),
                "reason": found.reasons[j],
            }
            for j, name in enumerate(found.names)
        ],
    }


def _options(found: TrendOptions) -> dict[str, Any]:
    return {
        "covariate": found.covariate,
        "split_at": number(found.split_at),
        "options": [
            {
                "kind": o.kind,
                "n": o.n,
                "parameters": o.parameters,
                "limits": [_numbers(limits) for limits in o.limits],
                "b": _numbers(o.b),
                "slope": number(o.slope),
                "v": number(o.cov),
                "partial_factor": _numbers(o.closed_form.partial_factor),
                "worst_beta": number(o.worst_beta),
                "worst_at": number(o.worst_at),
                "bic": number(o.bic),
                "cross_validation": number(o.cross_validation),
            }
            for o in found.options
        ],
    }


def _clusters(found: ClusterEffects) -> dict[str, Any]:
    return {
        "b": number(found.b),
        "v": number(found.cov),
        "share_between": number(found.share_between),
        "effective_n": number(found.effective_n),
        "r_k": number(found.characteristic),
        "r_d": number(found.design),
        "gamma_m": number(found.partial_factor),
        "as_if_independent": {
            "b": number(found.pooled_b),
            "v": number(found.pooled_cov),
            "r_d": number(found.pooled_design),
        },
        "without": [
            {
                "cluster": str(name),
                "b": number(found.left_out_b[i]),
                "v": number(found.left_out_cov[i]),
                "r_d": number(found.left_out_design[i]),
                "gamma_m": number(found.left_out_factor[i]),
            }
            for i, name in enumerate(found.names)
        ],
    }


def _separation(found: ScatterSeparation) -> dict[str, Any]:
    return {
        "observed": number(found.observed_cov),
        "known": dict(found.known),
        "known_together": number(found.known_cov),
        "own": number(found.cov),
        "own_squared": number(found.cov_squared),
        "own_squared_interval": _numbers(found.interval),
        "level": number(found.level),
        "probability_negative": number(found.probability_negative),
    }
