"""What ``calibrate resistance`` prints: the steps of D.8 in short, trends, clusters, routes and doubts."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from calibrate.cli import console
from calibrate.report import numbers

if TYPE_CHECKING:
    from calibrate.resistance import ClusterEffects, ScatterSeparation, SubsetsD8, TrendOptions, Trends
    from calibrate.study.component_tests import ResistanceResult


def print_evaluation(found: ResistanceResult, target: float) -> None:
    """Print an evaluation; resistances are over the prediction from mean properties."""
    from calibrate.cli.app import CAUTION

    records, tests = found.records, found.records.tests
    unit = f" in {records.unit.text}" if records.unit.text else ""
    console.line(f"{records.measured}{unit} against {records.prediction}  ({records.file})")
    stopped = tests.n - tests.n_failed
    ended = f", {numbers.count(stopped, 'test')} stopped before failure" if stopped else ""
    console.line(
        f"n = {tests.n}{ended}, b = {_short(found.annex.b)}, V_delta = {_short(found.annex.v_delta)}, "
        f"target beta {target:g}"
    )
    _annex(found)
    if found.subsets is not None:
        _subsets(found.subsets)
    _trends(found.trends)
    for options in found.options:
        _options(options)
    if found.clusters is not None:
        _clusters(found.clusters)
    if found.separation is not None:
        _separation(found.separation)
    console.heading("Routes side by side")
    console.table(
        ["route", "factor", "value", "r_k", "r_d", "what it takes into account"],
        [[r.name, r.kind, _short(r.factor), _short(r.r_k), _short(r.r_d), r.statement] for r in found.routes],
        [False, False, True, True, True, False],
    )
    if found.doubts:
        console.heading(f"Doubts ({len(found.doubts)})")
        console.listed([(d.code, d.message) for d in found.doubts])
    console.line(f"\n{CAUTION}")


def _short(value: float) -> str:
    return numbers.significant(value, 4)


def _annex(found: ResistanceResult) -> None:
    annex = found.annex
    model, factors = annex.model, annex.factors
    console.heading("EN 1990, D.8, step by step")
    steps = []
    if (correlation := getattr(model, "correlation", None)) is not None:
        steps.append(("correlation of measured and predicted", _short(correlation)))
    steps += [
        ("mean correction b", _short(annex.b)),
        ("scatter of the errors V_delta", _short(annex.v_delta)),
    ]
    if (normality := getattr(model, "normality", None)) is not None:
        p = f"{_p(normality.anderson_darling_p)} and {_p(normality.shapiro_wilk_p)}"
        steps.append(("ln delta normal: p by Anderson-Darling and Shapiro-Wilk", p))
    steps += [
        ("scatter of the prediction V_rt", _short(annex.v_rt)),
        (
            "scatter of the resistance V_r (first order)",
            f"{_short(annex.v_r)} ({_short(annex.v_r_first_order)})",
        ),
        (f"k_n and k_inf, by {factors.source}", f"{_short(factors.k_n)} and {_short(factors.k_infinity)}"),
        (
            f"k_d,n and k_d,inf, by {factors.source}",
            f"{_short(factors.k_d_n)} and {_short(factors.k_d_infinity)}",
        ),
        ("characteristic resistance r_k over prediction", _short(annex.r_k)),
        ("design resistance r_d over prediction", _short(annex.r_d)),
        ("gamma_M = r_k / r_d", _short(annex.gamma_m)),
    ]
    star = float(np.ravel(annex.gamma_m_star)[0])
    if math.isfinite(star):
        steps.append(("gamma_M* = r_n / r_d", _short(star)))
    console.table(["step", "value"], steps, [False, True])


def _p(value: float) -> str:
    return numbers.significant(value, 2)


def _subsets(found: SubsetsD8) -> None:
    console.heading(f"Subgroups, scatter {found.scatter}")
    rows = [
        [str(label), str(a.model.n), *(_short(x) for x in (a.b, a.v_delta, a.r_k, a.r_d, a.gamma_m))]
        for label, a in found.subsets.items()
    ]
    console.table(["subgroup", "n", "b", "V_delta", "r_k", "r_d", "gamma_M"], rows, [False, *[True] * 6])


def _trends(found: Trends) -> None:
    console.heading(f"Trends of measured over predicted, decided by {found.decided_by}")
    rows = [
        [
            name,
            numbers.fixed(found.spearman[j], 2),
            numbers.fixed(found.kendall[j], 2),
            numbers.fixed(found.slope[j], 2),
            f"{numbers.fixed(found.slope_interval[j, 0], 2)} to {numbers.fixed(found.slope_interval[j, 1], 2)}",
            _p(found.adjusted_p[j]),
            "trend" if found.flagged[j] else found.reasons[j] or "none shown",
        ]
        for j, name in enumerate(found.names)
    ]
    heads = ["against", "Spearman", "Kendall", "power", "interval", "p adjusted", "verdict"]
    console.table(heads, rows, [False, True, True, True, False, True, False])


def _options(found: TrendOptions) -> None:
    console.heading(f"What can be done about the trend with {found.covariate}")
    rows = [
        [
            o.kind,
            str(o.n),
            numbers.span(o.b, 3),
            _short(o.cov),
            numbers.span(np.atleast_1d(o.closed_form.partial_factor), 3),
            numbers.fixed(o.worst_beta, 2),
            numbers.fixed(o.bic, 1) if o.same_data else "–",
        ]
        for o in found.options
    ]
    heads = ["option", "n", "b", "V", "gamma_M", "worst beta", "BIC"]
    console.table(heads, rows, [False, *[True] * 6])


def _clusters(found: ClusterEffects) -> None:
    console.heading("Clusters")
    console.line(
        f"{numbers.count(len(found.names), 'cluster')}; {numbers.share(found.share_between)} of the variance of "
        f"ln delta lies between them, so that the tests count as {numbers.significant(found.effective_n, 3)}. With "
        f"that scatter b = {_short(found.b)}, V = {_short(found.cov)}, r_d = {_short(found.design)}; as if independent "
        f"r_d = {_short(found.pooled_design)}."
    )
    rows = [
        [
            str(name),
            _short(found.left_out_b[i]),
            _short(found.left_out_cov[i]),
            _short(found.left_out_design[i]),
        ]
        for i, name in enumerate(found.names)
    ]
    console.table(["without", "b", "V", "r_d"], rows, [False, True, True, True])


def _separation(found: ScatterSeparation) -> None:
    console.heading("Scatter of the model itself")
    parts = ", ".join(f"{name} {_short(v)}" for name, v in found.known.items())
    console.line(
        f"V_theta² = {_short(found.cov_squared)} after V = {_short(found.known_cov)} ({parts}) is taken out of "
        f"{_short(found.observed_cov)}; {numbers.share(found.level, 0)} interval "
        f"{_short(found.interval[0])} to {_short(found.interval[1])}."
    )
