"""Trends, clusters and scatter of component tests as tables and sentences."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.resistance import (
        ClusterEffects,
        Option,
        ScatterSeparation,
        TrendOptions,
        Trends,
    )
    from calibrate.study.component_tests import ResistanceResult

MOST_CLUSTERS = 40
"""A longer table of clusters shows only those whose tests matter most."""
_DECIDED = {
    "spearman": "Spearman’s coefficient",
    "kendall": "Kendall’s coefficient",
    "slope": "the slope",
}


def trend_table(trends: Trends) -> Table:
    """Return rank coefficients and log-linear slope of the error against every covariate."""
    coverage = numbers.share(1.0 - trends.level, 0)
    fixed, p = each(numbers.fixed, 2), each(_p_value)
    interval = [_interval(row[0], row[1]) for row in trends.slope_interval.tolist()]
    columns = (
        Column("covariate", list(trends.names), kind="name"),
        Column("ρ", trends.spearman, fixed, "number", group="Spearman"),
        Column("p", trends.spearman_p, p, "number", group="Spearman"),
        Column("τ", trends.kendall, fixed, "number", group="Kendall"),
        Column("p", trends.kendall_p, p, "number", group="Kendall"),
        Column("slope", trends.slope, fixed, "number", group="ln δ on ln covariate"),
        Column(f"{coverage} interval", interval, kind="number", group="ln δ on ln covariate"),
        Column("p", trends.slope_p, p, "number", group="ln δ on ln covariate"),
        Column("p adjusted", trends.adjusted_p, p, "number"),
        Column("trend", ["yes" if f else "no" for f in trends.flagged]),
    )
    return Table(columns, frozenset(np.flatnonzero(trends.flagged).tolist()))


def trend_sentence(trends: Trends) -> str:
    """Return what decided, at which level, and what became of stopped tests."""
    text = (
        f"Decided by {_DECIDED[trends.decided_by]}: a trend is flagged where its p, adjusted by Holm’s procedure for "
        f"all covariates, is below {numbers.significant(trends.level)}."
    )
    if trends.stopped:
        taken = "; the slope takes them in as lower bounds" if trends.stopped_are == "regression" else ""
        text += f" The ranks leave out the {numbers.count(trends.stopped, 'test')} that did not fail{taken}."
    untested = [f"{name}: {why}" for name, why in zip(trends.names, trends.reasons, strict=True) if why]
    return text + (f" Not tested in full – {'; '.join(untested)}." if untested else "")


def options_table(options: TrendOptions) -> Table:
    """Return what can be done about one trend, and what each way costs."""
    every = options.options
    show, text = each(numbers.fixed, 3), each(numbers.significant, 3)
    columns = (
        Column("option", [_option_name(options, o) for o in every]),
        Column("n", [o.n for o in every], kind="number"),
        Column("parameters", [o.parameters for o in every], kind="number"),
        Column("b", [_joined(o.b) for o in every], kind="number", symbol=True),
        Column("V", [o.cov for o in every], show, "number", symbol=True),
        Column("BIC", [o.bic if o.same_data else None for o in every], each(numbers.fixed, 1), "number"),
        Column("cross-validated", [o.cross_validation for o in every], show, "number"),
        Column("r_d", [_joined(o.closed_form.design) for o in every], kind="number", symbol=True),
        Column("gamma_M", [o.closed_form.partial_factor for o in every], show, "number", symbol=True),
        Column("worst β", [o.worst_beta for o in every], each(numbers.beta), "number"),
        Column("at", [o.worst_at for o in every], text, "number"),
    )
    return Table(columns)


def _option_name(options: TrendOptions, option: Option) -> str:
    at = numbers.significant(options.split_at, 3)
    if option.kind == "correct":
        reference = numbers.significant(option.reference, 3)
        power = numbers.fixed(option.slope, 2)
        return Html(f"correct: times ({symbols.html(options.covariate)}/{reference})<sup>{power}</sup>")
    return {
        "leave": "leave it",
        "split": f"split at {at}",
        "lower part": f"only up to {at}",
        "upper part": f"only above {at}",
    }[option.kind]


def _joined(values: object) -> str:
    return " / ".join(numbers.fixed(float(v), 3) for v in np.ravel(np.asarray(values)))


def options_sentence(found: ResistanceResult) -> str:
    """Return how to read the tables of options; empty without one."""
    if not found.options:
        return ""
    target = numbers.significant(found.options[0].target)
    text = (
        "Worst β is that of the resistance alone, over the covariate in the option’s tests, if the fitted trend is "
        f"true; target {target}. A lower BIC and a higher cross-validated score (mean log density of each test as "
        "predicted from the others) are better; both compare options on the same tests only."
    )
    if found.trends.stopped:
        text += " Options rest on the tests that failed, so that the power may differ from the slope above."
    return text


def cluster_table(clusters: ClusterEffects, n: int) -> Table:
    """Return what counting the tests as independent leaves out."""
    columns = (
        Column("tests counted as", ["independent", "in clusters"]),
        Column("n", [float(n), clusters.effective_n], each(numbers.significant, 3), "number"),
        *(
            Column(head, values, each(numbers.fixed, 3), "number", symbol=True)
            for head, values in (
                ("b", [clusters.pooled_b, clusters.b]),
                ("V", [clusters.pooled_cov, clusters.cov]),
                ("r_k", [None, clusters.characteristic]),
                ("r_d", [clusters.pooled_design, clusters.design]),
                ("gamma_M", [None, clusters.partial_factor]),
            )
        ),
    )
    return Table(columns)


def cluster_sentence(clusters: ClusterEffects) -> str:
    """Return the share between clusters, the effective number, and what leaving out one cluster does."""
    scatter = clusters.scatter
    text = (
        f"{numbers.share(clusters.share_between, 0)} of the variance of ln δ is between clusters "
        f"({numbers.share(scatter.level, 0)} interval {numbers.share(scatter.intraclass_interval[0], 0)} to "
        f"{numbers.share(scatter.intraclass_interval[1], 0)}); the tests that failed tell the mean as well as "
        f"{numbers.significant(clusters.effective_n, 3)} independent ones."
    )
    design = clusters.left_out_design
    if np.isfinite(design).any():
        low, high = int(np.nanargmin(design)), int(np.nanargmax(design))
        text += (
            f" Without one cluster the design value over the prediction lies between {numbers.fixed(design[low], 3)} "
            f"(without {clusters.names[low]}) and {numbers.fixed(design[high], 3)} (without {clusters.names[high]})."
        )
    return text


def left_out_table(clusters: ClusterEffects) -> Table:
    """Return what remains without the tests of each cluster; of very many those that matter most."""
    change = clusters.left_out_design / clusters.design
    rows = np.arange(len(clusters.names))
    if rows.size > MOST_CLUSTERS:
        ranked = np.argsort(-np.abs(np.log(np.where(np.isfinite(change), change, 1.0))), kind="stable")
        rows = np.sort(ranked[:MOST_CLUSTERS])
    sizes = {share.name: share.size for share in clusters.scatter.shares}
    names = [clusters.names[k] for k in rows]
    show = each(numbers.fixed, 3)
    columns = (
        Column("without", names),
        Column("failed tests in it", [sizes.get(name) for name in names], kind="number"),
        Column("b", clusters.left_out_b[rows], show, "number", symbol=True),
        Column("V", clusters.left_out_cov[rows], show, "number", symbol=True),
        Column("r_d", clusters.left_out_design[rows], show, "number", symbol=True),
        Column("gamma_M", clusters.left_out_factor[rows], show, "number", symbol=True),
        Column("change of design value", change[rows], each(numbers.change), "number"),
    )
    return Table(columns)


def separation_table(found: ScatterSeparation) -> Table:
    """Return the observed scatter, what is known of it, and what is left for the model."""
    show = numbers.significant
    freedom = numbers.significant(found.freedom)
    squared = Html(symbols.html("V_theta") + "²")
    rows = [
        (symbols.html("V_obs"), show(found.observed_cov), f"of the tests, {freedom} degrees of freedom"),
        *((symbols.html(f"V_{name}"), show(v), "known, given") for name, v in found.known.items()),
        (symbols.html("V_known"), show(found.known_cov), "known parts together, √(Π(1 + V²) − 1)"),
        (squared, show(found.cov_squared), "(1 + V_obs²)/(1 + V_known²) − 1"),
        (squared, show(found.cov_squared_first_order), "V_obs² − ΣV², first order"),
        (
            symbols.html("V_theta"),
            show(found.cov),
            "the model’s own" if math.isfinite(found.cov) else "does not exist",
        ),
    ]
    names, values, how = zip(*rows, strict=True)
    columns = (
        Column("", list(names)),
        Column("value", list(values), kind="number"),
        Column("how", [symbols.running(text) for text in how]),
    )
    return Table(columns, frozenset({len(rows) - 1}))


def separation_sentence(found: ScatterSeparation) -> str:
    """Return how certain the model's own scatter is."""
    low, high = (numbers.significant(v, 3) for v in found.interval)
    if found.probability_negative > 0.0:
        exceed = f"with probability {numbers.probability(found.probability_negative)}"
    else:
        exceed = f"in none of {numbers.whole(found.replicates)} simulated values"
    return (
        f"{numbers.share(found.level, 0)} interval of V_θ²: {low} to {high}; the known parts exceed the whole "
        f"{exceed}. Nothing is clipped."
    )


def _p_value(value: float | None) -> str:
    if value is None or not math.isfinite(value):
        return numbers.NONE
    return "< 0.001" if value < 0.001 else numbers.fixed(value, 3)


def _interval(low: float, high: float) -> str:
    if not (math.isfinite(low) and math.isfinite(high)):
        return numbers.NONE
    return f"{numbers.fixed(low, 2)} to {numbers.fixed(high, 2)}"
