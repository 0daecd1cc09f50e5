"""What the records show, as tables and sentences: screening, tests of fit, lots, characteristic values, pedigree."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, each
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.actions.return_levels import ReturnLevels
    from calibrate.fitting import Comparison
    from calibrate.fitting.fit_tests import FitTests
    from calibrate.fitting.lots import LotScatter, Pooling
    from calibrate.fitting.modes import ModeFit
    from calibrate.records import Sample
    from calibrate.records.screening import Finding, Screening
    from calibrate.study.model import Quantity
    from calibrate.study.result import Result

_TESTS = (
    ("anderson_darling", "A²"),
    ("cramer_von_mises", "W²"),
    ("kolmogorov_smirnov", "D"),
    ("lower_tail", "lower tail"),
    ("upper_tail", "upper tail"),
    ("plot_correlation", "r"),
)


def screening_table(screenings: Mapping[str, Screening]) -> Table:
    """Return count, moments and their standard errors of every sample."""
    found = list(screenings.values())
    moments = [s.moments for s in found]
    bounds = [s.n_right + s.n_left + s.n_interval for s in found]
    columns = [
        Column("records", list(screenings)),
        Column("n", [s.n for s in found], kind="number"),
        Column("mean", [None if m is None else m.mean for m in moments], each(numbers.significant), "number"),
        Column("sd", [None if m is None else m.sd for m in moments], each(numbers.significant, 3), "number"),
        Column(
            "cov", [None if m is None else m.cov for m in moments], each(numbers.significant, 3), "number"
        ),
        Column(
            "skewness ± se",
            ["" if m is None else _with_error(m.skewness, m.skewness_se) for m in moments],
            kind="number",
        ),
        Column(
            "excess kurtosis ± se",
            ["" if m is None else _with_error(m.kurtosis, m.kurtosis_se) for m in moments],
            kind="number",
        ),
        Column("findings", [len(s.findings) for s in found], kind="number"),
    ]
    if any(bounds):
        columns.insert(2, Column("exact", [s.n_exact for s in found], kind="number"))
        columns.insert(3, Column("survived", [s.n_right for s in found], kind="number"))
        columns.insert(4, Column("other bounds", [s.n_left + s.n_interval for s in found], kind="number"))
    return Table(tuple(columns))


def _with_error(value: float | None, error: float | None) -> str:
    if value is None or not math.isfinite(value):
        return ""
    tail = f" ± {numbers.fixed(error, 2)}" if error is not None and math.isfinite(error) else ""
    return numbers.fixed(value, 2) + tail


def findings(screenings: Mapping[str, Screening]) -> list[tuple[str, Finding]]:
    """Return every finding with the name of its records, doubts first."""
    every = [(name, f) for name, s in screenings.items() for f in s.findings]
    return sorted(every, key=lambda pair: pair[1].level != "doubt")


def exclusion_table(samples: Mapping[str, Sample]) -> Table:
    """Return the rows that were left out, each with its reason."""
    rows = [(name, e) for name, s in samples.items() for e in s.excluded]
    return Table(
        (
            Column("records", [name for name, _ in rows]),
            Column("row", [e.row for _, e in rows], kind="number"),
            Column("value", [e.value_text for _, e in rows]),
            Column("reason", [e.reason for _, e in rows]),
        )
    )


def how_read(samples: Mapping[str, Sample]) -> list[tuple[str, str]]:
    """Return what a reader must know of how each file was read: form, formula, truncation, normalisation."""
    notes = []
    for name, sample in samples.items():
        parts = [sample.format_note] if sample.format_note else []
        if sample.formula:
            parts.append(f"value = {sample.formula}")
        seen, unit = sample.observations, format_unit(sample.unit.text) if sample.unit.text else ""
        if math.isfinite(seen.above):
            parts.append(
                f"only specimens above {numbers.significant(seen.above)} {unit} could enter".rstrip()
            )
        if math.isfinite(seen.below):
            parts.append(
                f"only specimens below {numbers.significant(seen.below)} {unit} could enter".rstrip()
            )
        if sample.normalisation is not None:
            parts.append(_normalised(sample))
        if parts:
            notes.append((name, "; ".join(parts)))
    return notes


def _normalised(sample: Sample) -> str:
    found = sample.normalisation
    assert found is not None
    texts = []
    for covariate, exponent, error in zip(
        found.covariates, found.exponents, found.standard_errors, strict=True
    ):
        scatter = f" ± {numbers.significant(error, 2)}" if error > 0 else ""
        texts.append(f"{covariate}^{numbers.significant(exponent, 3)}{scatter}")
    return "normalised to reference conditions by " + ", ".join(texts)


def comparison_table(comparison: Comparison, tests: Mapping[str, FitTests]) -> Table | None:
    """Return criteria and p-values of the converged candidates; None where nothing was tested."""
    shown = [c for c in comparison.candidates if c.converged]
    if not tests or not shown:
        return None
    best = min(c.aicc for c in shown)
    relative = [math.exp(-0.5 * (c.aicc - best)) if math.isfinite(c.aicc) else 0.0 for c in shown]
    total = sum(relative) or 1.0
    columns = [
        Column("family", [c.family for c in shown]),
        Column("BIC", [c.bic for c in shown], each(numbers.fixed, 1), "number"),
        Column("Akaike weight", [r / total for r in relative], each(numbers.share, 0), "number"),
    ]
    for key, head in _TESTS:
        values = [tests[c.family].p_values[key] if c.family in tests else None for c in shown]
        columns.append(Column(head, values, each(_p_value), "number", group="p-value"))
    chosen = {i for i, c in enumerate(shown) if c.family == comparison.recommended}
    return Table(tuple(columns), strong=frozenset(chosen))


def _p_value(value: float | None) -> str:
    if value is None or not math.isfinite(value):
        return numbers.NONE
    return "< 0.01" if value < 0.01 else numbers.fixed(value, 2)


def verdict(comparison: Comparison, tests: Mapping[str, FitTests], tail: str | None) -> str:
    """Return two sentences on the choice of a family: what the sample does not reject, and what supports the choice."""
    best = comparison.best
    if best is None:
        return "None of the candidates could be fitted."
    kept = [name for name, t in tests.items() if not t.rejected("anderson_darling")]
    if best.family in kept:
        others = [name for name in kept if name != best.family]
        also = f", nor {_listed(others, 'or')}" if others else ""
        first = f"The sample does not reject {best.family}{also} (Anderson–Darling, 5 %)."
    elif best.family in tests:
        first = f"The sample speaks against {best.family} (Anderson–Darling, 5 %), although it has the smallest AICc."
    else:
        first = f"No test of fit is defined for a sample with bounds; {best.family} has the smallest AICc."
    found = tests.get(best.family)
    if found is not None and tail is not None:
        p = found.p_values[f"{tail}_tail"]
        first += f" In the {tail} tail, which decides, its p-value is {_p_value(p)}."
    return (
        first
        + " Not rejected does not mean correct: few values cannot show the tail that decides the reliability."
    )


def _listed(names: Sequence[str], word: str = "and") -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} {word} {names[-1]}"


def lot_table(scatter: LotScatter) -> Table:
    """Return size, mean and scatter of every lot, in the unit of the records."""
    logarithmic = scatter.scale == "logarithmic"

    def back(value: float) -> float:
        return math.exp(value) if logarithmic else value

    shares = scatter.shares
    heads = ("median", "cov") if logarithmic else ("mean", "sd")
    return Table(
        (
            Column("lot", [s.name for s in shares]),
            Column("n", [s.size for s in shares], kind="number"),
            Column(heads[0], [back(s.mean) for s in shares], each(numbers.significant), "number"),
            Column(heads[1], [s.sd for s in shares], each(numbers.significant, 3), "number"),
            Column("smallest", [back(s.lowest) for s in shares], each(numbers.significant), "number"),
            Column("largest", [back(s.highest) for s in shares], each(numbers.significant), "number"),
            Column(
                "drawn to the others",
                [back(s.shrunken_mean) for s in shares],
                each(numbers.significant),
                "number",
            ),
        )
    )


def lot_sentences(scatter: LotScatter, pooled: Pooling | None, stands_for: str) -> list[str]:
    """Return what the lots show, in words."""
    if len(scatter.shares) < 2:
        return ["There is one lot only; scatter between lots cannot be seen."]
    kind = "logarithms" if scatter.scale == "logarithmic" else "values"
    low, high = scatter.intraclass_interval
    scatters = (
        f"Standard deviation of the {kind} between lots {numbers.significant(scatter.between_sd, 3)}, within lots "
        f"{numbers.significant(scatter.within_sd, 3)}, together {numbers.significant(scatter.total_sd, 3)}; share of "
        f"the variance between lots {numbers.share(scatter.intraclass, 0)} ({numbers.share(scatter.level, 0)} interval "
        f"{numbers.share(low, 0)} to {numbers.share(high, 0)}); effective number of specimens "
        f"{numbers.fixed(scatter.effective_n, 1)} of {scatter.n}."
    )
    texts = [scatters]
    if pooled is not None:
        texts.append(pooled.sentence)
    if stands_for:
        texts.append(f"In this study the variable stands for: {stands_for}.")
    return texts


def return_level_table(levels: ReturnLevels) -> Table:
    """Return the levels of several return periods with their intervals."""
    return Table(
        (
            Column("return period", [numbers.years(t) for t in levels.years]),
            Column("level", [numbers.significant(v) for v in levels.levels], kind="number"),
            Column("from", [numbers.significant(v) for v in levels.lower], kind="number"),
            Column("to", [numbers.significant(v) for v in levels.upper], kind="number"),
            Column("", ["longer than the record" if b else "" for b in levels.beyond_record]),
        )
    )


def mode_table(modes: Sequence[ModeFit]) -> Table:
    """Return failures and fit of each failure mode."""
    return Table(
        (
            Column("mode", [m.name for m in modes]),
            Column("failures", [m.failures for m in modes], kind="number"),
            Column("survived it", [m.survivors for m in modes], kind="number"),
            Column("fit", [_mode_fit(m) for m in modes]),
        )
    )


def _mode_fit(mode: ModeFit) -> str:
    if mode.fit is None:
        return "too few failures"
    if not mode.fit.converged:
        return mode.fit.reason
    values = ", ".join(f"{k} = {numbers.significant(v, 4)}" for k, v in mode.fit.parameters.items())
    return f"{mode.fit.family}, {values}"


def bond_table(result: Result) -> Table:
    """Return every quantity that stands for a variable: what it is, and what the model implies for it."""
    found = result.biases
    quantities = [result.study.quantities.get(b.quantity) for b in found]
    return Table(
        (
            Column("quantity", [b.quantity for b in found], kind="name"),
            Column("of", [b.variable for b in found], kind="name"),
            Column("is", [b.value_type for b in found]),
            Column(
                "value",
                [None if q is None else q.value / q.unit.factor for q in quantities],
                each(numbers.significant),
                "number",
            ),
            Column(
                "unit",
                [format_unit(q.unit.text) if q is not None and q.unit.text else "" for q in quantities],
            ),
            Column("mean / value", [numbers.span(b.bias, 4) for b in found], kind="number"),
            Column("P(variable < value)", [_percent_span(b.fractile) for b in found], kind="number"),
            Column("how", [_how(q, b.period) for q, b in zip(quantities, found, strict=True)]),
        )
    )


def _how(quantity: Quantity | None, period: float | None) -> str:
    if quantity is None:
        return "differs between situations"
    how = quantity.characteristic.statement if quantity.characteristic is not None else "as typed"
    return how if period is None else f"{how}; P for {numbers.years(period)}"


def _percent_span(values: tuple[float, float]) -> str:
    low, high = (_percent(v) for v in values)
    return f"{low} %" if low == high else f"{low} … {high} %"


def _percent(value: float) -> str:
    """Return a probability in per cent with two figures of the smaller side, so that 99.5 is not 100."""
    if value <= 0.5 or not math.isfinite(value):
        return numbers.significant(100.0 * value, 2)
    rest = numbers.significant(100.0 * (1.0 - value), 2)
    decimals = len(rest.partition(".")[2])
    return numbers.fixed(100.0 * value, min(max(decimals, 0), 6))


def pedigree_table(result: Result) -> Table:
    """Return the share of the sum of alpha squared that rests on each grade of input."""
    found = result.pedigree
    return Table(
        (
            Column("grade of input", [p.grade for p in found]),
            Column("share of Σα²", [p.share for p in found], each(numbers.share, 0), "number"),
            Column("variables", [Html(", ".join(symbols.html(n) for n in p.variables)) for p in found]),
        )
    )
