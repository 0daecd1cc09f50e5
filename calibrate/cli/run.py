"""``calibrate run``: the main job."""

from __future__ import annotations

import shlex
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from calibrate.cli import console
from calibrate.cli.options import Force, Json, Out, Outside, Quiet, Seed, StudyFile

if TYPE_CHECKING:
    from calibrate.study import Result

_SYSTEM = "system"
HELP = "Calibrate the factors of a study and write tables, figures and the report."


def run(
    study: StudyFile,
    out: Out = None,
    force: Force = False,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
    workers: Annotated[
        int, typer.Option("--workers", min=1, help="Threads; results do not depend on it.")
    ] = 1,
    allow_outside: Outside = False,
) -> None:
    """Read, compute, write, summarise."""
    with console.guarded():
        with console.progress(quiet or json) as show:
            from calibrate.report import replaceable, write_result
            from calibrate.report.folder import holds_result, input_files
            from calibrate.study import default_output, read_study
            from calibrate.study import run as run_study

            content = read_study(study, allow_outside=allow_outside)
            directory = out if out is not None else default_output(content)
            # Refuse before the work, not after it.
            replaceable(directory, force=force, recognise=holds_result, inputs=input_files(content))
            command = shlex.join(["calibrate", *sys.argv[1:]])
            result = run_study(content, workers=workers, seed=seed, command=command, progress=show)
            show("Writing the report", 0.97)
            write_result(result, directory, force=force)
        if json:
            console.data((directory / "result.json").read_text(encoding="utf-8"))
        elif not quiet:
            _summary(result, directory)
        code = _complaints(result)
    raise typer.Exit(code)


def _summary(result: Result, directory: Path) -> None:
    from calibrate.cli.app import CAUTION
    from calibrate.report import numbers, outcome, sites, systems, verification
    from calibrate.report.resistance_routes import routes_table

    study = result.study
    console.line(f"{study.title}  ({study.shown})")
    console.line(
        f"Target β = {numbers.significant(study.target_beta)} for {numbers.years(study.reference_period)}; "
        f"{numbers.count(len(result.situations), 'design situation')} of {numbers.count(len(study.rules), 'rule')}"
        f"{f' and {numbers.count(len(study.systems), _SYSTEM)}' if study.systems else ''}; "
        f"penalty {study.objective.penalty}."
    )
    console.heading("Factors")
    console.report_table(outcome.factor_table(result))
    console.heading("Reliability index β, weighted over the design situations")
    console.report_table(outcome.beta_table(result), strong=2)
    worst = result.calibration.proposed.worst
    if worst is not None:
        row = result.situations.iloc[worst]
        where = ", ".join(f"{name} = {text}" for name, text in outcome.place(result, worst))
        console.line(
            f"\nWorst situation with the proposed factors: {row['rule']}, {int(row['situation'])}"
            f"{f' ({where})' if where else ''}, β = {numbers.beta(row['beta_proposed'])}."
        )
    if sentence := verification.brief_sentence(result):
        console.line(sentence)
    for change in outcome.size_changes(result):
        console.line(
            f"Size {change.size} of {change.rule}, proposed over present: {numbers.change(change.mean)} on average, "
            f"{numbers.change(float(change.ratio.min()))} to {numbers.change(float(change.ratio.max()))}."
        )
    for name, tests in result.resistances.items():
        console.heading(f"Resistance from tests: {name}")
        console.report_table(routes_table(tests).without("what it allows for"))
    of_systems = systems.system_table(result)
    if of_systems is not None:
        console.heading("Systems, with proposed factors")
        console.report_table(of_systems)
    periods = outcome.period_table(result)
    if periods is not None:
        console.heading("The same with proposed factors for other periods")
        console.report_table(periods)
    by_site = sites.site_beta_table(result)
    if by_site is not None:
        console.heading("By class of site, with proposed factors")
        console.report_table(by_site)
    if result.doubts:
        console.heading(f"Doubts ({len(result.doubts)})")
        console.listed([(f"{d.code}, {d.where}", d.message) for d in result.doubts])
    console.line(f"\nReport: {_shown(directory / 'report.html')}\n")
    console.line(CAUTION)


def _shown(path: Path) -> str:
    """Return a path as it is shortest to read from here."""
    try:
        return str(path.relative_to(Path.cwd()))
    except ValueError:
        return str(path)


def _complaints(result: Result) -> int:
    """Name what has no β and what cannot be met; return the exit code."""
    frame = result.situations
    missing = frame[frame["beta_proposed"].isna()]
    for rule, number, status in zip(missing["rule"], missing["situation"], missing["status"], strict=True):
        console.warn(f"Rule {rule}, situation {number}: {status}")
    if len(missing):
        console.warn(f"{len(missing)} of {len(frame)} design situations have no β and were left out.")
    for sentence in result.constraint_failures:
        console.warn(sentence)
    return console.INCOMPLETE if len(missing) or result.constraint_failures else 0
