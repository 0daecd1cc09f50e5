"""Arguments and options that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

StudyFile = Annotated[
    Path, typer.Argument(metavar="STUDY", help="The study file (TOML).", show_default=False)
]
Json = Annotated[bool, typer.Option("--json", help="Print JSON and nothing else on standard output.")]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="No progress and no summary.")]
Seed = Annotated[int | None, typer.Option("--seed", min=0, help="Replaces the seed.", show_default=False)]
Outside = Annotated[
    bool, typer.Option("--allow-outside", help="Let the study name files outside its project folder.")
]
Out = Annotated[
    Path | None, typer.Option("--out", metavar="DIR", help="Folder for the results.", show_default=False)
]
Force = Annotated[bool, typer.Option("--force", help="Replace the folder whatever it holds.")]
