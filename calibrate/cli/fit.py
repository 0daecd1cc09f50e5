"""``calibrate fit``: distributions for one column of records, ranked."""

from __future__ import annotations

import json as json_module
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from calibrate.cli import console
from calibrate.cli.options import Force, Json, Out, Quiet, Seed

if TYPE_CHECKING:
    from calibrate.fitting import Comparison
    from calibrate.records import Sample
    from calibrate.units import Unit

HELP = "Fit and rank distributions for one column of a CSV or XLSX file; writes files only with --out."


def fit(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="CSV or XLSX file.", show_default=False)],
    column: Annotated[str, typer.Option("--column", metavar="NAME", help="The column.", show_default=False)],
    unit: Annotated[str, typer.Option("--unit", metavar="U", help="Unit of the values, such as MPa.")] = "",
    family: Annotated[
        list[str] | None,
        typer.Option("--family", metavar="F", help="A candidate; may be repeated.", show_default=False),
    ] = None,
    method: Annotated[
        str, typer.Option("--method", help="Way of estimation: likelihood, moments, …")
    ] = "likelihood",
    sheet: Annotated[
        str | None, typer.Option("--sheet", help="Sheet of an XLSX file.", show_default=False)
    ] = None,
    out: Out = None,
    force: Force = False,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
) -> None:
    """Read, fit, print, and write if asked."""
    del seed  # nothing here is random; the option is common to all commands
    with console.guarded():
        from calibrate.fitting import compare
        from calibrate.records import read_column
        from calibrate.report import replaceable, write_files
        from calibrate.report.fit_files import fit_dict, fit_files, holds_fit

        if out is not None:
            replaceable(out, force=force, recognise=holds_fit, inputs=[file])
        sample = read_column(file, column, unit=_unit(unit), sheet=sheet)
        comparison = compare(sample.values, family or None, method=method)
        if out is not None:
            write_files(fit_files(sample, comparison), out, force=force, recognise=holds_fit, inputs=[file])
        if json:
            console.data(
                json_module.dumps(fit_dict(sample, comparison), indent=2, ensure_ascii=False, allow_nan=False)
            )
        elif not quiet:
            _print(sample, comparison, out)


def _unit(text: str) -> Unit:
    from calibrate.errors import InputError, Problem
    from calibrate.units import ONE, parse_unit

    try:
        return parse_unit(text) if text else ONE
    except InputError as error:
        raise InputError(Problem(p.message, "--unit", None, p.suggestion) for p in error.problems) from None


def _print(sample: Sample, comparison: Comparison, out: Path | None) -> None:
    from calibrate.cli.app import CAUTION
    from calibrate.report import numbers
    from calibrate.report.fit_files import candidate_table, recommendation, sample_sentence

    console.line(f"{sample.name}  ({sample.file})")
    console.line(sample_sentence(sample))
    console.heading("Candidates, by AICc")
    console.report_table(candidate_table(comparison), strong=0 if comparison.recommended else -1)
    console.line()
    console.line(recommendation(comparison))
    best = comparison.best
    if best is not None and best.doubts:
        console.heading(f"Doubts about {best.family} ({len(best.doubts)})")
        console.listed([(d.code, d.message) for d in best.doubts])
    if out is not None:
        console.line(f"\n{numbers.count(len(comparison.candidates), 'candidate')} written to {out}")
    console.line(f"\n{CAUTION}")
