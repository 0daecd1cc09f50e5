"""The page of ``calibrate fit --out``: one sample on one HTML page."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from calibrate.report import density_figure, evidence, numbers, sample_figure, tail_figure
from calibrate.report.html import environment, inline_svg
from calibrate.report.probability_paper import CAPTION
from calibrate.report.table import Column, Table
from calibrate.units import format_unit

if TYPE_CHECKING:
    from calibrate.report.style import Rendered
    from calibrate.study.sample_fit import SampleFit


def fit_html(found: SampleFit, figures: Mapping[str, Rendered]) -> bytes:
    """Return the page with its figures, self-contained."""
    from calibrate.report.fit_files import candidate_table, sample_sentence

    sample = found.sample
    drawn = {name: inline_svg(f.svg, f"f{i}", name) for i, (name, f) in enumerate(figures.items(), 1)}
    content = {
        "n": numbers,
        "sample": sample,
        "unit": format_unit(sample.unit.text) if sample.unit.text else "",
        "sentence": sample_sentence(sample),
        "how_read": evidence.how_read({sample.name: sample}),
        "exclusions": evidence.exclusion_table({sample.name: sample}),
        "screening": evidence.screening_table({sample.name: found.screening}),
        "findings": evidence.findings({sample.name: found.screening}),
        "candidates": candidate_table(found.comparison),
        "tests": evidence.comparison_table(found.comparison, found.tests),
        "verdict": evidence.verdict(found.comparison, found.tests, None),
        "intervals": interval_table(found),
        "lots": None if found.lots is None else evidence.lot_table(found.lots),
        "lot_sentences": [] if found.lots is None else evidence.lot_sentences(found.lots, found.pooled, ""),
        "characteristic": found.characteristic,
        "modes": evidence.mode_table(found.modes) if found.modes else None,
        "by_profile": found.comparison.best is not None and found.comparison.best.method == "likelihood",
        "doubts": found.doubts,
        "figures": drawn,
        "papers": [name for name in drawn if name.startswith("probability_")],
        "captions": {
            "sample": sample_figure.CAPTION,
            "tail": tail_figure.CAPTION,
            "density": density_figure.CAPTION,
            "paper": CAPTION,
        },
    }
    return environment().get_template("fit.html.j2").render(content).encode("utf-8")


def interval_table(found: SampleFit) -> Table | None:
    """Return intervals of parameters and fractiles of the recommended family; None where there are none."""
    best = found.comparison.best
    if best is None or best.distribution is None or not found.intervals:
        return None
    rows = [(name, best.parameters[name], ends) for name, ends in found.intervals.items()]
    for p, ends in found.fractiles.items():
        rows.append((f"{100.0 * p:g} % fractile", float(best.distribution.ppf(p)), ends))
    return Table(
        (
            Column("parameter or fractile", [name for name, _, _ in rows]),
            Column("estimate", [numbers.significant(value, 5) for _, value, _ in rows], kind="number"),
            Column("from", [numbers.significant(ends[0], 5) for _, _, ends in rows], kind="number"),
            Column("to", [numbers.significant(ends[1], 5) for _, _, ends in rows], kind="number"),
        )
    )
