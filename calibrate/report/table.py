"""Tables at full precision, which know how each of their columns is to be written."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Any, Literal

from numpy.typing import NDArray

from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html

Values = Sequence[Any] | NDArray[Any]
Show = Callable[[Values], Sequence[str]]
Kind = Literal["text", "number", "name"]
LONGEST_LINE = 28
"""Characters of text that stay on one line; a column with a longer cell is wrapped."""
SHORT = 12
"""Rows of a table that stay on one page; half as many where cells have several lines."""
_MARKUP = re.compile(r"<[^>]*>")


def as_text(values: Values) -> list[str]:
    """Write values as they are; what does not exist as a dash."""
    return [numbers.NONE if v is None or v == "" else v if isinstance(v, str) else str(v) for v in values]


def as_given(values: Values) -> list[str]:
    """Write texts as they are, empty ones as empty cells."""
    return list(values)


def each(function: Callable[..., str], *arguments: Any) -> Show:
    """Return the way to write a column whose values are written one by one."""

    def show(values: Values) -> list[str]:
        return [function(v, *arguments) for v in values]

    return show


def aligned(digits: int = 4) -> Show:
    """Return the way to write numbers with a common count of decimals."""

    def show(values: Values) -> list[str]:
        return numbers.column(values, digits)

    return show


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table.

    Parameters
    ----------
    head : str
        Heading, plain text; the name of a quantity where ``kind`` of the head
        is a name (``symbol`` true).
    values : sequence
        At full precision.
    show : callable
        From all values to their texts, by :mod:`calibrate.report.numbers`.
    kind : {"text", "number", "name"}
        How it is set: words, figures aligned right, names of a study.
    unit : str
        Shown below the heading.
    symbol : bool
        Whether the heading is a name of the study, to be typeset.
    group : str
        Columns of one group are shown or hidden together.
    """

    head: str
    values: Values
    show: Show = as_text
    kind: Kind = "text"
    unit: str = ""
    symbol: bool = False
    group: str = ""

    @property
    def title(self) -> str:
        """Heading as HTML or plain text."""
        return symbols.html(self.head) if self.symbol else self.head

    def texts(self) -> list[str]:
        """Return what the reader sees; names as HTML."""
        if self.kind == "name":
            return [symbols.html(str(v)) if v else numbers.NONE for v in self.values]
        return [symbols.kept(t) for t in self.show(self.values)]

    @property
    def wraps(self) -> bool:
        """Whether the cells hold running text, which is set on several lines."""
        if self.kind != "text":
            return False
        return any(len(_MARKUP.sub("", t)) > LONGEST_LINE for t in self.show(self.values))

    def plain(self) -> list[str]:
        """Return what the reader sees on a console; names as typed."""
        return as_text(self.values) if self.kind == "name" else list(self.show(self.values))


@dataclass(frozen=True, slots=True)
class Table:
    """Columns of equal length; ``strong`` are the rows to be set off."""

    columns: tuple[Column, ...]
    strong: frozenset[int] = frozenset()

    def __len__(self) -> int:
        return len(self.columns[0].values) if self.columns else 0

    @property
    def short(self) -> bool:
        """Whether the table need not be split between two pages."""
        return len(self) <= (SHORT // 2 if any(c.wraps for c in self.columns) else SHORT)

    def rows(self) -> list[tuple[str, ...]]:
        """Return the rows as the reader sees them."""
        return list(zip(*(c.texts() for c in self.columns), strict=True))

    def plain_rows(self) -> list[tuple[str, ...]]:
        """Return the rows as text for a console."""
        return list(zip(*(c.plain() for c in self.columns), strict=True))

    def runs(self) -> list[tuple[str, int]]:
        """Return the groups of neighbouring columns with their widths; no group is an empty text."""
        return [(group, len(list(run))) for group, run in groupby(c.group for c in self.columns)]

    def cell_classes(self, groups: Mapping[str, str]) -> list[Html]:
        """Return the class attribute of the cells of each column."""
        found = []
        for c in self.columns:
            names = [
                *(["n"] if c.kind == "number" else ["w"] if c.wraps else []),
                *([groups[c.group]] if c.group in groups else []),
            ]
            found.append(Html(f' class="{" ".join(names)}"' if names else ""))
        return found

    def without(self, *heads: str) -> Table:
        """Return the table without some columns."""
        return Table(tuple(c for c in self.columns if c.head not in heads), self.strong)

    def column(self, head: str) -> Column:
        """Return a column by its heading."""
        return next(c for c in self.columns if c.head == head)
