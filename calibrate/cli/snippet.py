"""``calibrate snippet``: pieces of study files for the usual actions."""

from __future__ import annotations

import json as json_module

import typer

from calibrate.cli import console
from calibrate.cli.options import Json

HELP = (
    "Print a piece of a study file for a usual action, to copy and to change. Without a name: list them. Their numbers "
    "are examples with their source beside them; nothing is ever taken from here by itself."
)


def snippet(
    name: str = typer.Argument("", help="Which piece.", show_default=False),
    json: Json = False,
) -> None:
    """List the pieces, or print one."""
    with console.guarded():
        from calibrate.study import snippets as library

        chosen = [library.snippet(name)] if name else list(library.snippets())
        if json:
            content = [{"name": s.name, "title": s.title, "needs": s.needs, "text": s.text} for s in chosen]
            console.data(json_module.dumps(content, indent=2, ensure_ascii=False))
        elif name:
            console.data(chosen[0].text)
        else:
            console.table(["name", "what"], [[s.name, s.title] for s in chosen], [False, False])
            console.line("\nPrint one with: calibrate snippet NAME. Its numbers are examples, not defaults.")
