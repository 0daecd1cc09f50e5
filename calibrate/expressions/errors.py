"""How an expression is refused: the reason, the column, and the text with a mark under the place."""

from __future__ import annotations

from collections.abc import Iterable

from calibrate.errors import InputError, Problem

_WINDOW = 72


class ExpressionError(InputError):
    """An expression is wrong; ``column`` (from 1, in the text as typed) says where."""

    def __init__(self, problems: Problem | str | Iterable[Problem], column: int = 1) -> None:
        super().__init__(problems)
        self.column = column


def refuse(
    message: str, text: str, start: int, end: int | None = None, suggestion: str | None = None
) -> ExpressionError:
    """Build the error for ``text[start:end]`` (positions from 0).

    The message carries the column and, on two lines of its own, the text with
    the offending part marked.  Line breaks and tabs have become spaces, other
    characters that cannot be printed become ``?``, so that columns agree.
    """
    shown = "".join(c if c.isprintable() else " " if c in "\n\r\t" else "?" for c in text)
    first = max(0, min(start - _WINDOW // 2, len(shown) - _WINDOW))
    excerpt = shown[first : first + _WINDOW]
    before, after = "… " if first else "", " …" if first + _WINDOW < len(shown) else ""
    width = max(1, min((end or start + 1), first + _WINDOW) - start)
    mark = " " * (len(before) + start - first) + "^" * width
    problem = Problem(
        f"{message} (column {start + 1}):\n    {before}{excerpt}{after}\n    {mark}", suggestion=suggestion
    )
    return ExpressionError(problem, start + 1)
