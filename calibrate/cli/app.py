"""The application: its commands and their common ways."""

from __future__ import annotations

import typer

from calibrate import __version__
from calibrate.cli import check, fit, index, resistance, run, selfcheck, snippet

CAUTION = (
    "Results depend on the data and models given. Target reliabilities and factors are for competent engineers and "
    "the responsible authority to set; local codes and licensed practice prevail."
)

app = typer.Typer(
    name="calibrate",
    help="Calibrate partial factors, or resistance and load factors, from test and load records to a target "
    "reliability.",
    epilog=CAUTION,
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
app.command("run", help=run.HELP, short_help="Calibrate a study; write tables and report.")(run.run)
app.command("check", help=check.HELP, short_help="Print what a study says; compute nothing.")(check.check)
app.command("snippet", help=snippet.HELP, short_help="Print pieces of study files for usual actions.")(
    snippet.snippet
)
app.command("fit", help=fit.HELP, short_help="Fit and rank distributions for one column.")(fit.fit)
app.command("index", help=index.HELP, short_help="Look closely at one design situation.")(index.index)
app.command("resistance", help=resistance.HELP, short_help="Evaluate component tests against prediction.")(
    resistance.resistance
)

app.command("selfcheck", help=selfcheck.HELP, short_help="Solve problems with known answers; compare.")(
    selfcheck.selfcheck
)


def _show_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"calibrate {__version__}")
        raise typer.Exit


@app.callback()
def _common(
    version: bool = typer.Option(
        False, "--version", callback=_show_version, is_eager=True, help="Print the version and end."
    ),
) -> None:
    del version


def main() -> None:
    """Run the command line."""
    app()
