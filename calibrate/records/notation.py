"""How a file writes its numbers: with decimal points, or with decimal commas."""

from __future__ import annotations

import re
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Notation:
    """How a file writes decimals; ``mark`` is a point or a comma.

    The patterns match whole cells; Python's float() would also take
    underscores, 'nan', 'infinity' and digits of other scripts.
    """

    mark: str
    number: re.Pattern[str]
    foreign: re.Pattern[str]
    grouped: re.Pattern[str]
    with_unit: re.Pattern[str]
    bound: re.Pattern[str]
    interval: re.Pattern[str]

    def value(self, digits: str) -> float:
        """Return the number that a text matched by ``number`` holds; it may be infinite."""
        return float(digits.replace(",", "."))


def _notation(mark: str) -> Notation:
    other = "," if mark == "." else "."
    m, o = re.escape(mark), re.escape(other)
    exponent = "(?:[eE][+-]?[0-9]+)?"
    number = rf"[+-]?(?:[0-9]+{m}?[0-9]*|{m}[0-9]+){exponent}"
    return Notation(
        mark,
        re.compile(number),
        re.compile(rf"[+-]?[0-9]+{o}[0-9]+{exponent}"),
        re.compile(rf"[+-]?[0-9]{{1,3}}(?:[{o}'\u2019 \u00a0\u202f][0-9]{{3}})+(?:{m}[0-9]*)?"),
        re.compile(rf"({number})\s*([A-Za-z%°µ].*)"),
        re.compile(rf"(>=?|<=?|≥|≤)\s*({number})"),
        re.compile(rf"({number})\s*\.\.\s*({number})"),
    )


POINT = _notation(".")
COMMA = _notation(",")
