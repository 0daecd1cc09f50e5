"""``calibrate fit``: distributions for one column of records, ranked."""

from __future__ import annotations

import json as json_module
import math
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from calibrate.cli import console
from calibrate.cli.options import Force, Json, Out, Quiet, Seed

if TYPE_CHECKING:
    from calibrate.records import ReadOptions
    from calibrate.study.sample_fit import Asked, SampleFit
    from calibrate.units import Unit

HELP = "Screen one column of a file, fit and rank distributions; writes files only with --out."


def fit(
    file: Annotated[
        Path, typer.Argument(metavar="FILE", help="CSV, XLSX or Parquet file.", show_default=False)
    ],
    column: Annotated[str, typer.Option("--column", metavar="NAME", help="The column.", show_default=False)],
    unit: Annotated[str, typer.Option("--unit", metavar="U", help="Unit of the values, such as MPa.")] = "",
    family: Annotated[
        list[str] | None,
        typer.Option("--family", metavar="F", help="A candidate; may be repeated.", show_default=False),
    ] = None,
    method: Annotated[
        str, typer.Option("--method", help="Way of estimation: likelihood, moments, …")
    ] = "likelihood",
    option: Annotated[
        list[str] | None,
        typer.Option(
            "--option",
            metavar="NAME=X",
            help="What the method takes, such as fraction=0.3.",
            show_default=False,
        ),
    ] = None,
    sheet: Annotated[
        str | None, typer.Option("--sheet", help="Sheet of an XLSX file.", show_default=False)
    ] = None,
    censored: Annotated[
        str | None,
        typer.Option("--censored", metavar="NAME", help="Column that flags survivors.", show_default=False),
    ] = None,
    lot: Annotated[
        str | None, typer.Option("--lot", metavar="NAME", help="Column of lots.", show_default=False)
    ] = None,
    mode: Annotated[
        str | None,
        typer.Option("--mode", metavar="NAME", help="Column of failure modes.", show_default=False),
    ] = None,
    order: Annotated[
        str | None,
        typer.Option("--order", metavar="NAME", help="Column of the order of testing.", show_default=False),
    ] = None,
    above: Annotated[
        float | None,
        typer.Option("--above", help="Only larger values could enter the sample.", show_default=False),
    ] = None,
    below: Annotated[
        float | None,
        typer.Option("--below", help="Only smaller values could enter the sample.", show_default=False),
    ] = None,
    fractile: Annotated[
        float | None,
        typer.Option("--fractile", help="Characteristic value at this fractile.", show_default=False),
    ] = None,
    confidence: Annotated[
        float | None, typer.Option("--confidence", help="Its confidence, such as 0.75.", show_default=False)
    ] = None,
    out: Out = None,
    force: Force = False,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
) -> None:
    """Read, screen, fit, print, and write if asked."""
    with console.guarded():
        from calibrate.records import read_column
        from calibrate.report import replaceable, write_files
        from calibrate.report.fit_files import fit_dict, fit_files, holds_fit
        from calibrate.study.sample_fit import fit_sample

        if out is not None:
            replaceable(out, force=force, recognise=holds_fit, inputs=[file])
        reading = _reading(censored, lot, mode, order, above, below)
        sample = read_column(file, column, unit=_unit(unit), sheet=sheet, options=reading)
        found = fit_sample(
            sample,
            family or None,
            method=method,
            options=_options(option or []),
            asked=_asked(fractile, confidence),
            seed=seed or 0,
        )
        if out is not None:
            write_files(fit_files(found), out, force=force, recognise=holds_fit, inputs=[file])
        if json:
            console.data(json_module.dumps(fit_dict(found), indent=2, ensure_ascii=False, allow_nan=False))
        elif not quiet:
            _print(found, out)


def _unit(text: str) -> Unit:
    from calibrate.errors import InputError, Problem
    from calibrate.units import ONE, parse_unit

    try:
        return parse_unit(text) if text else ONE
    except InputError as error:
        raise InputError(Problem(p.message, "--unit", None, p.suggestion) for p in error.problems) from None


def _reading(
    censored: str | None,
    lot: str | None,
    mode: str | None,
    order: str | None,
    above: float | None,
    below: float | None,
) -> ReadOptions:
    from calibrate.records import ReadOptions

    return ReadOptions(
        censoring=True,
        censored=censored,
        lot=lot,
        mode=mode,
        order=order,
        above=-math.inf if above is None else above,
        below=math.inf if below is None else below,
    )


def _options(texts: list[str]) -> dict[str, float]:
    from calibrate.errors import InputError, Problem

    found = {}
    for text in texts:
        name, _, value = text.partition("=")
        try:
            found[name.strip()] = float(value)
        except ValueError:
            hint = "Write NAME=NUMBER, such as fraction=0.3."
            raise InputError(Problem(f"'{text}' is no option of a method.", "--option", None, hint)) from None
    return found


def _asked(fractile: float | None, confidence: float | None) -> Asked | None:
    from calibrate.errors import InputError
    from calibrate.study.sample_fit import Asked

    if fractile is None:
        if confidence is not None:
            raise InputError("--confidence belongs to a characteristic value; add --fractile, such as 0.05.")
        return None
    return Asked(fractile, confidence)


def _print(found: SampleFit, out: Path | None) -> None:
    from calibrate.cli.app import CAUTION
    from calibrate.report import evidence, numbers
    from calibrate.report.fit_files import candidate_table, recommendation, sample_sentence
    from calibrate.report.fit_page import interval_table

    sample, comparison = found.sample, found.comparison
    console.line(f"{sample.name}  ({sample.file})")
    console.line(sample_sentence(sample))
    console.heading("Candidates, by AICc")
    console.report_table(candidate_table(comparison), strong=0 if comparison.recommended else -1)
    tests = evidence.comparison_table(comparison, found.tests)
    if tests is not None:
        console.heading("Criteria, and p-values by parametric bootstrap")
        console.report_table(tests)
    console.line()
    console.line(recommendation(comparison))
    console.line(evidence.verdict(comparison, found.tests, None))
    intervals = interval_table(found)
    if intervals is not None and comparison.best is not None:
        console.heading(f"95 % intervals of {comparison.best.family}")
        console.report_table(intervals)
    if found.modes:
        console.heading("Failure modes as competing risks")
        console.report_table(evidence.mode_table(found.modes))
    if found.lots is not None:
        console.heading("Lots")
        console.report_table(evidence.lot_table(found.lots))
        for text in evidence.lot_sentences(found.lots, found.pooled, ""):
            console.line(text)
    if found.characteristic is not None:
        unit = f" {sample.unit.text}" if sample.unit.text else ""
        console.heading("Characteristic value")
        console.line(
            f"{numbers.significant(found.characteristic.value, 5)}{unit}: {found.characteristic.statement}."
        )
    notes = [(f.code, f.message) for f in found.screening.findings if f.level != "doubt"]
    if notes:
        console.heading(f"Notes of screening ({len(notes)})")
        console.listed(notes)
    best = comparison.best
    doubts = [*found.doubts, *(best.doubts if best is not None else ())]
    if doubts:
        console.heading(f"Doubts ({len(doubts)})")
        console.listed([(d.code, d.message) for d in doubts])
    if out is not None:
        console.line(f"\n{numbers.count(len(comparison.candidates), 'candidate')} written to {out}")
    console.line(f"\n{CAUTION}")
