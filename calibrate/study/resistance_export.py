"""Component tests and what they say as plain data: a part of result.json, and one table of tests for each."""

from __future__ import annotations

import csv
import io
import math
from typing import TYPE_CHECKING, Any

import numpy as np

from calibrate.resistance import CensoredModelFactor
from calibrate.study.uncertainty_ledger import uncertainty_ledger

if TYPE_CHECKING:
    from calibrate.resistance import (
        AnnexD8,
        ClusterEffects,
        MeanValueFactors,
        NorthAmericanFactor,
        ScatterSeparation,
        TrendOptions,
        Trends,
    )
    from calibrate.study.component_tests import ResistanceResult, Route
    from calibrate.study.model import Study

_OWN_COLUMNS = ("row", "measured", "predicted", "ratio", "delta", "survived", "subgroup", "cluster")


FORMAT = "calibrate-resistance/1"


def resistance_content(found: ResistanceResult, study: Study | None = None) -> dict[str, Any]:
    """Return the numbers of every step and route; None for a number that does not exist.

    The ledger of statistical uncertainty is that of a study; without one it is left out.
    """
    records, tests = found.records, found.records.tests
    return {
        "name": records.name,
        "file": records.file,
        "sha256": records.ratio.sha256,
        "excluded": [{"row": e.row, "reason": e.reason} for e in records.ratio.excluded],
        "measured": records.measured,
        "unit": records.unit.text,
        "prediction": records.prediction,
        "units": {name: unit.text for name, unit in records.units.items()},
        "n": tests.n,
        "failed": tests.n_failed,
        "survivors": records.survivors if tests.survived.any() else None,
        "annex_d8": _annex(found.annex),
        "subsets": None
        if found.subsets is None
        else {
            "scatter": found.subsets.scatter,
            "pooled_v_delta": _number(found.subsets.pooled_v_delta),
            "freedom": found.subsets.freedom,
            "equal_scatter_p": _number(found.subsets.equal_scatter_p),
            "subsets": {str(label): _annex(part) for label, part in found.subsets.subsets.items()},
        },
        "trends": _trends(found.trends),
        "options": {options.covariate: _options(options) for options in found.options},
        "clusters": None if found.clusters is None else _clusters(found.clusters),
        "sample": {
            "n": found.direct.n,
            "log_mean": _number(found.direct.mean),
            "log_sd": _number(found.direct.sd),
            "k_n": _number(found.direct.k_n),
            "k_d_n": _number(found.direct.k_d_n),
            "x_k": _number(found.direct.x_k),
            "x_d": _number(found.direct.x_d),
            "gamma_m": _number(found.direct.gamma_m),
        },
        "north_american": None if found.north_american is None else _american(found.north_american),
        "mean_value": None if found.mean_value is None else _mean_value(found, found.mean_value),
        "separation": None if found.separation is None else _separation(found.separation),
        "routes": [_route(route) for route in found.routes],
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in found.doubts],
        **({} if study is None else {"ledger": _ledger(study, found)}),
    }


def _ledger(study: Study, found: ResistanceResult) -> list[dict[str, Any]]:
    return [
        {
            "path": e.path,
            "subject": e.subject,
            "mechanism": e.mechanism,
            "n": e.n,
            "procedure": e.procedure,
        }
        for e in uncertainty_ledger(study, found).entries
    ]


def tests_csv(found: ResistanceResult) -> str:
    """Return one row for each test, with delta as measured over b times predicted; of a survivor a lower bound."""
    tests = found.records.tests
    columns: dict[str, list[Any]] = {
        "row": tests.rows.tolist(),
        "measured": tests.experimental.tolist(),
        "predicted": tests.predicted.tolist(),
        "ratio": tests.ratio.tolist(),
        "delta": (tests.ratio / found.annex.b).tolist(),
        "survived": ["true" if s else "false" for s in tests.survived.tolist()],
    }
    if tests.subgroup is not None:
        columns["subgroup"] = tests.subgroup.tolist()
    if tests.cluster is not None:
        columns["cluster"] = tests.cluster.tolist()
    for name, values in tests.inputs.items():
        columns[f"input {name}" if name in _OWN_COLUMNS else name] = values.tolist()
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip(*columns.values(), strict=True))
    return text.getvalue()


def _number(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(value)


def _numbers(values: Any) -> list[float | None]:
    return [_number(float(v)) for v in np.ravel(np.asarray(values, dtype=np.float64))]


def _annex(annex: AnnexD8) -> dict[str, Any]:
    model, factors = annex.model, annex.factors
    content: dict[str, Any] = {
        "n": annex.error.size,
        "survivors_as_bounds": isinstance(model, CensoredModelFactor),
        "b": annex.b,
        "covs": dict(annex.predicted.covs),
        "propagation": annex.predicted.propagation,
        "v_rt_sum": _number(annex.predicted.from_sum),
        "v_rt_lognormal_product": _number(annex.predicted.from_lognormal_product),
        "v_rt_gradient": _number(annex.predicted.from_gradient),
        **{
            key: _number(getattr(annex, key))
            for key in (
                "v_rt", "v_delta", "v_r", "v_r_first_order", "q_rt", "q_delta", "q", "alpha_rt", "alpha_delta",
            )
        },
        **{key: _number(getattr(factors, key)) for key in ("k_infinity", "k_n", "k_d_infinity", "k_d_n")},
        "factors_from": factors.source,
        "many": annex.many,
        "r_k": annex.r_k,
        "r_d": annex.r_d,
        "gamma_m": annex.gamma_m,
        "gamma_m_star": _numbers(annex.gamma_m_star) if np.isfinite(annex.gamma_m_star).any() else None,
        "nominal_ratio": _numbers(annex.nominal) if np.isfinite(annex.nominal).any() else None,
    }  # fmt: skip
    if isinstance(model, CensoredModelFactor):
        content |= {
            "log_mean": model.log_mean,
            "log_sd": model.log_sd,
            "log_mean_error": _number(model.log_mean_error),
            "log_sd_error": _number(model.log_sd_error),
        }
        return content
    normality = model.normality
    return content | {
        "log_mean": model.log_mean,
        "log_sd": _number(math.sqrt(model.log_variance)),
        "correlation": _number(model.correlation),
        "normality": {
            key: _number(getattr(normality, key))
            for key in ("anderson_darling", "anderson_darling_p", "shapiro_wilk", "shapiro_wilk_p")
        },
    }


def _trends(trends: Trends) -> dict[str, Any]:
    keys = (
        "spearman", "spearman_p", "kendall", "kendall_p", "intercept", "slope", "slope_error", "slope_p", "r_squared",
        "residual_sd", "adjusted_p",
    )  # fmt: skip
    return {
        "n": trends.n,
        "stopped": trends.stopped,
        "stopped_are": trends.stopped_are,
        "decided_by": trends.decided_by,
        "level": trends.level,
        "covariates": {
            name: {
                **{key: _number(float(getattr(trends, key)[j])) for key in keys},
                "slope_interval": _numbers(trends.slope_interval[j]),
                "flagged": bool(trends.flagged[j]),
                "reason": trends.reasons[j],
            }
            for j, name in enumerate(trends.names)
        },
    }


def _options(options: TrendOptions) -> dict[str, Any]:
    return {
        "split_at": options.split_at,
        "target": options.target,
        "options": {
            o.kind: {
                "n": o.n,
                "parameters": o.parameters,
                "limits": [_numbers(row) for row in o.limits],
                "b": _numbers(o.b),
                "slope": o.slope,
                "reference": o.reference,
                "cov": _number(o.cov),
                "bic": _number(o.bic) if o.same_data else None,
                "cross_validation": _number(o.cross_validation),
                "r_k": _numbers(o.closed_form.characteristic),
                "r_d": _numbers(o.closed_form.design),
                "gamma_m": _number(o.closed_form.partial_factor),
                "worst_beta": _number(o.worst_beta),
                "worst_at": _number(o.worst_at),
                "best_beta": _number(o.best_beta),
            }
            for o in options.options
        },
    }


def _clusters(clusters: ClusterEffects) -> dict[str, Any]:
    scatter = clusters.scatter
    return {
        "b": _number(clusters.b),
        "cov": _number(clusters.cov),
        "between_log_sd": _number(scatter.between_sd),
        "within_log_sd": _number(scatter.within_sd),
        "share_between": _number(clusters.share_between),
        "share_interval": _numbers(scatter.intraclass_interval),
        "interval_level": scatter.level,
        "effective_n": _number(clusters.effective_n),
        "r_k": _number(clusters.characteristic),
        "r_d": _number(clusters.design),
        "gamma_m": _number(clusters.partial_factor),
        "pooled": {
            "b": _number(clusters.pooled_b),
            "cov": _number(clusters.pooled_cov),
            "r_d": _number(clusters.pooled_design),
        },
        "without": {
            name: {
                "b": _number(float(clusters.left_out_b[k])),
                "cov": _number(float(clusters.left_out_cov[k])),
                "r_d": _number(float(clusters.left_out_design[k])),
                "gamma_m": _number(float(clusters.left_out_factor[k])),
            }
            for k, name in enumerate(clusters.names)
        },
    }


def _american(found: NorthAmericanFactor) -> dict[str, Any]:
    parts = {"material": found.material, "fabrication": found.fabrication, "professional": found.professional}
    return {
        "format": found.format.name,
        "target": found.format.target,
        "coefficients": found.coefficients,
        "c_phi": found.c_phi,
        "v_q": found.v_q,
        **{name: {"mean": part.mean, "cov": part.cov} for name, part in parts.items()},
        "n": found.n,
        "c_p": found.c_p,
        "v_p": found.v_p,
        "floor_governs": found.floor_governs,
        "v_total": found.v_total,
        "phi": found.phi,
        "phi_other_coefficients": found.phi_other,
    }


def _mean_value(found: ResistanceResult, factors: MeanValueFactors) -> dict[str, Any]:
    asked = found.records.mean_value
    assert asked is not None
    return {
        "target": asked.target,
        "dead_to_live": _numbers(asked.loads.dead_to_live),
        "load_cov": _numbers(factors.load_cov),
        "lognormal": _numbers(factors.lognormal),
        "linearised": _numbers(factors.linearised),
        "form": _numbers(factors.form.phi),
        "form_status": np.ravel(factors.form.status).tolist(),
        "beta_of_lognormal": _numbers(factors.beta),
    }


def _separation(found: ScatterSeparation) -> dict[str, Any]:
    return {
        "observed_cov": found.observed_cov,
        "freedom": found.freedom,
        "known": dict(found.known),
        "known_cov": found.known_cov,
        "cov_squared": found.cov_squared,
        "cov_squared_first_order": found.cov_squared_first_order,
        "cov": _number(found.cov),
        "interval": _numbers(found.interval),
        "level": found.level,
        "probability_negative": found.probability_negative,
        "replicates": found.replicates,
    }


def _route(route: Route) -> dict[str, Any]:
    return {
        "name": route.name,
        "kind": route.kind,
        "r_k": _number(route.r_k),
        "r_d": _number(route.r_d),
        "factor": _number(route.factor),
        "statement": route.statement,
    }
