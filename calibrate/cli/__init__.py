"""The command line: one thin file per command, which reads options, calls the layers below and prints.

Modules here import typer and the standard library only; what computes is imported when a command runs, so that help
and shell completion answer at once.
"""

from calibrate.cli.app import main

__all__ = ["main"]
