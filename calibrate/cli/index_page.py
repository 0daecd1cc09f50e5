"""What ``calibrate index`` prints."""

from __future__ import annotations

import math
from pathlib import Path
from typing import TYPE_CHECKING

from calibrate.cli import console

if TYPE_CHECKING:
    from calibrate.study.one_situation import Analysis, OneSituation


def print_situation(found: OneSituation, out: Path | None) -> None:
    """Print everything that was found."""
    from calibrate.cli.app import CAUTION
    from calibrate.report import index_tables as tables

    console.line(f"{found.study.title}  ({found.study.shown})")
    for text in tables.head_lines(found):
        console.line(text)
    console.heading("Basic variables")
    console.report_table(tables.variable_table(found))
    if found.analysis is not None:
        _print_methods(found, found.analysis)
    if found.curve is not None:
        console.heading(f"β against {found.curve.varied.name}")
        if found.curve.varied.note:
            console.line(found.curve.varied.note)
        console.report_table(tables.curve_table(found, found.curve))
    if found.required is not None:
        console.heading("Inverse question")
        for text in tables.required_lines(found, found.required):
            console.line(text)
    if out is not None:
        console.line(f"\nWritten to {out}")
    console.line(f"\n{CAUTION}")


def _print_methods(found: OneSituation, analysis: Analysis) -> None:
    from calibrate.report import index_tables as tables

    console.heading("Iteration")
    for letter in ("u", "x"):
        console.report_table(tables.trace_table(found, analysis, letter))
    if math.isfinite(found.beta):
        console.heading("Design point")
        console.report_table(tables.point_table(found, analysis))
        if found.dependent:
            console.line(tables.ALPHA_NOTE)
    console.heading("Reliability index")
    console.report_table(tables.method_table(found, analysis), strong=0)
    for text in (tables.curvature_sentence(analysis), tables.further_sentence(analysis)):
        if text:
            console.line(text)
    further = tables.further_table(found, analysis)
    if further is not None:
        console.report_table(further)
