"""What component tests say of a resistance model, as tables and sentences: the tests, and D.8 step by step."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from calibrate.expressions import parse
from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, aligned, as_given, each
from calibrate.resistance import CensoredModelFactor
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.resistance import AnnexD8
    from calibrate.study.component_tests import ResistanceResult
    from calibrate.study.model import ComponentRecords

_DIGITS = 5
_SURVIVORS = {
    "censored": "count as lower bounds",
    "as_failed": "count as if they had failed at the load of the stop",
    "leave_out": "are left out of b and the scatter",
}
_SCATTER = {
    "pooled": "The scatter of the errors is that of all subgroups about their own b, pooled.",
    "own": "Each subgroup has a scatter and factors k of its own.",
    "series": "Each subgroup has a scatter of its own; the factors k are those of the whole series.",
}
_PROPAGATIONS = {
    "sum": "from_sum",
    "lognormal_product": "from_lognormal_product",
    "gradient": "from_gradient",
}
_PROPAGATED = {
    "sum": "first order of a product, √ΣV²",
    "lognormal_product": "lognormal product, √(Π(1 + V²) − 1)",
    "gradient": "first order, by the gradient at the means",
}


def tests_sentence(found: ResistanceResult) -> str:
    """Return how many tests there are, how they ended and what they belong to."""
    records, tests = found.records, found.records.tests
    if stopped := tests.n - tests.n_failed:
        ends = (
            f"{numbers.whole(tests.n_failed)} ended in failure, {numbers.whole(stopped)} were stopped before and "
            f"{_SURVIVORS[records.survivors]}"
        )
    else:
        ends = "all ended in failure"
    text = f"{numbers.count(tests.n, 'test')} from {records.file}: {ends}"
    if gone := len(records.ratio.excluded):
        text += f"; {numbers.whole(gone)} more were left out (see Screening of records)"
    groups = len(tests.subgroups)
    held = [numbers.count(groups, "subgroup")] if groups else []
    if tests.cluster is not None:
        held.append(numbers.count(len(set(tests.cluster.tolist())), "cluster"))
    return f"{text}. " + (
        f"They come from {' and '.join(held)}." if held else "No subgroups or clusters are named."
    )


def prediction_formula(records: ComponentRecords) -> Html:
    """Return the prediction, typeset."""
    return symbols.formula(parse(records.prediction))


def prediction_units(records: ComponentRecords) -> Html:
    """Return the columns of the prediction with their units."""
    texts = []
    for name in parse(records.prediction).names:
        unit = records.units.get(name)
        stated = symbols.escaped(f" in {format_unit(unit.text)}" if unit and unit.text else " without unit")
        texts.append(f"{symbols.html(name)}{stated}")
    return Html(", ".join(texts))


def steps_table(annex: AnnexD8) -> Table:
    """Return every step of D.8 with its value and where it comes from."""
    rows = [*_error_steps(annex), *_scatter_steps(annex), *_resistance_steps(annex)]
    seen = ""
    steps = []
    for step, *_ in rows:
        steps.append("" if step == seen else step)
        seen = step
    strong = {i for i, row in enumerate(rows) if row[1] in ("r_d", "gamma_M")}
    return Table(
        (
            Column("step", [symbols.running(s) for s in steps], as_given),
            Column("", [row[1] for row in rows], kind="name"),
            Column("value", [row[2] for row in rows], aligned(_DIGITS), "number"),
            Column("how", [symbols.running(row[3]) for row in rows]),
        ),
        frozenset(strong),
    )


Row = tuple[str, str, float, str]


def _error_steps(annex: AnnexD8) -> list[Row]:
    model, error = annex.model, annex.error
    if isinstance(model, CensoredModelFactor):
        b_from = "mean of the lognormal ratio of largest likelihood, stopped tests as lower bounds"
        mean, sd = model.log_mean - math.log(error.b), annex.q_delta
        sd_from = "of largest likelihood, times √(m/(m − 1)) for m failures"
    else:
        b_from = "slope of measured against predicted, Σ(r_e r_t)/Σ r_t²"
        mean, sd = model.log_mean, math.sqrt(model.log_variance)
        sd_from = "of ln δ, with n − 1"
    rows = [
        ("mean correction", "b", error.b, b_from),
        ("errors δ = r_e/(b r_t)", "Delta", mean, "mean of ln δ"),
        ("errors δ = r_e/(b r_t)", "s_Delta", sd, sd_from),
    ]
    how = "known from elsewhere" if error.known else "√(exp(s_Δ²) − 1)"
    if error.freedom is not None:
        how = f"pooled over the subgroups, {error.freedom} degrees of freedom"
    return [*rows, ("errors δ = r_e/(b r_t)", "V_delta", error.v_delta, how)]


def _scatter_steps(annex: AnnexD8) -> list[Row]:
    predicted = annex.predicted
    step = "scatter of the prediction"
    rows = [(step, f"V_{name}", value, "given") for name, value in predicted.covs.items()]
    for way, attribute in _PROPAGATIONS.items():
        value = float(getattr(predicted, attribute))
        if math.isfinite(value):
            used = "; used" if way == predicted.propagation and predicted.covs else ""
            rows.append((step, "V_rt", value, _PROPAGATED[way] + used))
    if not predicted.covs and not predicted.gradient:
        rows = [(step, "V_rt", annex.v_rt, "no basic variable with scatter was given")]
    step = "scatter of the resistance"
    rows += [
        (step, "V_r", annex.v_r, "√((1 + V_δ²)(1 + V_rt²) − 1)"),
        (step, "V_r", annex.v_r_first_order, "√(V_δ² + V_rt²), for comparison"),
        (step, "Q_rt", annex.q_rt, "√ln(1 + V_rt²)"),
        (step, "Q_delta", annex.q_delta, "√ln(1 + V_δ²)"),
        (step, "Q", annex.q, "√ln(1 + V_r²)"),
        ("weights", "alpha_rt", annex.alpha_rt, "Q_rt/Q"),
        ("weights", "alpha_delta", annex.alpha_delta, "Q_δ/Q"),
    ]
    return rows


def _resistance_steps(annex: AnnexD8) -> list[Row]:
    factors = annex.factors
    count = f"{numbers.count(annex.error.size, 'test')}, {factors.source}"
    rows = [
        ("factors k", "k_∞", factors.k_infinity, "5 % fractile, nothing estimated"),
        ("factors k", "k_n", factors.k_n, f"5 % fractile, {count}"),
        ("factors k", "k_d_∞", factors.k_d_infinity, "α_R β, nothing estimated"),
        ("factors k", "k_d_n", factors.k_d_n, f"Φ(−α_R β), {count}"),
    ]
    step = "resistance over r_t(X_m)"
    if annex.many:
        r_k, r_d = "b exp(−k_∞ Q − Q²/2), more than 100 tests", "b exp(−k_d,∞ Q − Q²/2)"
    else:
        r_k = "b exp(−k_∞ α_rt Q_rt − k_n α_δ Q_δ − Q²/2)"
        r_d = "b exp(−k_d,∞ α_rt Q_rt − k_d,n α_δ Q_δ − Q²/2)"
    rows += [
        (step, "r_k", annex.r_k, r_k),
        (step, "r_d", annex.r_d, r_d),
        ("factor", "gamma_M", annex.gamma_m, "r_k/r_d"),
    ]
    if np.isfinite(annex.nominal).all():
        ratio = numbers.span(np.ravel(annex.nominal))
        star = float(np.max(annex.gamma_m_star))
        rows.append(("factor", "gamma_M*", star, f"r_n/r_d, nominal over mean prediction {ratio}"))
    return rows


def normality_sentence(annex: AnnexD8) -> str:
    """Return whether ln delta looks normal, and how well measured and predicted resistance agree."""
    model = annex.model
    if isinstance(model, CensoredModelFactor):
        return (
            "Tests that were stopped are among the data, for which no test of normality is made here; the probability "
            "paper shows how far ln δ follows a straight line."
        )
    found = model.normality
    parts = [
        f"{name} {letter} = {numbers.significant(value, 3)}, p {_p(p)}"
        for name, letter, value, p in (
            ("Anderson–Darling", "A²", found.anderson_darling, found.anderson_darling_p),
            ("Shapiro–Wilk", "W", found.shapiro_wilk, found.shapiro_wilk_p),
        )
        if math.isfinite(p)
    ]
    verdict = "speak against" if found.rejected else "do not speak against"
    text = f"The tests {verdict} a normal ln δ at 5 % ({'; '.join(parts)})." if parts else ""
    if math.isfinite(model.correlation):
        text += f" Correlation of measured and predicted resistance: {numbers.fixed(model.correlation, 3)}."
    return text.strip()


def _p(value: float) -> str:
    return "< 0.001" if value < 0.001 else f"= {numbers.fixed(value, 3)}"


def subsets_table(found: ResistanceResult) -> Table | None:
    """Return b and factors of every subgroup beside those of all tests together; None without subgroups."""
    if found.subsets is None:
        return None
    parts = [*found.subsets.subsets.items(), ("all together", found.subsets.together)]
    annexes = [annex for _, annex in parts]
    columns = [
        Column("subgroup", [str(label) for label, _ in parts]),
        Column("n", [a.model.n for a in annexes], kind="number"),
        *(
            Column(head, [getattr(a, key) for a in annexes], each(numbers.fixed, 3), "number", symbol=True)
            for head, key in (
                ("b", "b"), ("V_delta", "v_delta"), ("V_r", "v_r"), ("r_k", "r_k"), ("r_d", "r_d"),
                ("gamma_M", "gamma_m"),
            )
        ),
    ]  # fmt: skip
    return Table(tuple(columns), frozenset({len(parts) - 1}))


def subsets_sentence(found: ResistanceResult) -> str:
    """Return how the scatter of the subgroups was found, and whether they scatter alike."""
    subsets = found.subsets
    if subsets is None:
        return ""
    text = _SCATTER.get(subsets.scatter, "")
    if found.records.tests.n_failed < found.records.tests.n and found.records.survivors == "censored":
        text += " Tests that were stopped are left out here, where no likelihood is formed."
    if math.isfinite(subsets.equal_scatter_p):
        text += f" Equal scatter of the subgroups (Bartlett): p {_p(subsets.equal_scatter_p)}."
    return text.strip()
