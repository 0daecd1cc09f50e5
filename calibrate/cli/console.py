"""The only place that prints: tables and results to standard output, progress and warnings to standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, TextIO

if TYPE_CHECKING:
    from rich.console import Console

    from calibrate.report.table import Table

PIPED_WIDTH = 118
WRONG_INPUT = 2
INCOMPLETE = 3
INTERRUPTED = 130


def _console(stream: TextIO) -> Console:
    from rich.console import Console

    terminal = stream.isatty()
    return Console(
        file=stream,
        markup=False,
        highlight=False,
        emoji=False,
        soft_wrap=False,
        width=None if terminal else PIPED_WIDTH,
        no_color=not terminal or "NO_COLOR" in os.environ,
        force_terminal=terminal,
    )


@contextmanager
def guarded() -> Iterator[None]:
    """Turn what may go wrong for a user into a message and an exit code, never a traceback."""
    import typer

    from calibrate.errors import InputError

    try:
        yield
        sys.stdout.flush()
    except InputError as error:
        for problem in error.problems:
            warn(str(problem))
        count = len(error.problems)
        if count > 1:
            warn(f"{count} problems; nothing was written.")
        raise typer.Exit(WRONG_INPUT) from None
    except KeyboardInterrupt:
        warn("Interrupted; nothing was written.")
        raise typer.Exit(INTERRUPTED) from None
    except BrokenPipeError:
        # The reader has gone; a second error on closing must not follow.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise typer.Exit(0) from None


def data(text: str) -> None:
    """Print a text as it is, for ``--json``."""
    sys.stdout.write(text if text.endswith("\n") else text + "\n")


def line(text: str = "") -> None:
    """Print a paragraph, wrapped to the width of the terminal."""
    import textwrap

    console = _console(sys.stdout)
    for paragraph in text.split("\n"):
        for wrapped in textwrap.wrap(paragraph, console.width) or [""]:
            console.print(wrapped, soft_wrap=True)


def heading(text: str) -> None:
    """Print the heading of a part."""
    console = _console(sys.stdout)
    console.print()
    console.print(text, style="bold")


def warn(text: str) -> None:
    """Print a message to standard error; long lines are left whole so that they can be searched."""
    _console(sys.stderr).print(text, soft_wrap=True)


def table(
    heads: Sequence[str], rows: Sequence[Sequence[str]], numeric: Sequence[bool], strong: int = -1
) -> None:
    """Print a table; ``strong`` is the row set off."""
    from rich.box import SIMPLE_HEAD
    from rich.table import Table as RichTable
    from rich.text import Text

    grid = RichTable(box=SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 2, 0, 0))
    for head, right in zip(heads, numeric, strict=True):
        grid.add_column(Text(head), justify="right" if right else "left", overflow="fold")
    for index, row in enumerate(rows):
        grid.add_row(*(Text(cell) for cell in row), style="bold" if index == strong else None)
    _console(sys.stdout).print(grid)


def report_table(content: Table, strong: int = -1) -> None:
    """Print a table of the report."""
    plain = [c.head for c in content.columns]
    heads = [f"{c.group}, {c.head}" if plain.count(c.head) > 1 else c.head for c in content.columns]
    numeric = [c.kind == "number" for c in content.columns]
    table(heads, content.plain_rows(), numeric, strong)


def listed(items: Sequence[tuple[str, str]]) -> None:
    """Print named paragraphs, indented below their names."""
    import textwrap

    console = _console(sys.stdout)
    for name, text in items:
        console.print(name, style="bold")
        for paragraph in text.splitlines():
            for wrapped in textwrap.wrap(paragraph, max(console.width - 2, 20), drop_whitespace=True) or [""]:
                console.print(f"  {wrapped}")


@contextmanager
def progress(quiet: bool) -> Iterator[Callable[[str, float], None]]:
    """Yield a function that shows progress on a terminal, and stays silent when piped or quiet."""
    if quiet or not sys.stderr.isatty():
        yield _ignore
        return
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns: tuple[Any, ...] = (
        TextColumn("{task.description}", markup=False),
        BarColumn(bar_width=30),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=_console(sys.stderr), transient=True) as bars:
        task = bars.add_task("Reading", total=1.0)
        yield lambda text, fraction: bars.update(task, description=text, completed=fraction)


def _ignore(text: str, fraction: float) -> None:
    del text, fraction
