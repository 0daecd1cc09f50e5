"""``calibrate index``: one design situation under the lens."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from calibrate.cli import console
from calibrate.cli.options import Force, Json, Out, Outside, Quiet, Seed, StudyFile

if TYPE_CHECKING:
    from calibrate.study.one_situation import OneSituation

HELP = (
    "One design situation under the lens: iteration, design points, second order, simulation, the index against "
    "anything, and the value that gives a target; writes files only with --out."
)


def index(
    study: StudyFile,
    rule: Annotated[
        str | None,
        typer.Option("--rule", metavar="R", help="The rule; may be left out of one.", show_default=False),
    ] = None,
    situation: Annotated[
        int | None,
        typer.Option("--situation", metavar="N", help="Its number, from 1.", show_default=False),
    ] = None,
    factor: Annotated[
        list[str] | None,
        typer.Option(
            "--factor", metavar="NAME=VALUE", help="Replaces a factor; may be repeated.", show_default=False
        ),
    ] = None,
    on: Annotated[
        str,
        typer.Option(
            "--on", metavar="SET", help="Factors: present, or optimal or proposed, calibrated first."
        ),
    ] = "present",
    leading: Annotated[
        str | None,
        typer.Option(
            "--leading",
            metavar="ACTION",
            help="Of combined actions; by default the worst.",
            show_default=False,
        ),
    ] = None,
    method: Annotated[str, typer.Option("--method", help="Of simulation, or none.")] = "importance sampling",
    cov: Annotated[
        float,
        typer.Option("--cov", metavar="X", help="Coefficient of variation of the simulated probability."),
    ] = 0.02,
    solver: Annotated[
        list[str] | None,
        typer.Option(
            "--solver",
            metavar="S",
            help="A further way to the design point; may be repeated.",
            show_default=False,
        ),
    ] = None,
    against: Annotated[
        str | None,
        typer.Option(
            "--against",
            metavar="NAME",
            help="Curve of the index against a factor, the size, a quantity, an axis, or VARIABLE.mean, .cov or .sd.",
            show_default=False,
        ),
    ] = None,
    low: Annotated[
        str | None,
        typer.Option("--from", metavar="A", help="Its first value, such as '100 mm^2'.", show_default=False),
    ] = None,
    high: Annotated[
        str | None, typer.Option("--to", metavar="B", help="Its last value.", show_default=False)
    ] = None,
    count: Annotated[int, typer.Option("--count", metavar="K", help="How many values.")] = 21,
    target: Annotated[
        float | None,
        typer.Option(
            "--target", metavar="BETA", help="Look for the value that gives this index.", show_default=False
        ),
    ] = None,
    vary: Annotated[
        str | None,
        typer.Option(
            "--vary",
            metavar="NAME",
            help="Of what; by default the size, or the only free factor.",
            show_default=False,
        ),
    ] = None,
    out: Out = None,
    force: Force = False,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
    allow_outside: Outside = False,
) -> None:
    """Read, look, print, and write if asked."""
    with console.guarded():
        with console.progress(quiet or json) as show:
            from calibrate.report import replaceable, write_files
            from calibrate.report.folder import input_files
            from calibrate.report.index_files import holds_index, index_files
            from calibrate.study import read_study
            from calibrate.study.index_question import Asked
            from calibrate.study.one_situation import one_situation

            asked = Asked(
                rule=rule,
                situation=situation,
                factors=_factors(factor or []),
                on=on,
                leading=leading,
                method=method,
                cov=cov,
                solvers=tuple(solver or ()),
                against=against,
                low=low,
                high=high,
                count=count,
                target=target,
                vary=vary,
            )
            content = read_study(study, allow_outside=allow_outside)
            inputs = input_files(content)
            if out is not None:
                # Refuse before the work, not after it.
                replaceable(out, force=force, recognise=holds_index, inputs=inputs)
            found = one_situation(content, asked, seed=seed, progress=show)
            if out is not None:
                show("Drawing figures", 0.95)
                write_files(index_files(found), out, force=force, recognise=holds_index, inputs=inputs)
        _show(found, out, json=json, quiet=quiet)
        code = _complaint(found)
    raise typer.Exit(code)


def _factors(texts: list[str]) -> dict[str, float]:
    from calibrate.errors import InputError, Problem

    found: dict[str, float] = {}
    for text in texts:
        name, mark, value = (part.strip() for part in text.partition("="))
        hint = "Write NAME=NUMBER, such as gamma_M=1.25."
        if not (name and mark and value):
            raise InputError(Problem(f"'{text}' is no NAME=VALUE.", "--factor", None, hint))
        if name in found:
            raise InputError(Problem(f"'{name}' is given twice.", "--factor"))
        try:
            found[name] = float(value)
        except ValueError:
            raise InputError(
                Problem(f"'{value}' of '{name}' is no number.", "--factor", None, hint)
            ) from None
    return found


def _show(found: OneSituation, out: Path | None, *, json: bool, quiet: bool) -> None:
    if json:
        from calibrate.study.index_export import index_json

        console.data(index_json(found))
    elif not quiet:
        from calibrate.cli.index_page import print_situation

        print_situation(found, out)


def _complaint(found: OneSituation) -> int:
    """Name the status where there is no index; return the exit code."""
    import math

    if math.isfinite(found.beta):
        return 0
    console.warn(f"Rule {found.rule.name}, situation {found.number} has no β: {found.status}.")
    return console.INCOMPLETE
