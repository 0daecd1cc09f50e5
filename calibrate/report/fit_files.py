"""What ``calibrate fit`` shows and writes: the ranked candidates, as table, JSON, CSV and probability papers."""

from __future__ import annotations

import csv
import io
import json
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from calibrate.report import numbers, symbols
from calibrate.report.table import Column, Table, aligned, each
from calibrate.study.sample_fit import CONFIDENCE
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.fitting import Comparison, Fit
    from calibrate.records import Sample
    from calibrate.study.sample_fit import SampleFit

FORMAT = "calibrate-fit/1"
FIT_FILE = "fit.json"
CLOSE = 2.0
"""Difference of AICc below which two families are supported about equally (common practice, no source)."""


def candidate_table(comparison: Comparison) -> Table:
    """Return the families that were fitted to a sample, best first, failed ones with reason."""
    candidates = comparison.candidates
    best = min((c.aicc for c in candidates if math.isfinite(c.aicc)), default=math.nan)
    chosen = {i for i, c in enumerate(candidates) if c.family == comparison.recommended}
    return Table(
        (
            Column("family", [c.family for c in candidates]),
            Column("parameters ± standard error", [_estimates(c) for c in candidates]),
            Column("log-likelihood", [c.log_likelihood for c in candidates], aligned(5), "number"),
            Column("AICc", [c.aicc for c in candidates], each(numbers.fixed, 1), "number"),
            Column("ΔAICc", [c.aicc - best for c in candidates], each(numbers.fixed, 1), "number"),
            Column("A²", [c.anderson_darling for c in candidates], each(numbers.fixed, 3), "number"),
            Column("status", [c.status + (f": {c.reason}" if c.reason else "") for c in candidates]),
        ),
        strong=frozenset(chosen),
    )


def _estimates(fit: Fit) -> str:
    texts = []
    for name, value in fit.parameters.items():
        if name not in fit.free:
            error = " (fixed)"
        elif math.isfinite(fit.standard_errors[name]):
            error = f" ± {numbers.significant(fit.standard_errors[name], 2)}"
        else:
            error = ""
        texts.append(f"{name} = {numbers.significant(value, 5)}{error}")
    return ", ".join(texts)


def sample_sentence(sample: Sample) -> str:
    """Return count, mean, scatter and range of a sample in one line."""
    values = np.asarray(sample.values, dtype=np.float64)
    unit = f" {format_unit(sample.unit.text)}" if sample.unit.text else ""
    mean = float(values.mean())
    sd = float(values.std(ddof=1)) if values.size > 1 else math.nan
    cov = abs(sd / mean) if mean else math.nan
    return (
        f"n = {values.size}, mean {numbers.significant(mean, 5)}{unit}, sd {numbers.significant(sd, 4)}{unit}, "
        f"cov {numbers.significant(cov, 3)}, from {numbers.significant(float(values.min()), 5)} to "
        f"{numbers.significant(float(values.max()), 5)}{unit}.{_bounds(sample)}"
    )


def _bounds(sample: Sample) -> str:
    """Return how many specimens are known by bounds only."""
    seen = sample.observations
    parts = [
        f"{count} {what}"
        for count, what in (
            (int(seen.right.sum()), "survived"),
            (int(seen.left.sum()), "known from above"),
            (int(seen.interval.sum()), "known within an interval"),
        )
        if count
    ]
    return f" Of these {', '.join(parts)}; mean and sd take them at their bounds." if parts else ""


def recommendation(comparison: Comparison) -> str:
    """Return what the ranking says, and what it does not say."""
    best = comparison.best
    if best is None:
        return "None of the candidates could be fitted."
    text = f"Best supported by AICc: {best.family}."
    rivals = [
        c.family
        for c in comparison.candidates
        if c.converged and c is not best and c.aicc - best.aicc < CLOSE
    ]
    if rivals:
        text += f" Supported about as well (AICc within {CLOSE:g}): {', '.join(rivals)}."
    return (
        text + " A ranking rejects none of them and proves none right; look at the tail on probability paper."
    )


def fit_dict(found: SampleFit) -> dict[str, Any]:
    """Return the content of fit.json."""
    sample, comparison = found.sample, found.comparison
    content: dict[str, Any] = {
        "format": FORMAT,
        "column": sample.name,
        "unit": sample.unit.text,
        "file": sample.file,
        "sha256": sample.sha256,
        "n": sample.n,
        "n_exact": sample.observations.n_exact,
        "candidates": [_candidate(c) for c in comparison.candidates],
        "recommended": comparison.recommended,
        "tests_of_fit": {
            name: {
                "statistics": {k: _number(v) for k, v in t.statistics.items()},
                "p_values": {k: _number(v) for k, v in t.p_values.items()},
                "replicates": t.replicates,
            }
            for name, t in found.tests.items()
        },
        "intervals": {
            "confidence": CONFIDENCE,
            "parameters": {k: [_number(v) for v in ends] for k, ends in found.intervals.items()},
            "fractiles": {f"{p:g}": [_number(v) for v in ends] for p, ends in found.fractiles.items()},
        },
        "findings": [
            {"code": f.code, "level": f.level, "message": f.message} for f in found.screening.findings
        ],
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in found.doubts],
    }
    if found.modes:
        content["modes"] = [
            {
                "name": m.name,
                "failures": m.failures,
                "parameters": {} if m.fit is None else {k: _number(v) for k, v in m.fit.parameters.items()},
            }
            for m in found.modes
        ]
    if found.lots is not None:
        content["lots"] = {
            "scale": found.lots.scale,
            "between_sd": _number(found.lots.between_sd),
            "within_sd": _number(found.lots.within_sd),
            "effective_n": _number(found.lots.effective_n),
            "intraclass": _number(found.lots.intraclass),
        }
    if found.characteristic is not None:
        value = found.characteristic
        content["characteristic"] = {
            "value": _number(value.value),
            "route": value.route,
            "fractile": value.fractile,
            "confidence": value.confidence,
            "family": value.family,
            "factor": None if value.factor is None else _number(value.factor),
            "point_estimate": _number(value.point_estimate),
            "statement": value.statement,
        }
    return content


def _candidate(fit: Fit) -> dict[str, Any]:
    return {
        "family": fit.family,
        "method": fit.method,
        "parameters": {k: _number(v) for k, v in fit.parameters.items()},
        "standard_errors": {k: _number(v) for k, v in fit.standard_errors.items()},
        "fixed": [k for k in fit.parameters if k not in fit.free],
        "log_likelihood": _number(fit.log_likelihood),
        "aicc": _number(fit.aicc),
        "anderson_darling": _number(fit.anderson_darling),
        "status": fit.status,
        "reason": fit.reason,
        "doubts": [{"code": d.code, "message": d.message, "where": d.where} for d in fit.doubts],
    }


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def fit_files(found: SampleFit) -> dict[str, bytes]:
    """Return fit.json, candidates.csv, fit.html, and the figures of the sample and of each converged candidate."""
    from calibrate.report import style
    from calibrate.report.density_figure import density_figure
    from calibrate.report.fit_page import fit_html
    from calibrate.report.probability_paper import probability_figure
    from calibrate.report.sample_figure import sample_figure
    from calibrate.report.tail_figure import tail_figure

    sample, comparison = found.sample, found.comparison
    unit = format_unit(sample.unit.text) if sample.unit.text else ""
    label = symbols.drawn(sample.name) if sample.name.isidentifier() else symbols.literal(sample.name)
    converged = [c for c in comparison.candidates if c.converged]
    near = [c for c in converged if c.family in found.tests] or converged[:3]
    drawn: dict[str, style.Rendered] = {}
    with style.context():
        drawn["sample"] = style.render(sample_figure(sample, found.screening, label=label, unit=unit))
        for fit in converged:
            figure = probability_figure(fit, label=label, unit=unit)
            drawn[f"probability_{fit.family}"] = style.render(figure)
        if near:
            drawn["density"] = style.render(density_figure(near, label=label, unit=unit))
            for side in ("lower", "upper"):
                figure = tail_figure(near, lower=side == "lower", label=label, unit=unit)
                drawn[f"tail_{side}"] = style.render(figure)
    content = json.dumps(fit_dict(found), indent=2, ensure_ascii=False, allow_nan=False)
    files = {
        FIT_FILE: f"{content}\n".encode(),
        "candidates.csv": _csv(comparison),
        "fit.html": fit_html(found, drawn),
    }
    for name, figure_files in drawn.items():
        files[f"figures/{name}.svg"] = figure_files.svg
        files[f"figures/{name}.png"] = figure_files.png
    return files


def _csv(comparison: Comparison) -> bytes:
    """Return one row per candidate and parameter; figures of the fit are repeated."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(
        ["family", "parameter", "estimate", "standard_error", "log_likelihood", "aicc", "anderson_darling", "status",
         "reason"]
    )  # fmt: skip
    for fit in comparison.candidates:
        figures = [
            _cell(fit.log_likelihood),
            _cell(fit.aicc),
            _cell(fit.anderson_darling),
            fit.status,
            fit.reason,
        ]
        for name, value in fit.parameters.items():
            writer.writerow([fit.family, name, _cell(value), _cell(fit.standard_errors[name]), *figures])
        if not fit.parameters:
            writer.writerow([fit.family, "", "", "", *figures])
    return stream.getvalue().encode("utf-8")


def _cell(value: float) -> str:
    return repr(float(value)) if math.isfinite(value) else ""


def holds_fit(directory: Path) -> bool:
    """Whether a folder holds what ``calibrate fit`` wrote."""
    try:
        content = json.loads((directory / FIT_FILE).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return False
    return isinstance(content, dict) and content.get("format") == FORMAT
