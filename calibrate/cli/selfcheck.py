"""``calibrate selfcheck``: whether the installed tool still gives known answers."""

from __future__ import annotations

import json as json_module

import typer

from calibrate.cli import console
from calibrate.cli.options import Json

HELP = (
    "Solve problems with known answers (closed forms, quadratures, published examples) and compare. Ends with 3 where "
    "a check fails."
)


def selfcheck(json: Json = False) -> None:
    """Make every check, print, and name those that failed."""
    with console.guarded():
        from calibrate.report import numbers
        from calibrate.report.ladder_table import complaint, ladder_table
        from calibrate.study.ladder import ladder_content, run_ladder

        rows = run_ladder()
        failed = [row for row in rows if not row.passed]
        if json:
            content = ladder_content(rows)
            console.data(json_module.dumps(content, indent=2, ensure_ascii=False, allow_nan=False))
        else:
            console.report_table(ladder_table(rows))
            console.line(f"\n{len(rows) - len(failed)} of {numbers.count(len(rows), 'check')} passed.")
        for row in failed:
            console.warn(complaint(row))
        if failed:
            raise typer.Exit(console.INCOMPLETE)
