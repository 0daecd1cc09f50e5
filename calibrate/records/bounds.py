"""Cells of specimens that are known by bounds, and the column that marks them."""

from __future__ import annotations

import math
import re
from typing import NamedTuple

from calibrate.records.cells import COMPLETE_ONLY, Refusal, as_text, shortened, to_number
from calibrate.records.grid import Cell, Oddity
from calibrate.records.notation import POINT, Notation


class Bounds(NamedTuple):
    """A specimen's value lies between the two; equal when it was observed."""

    lower: float
    upper: float


FORMS = "'>512' (had not failed at 512), '<512' (failed below) or '480..495' (failed between)"

_SURVIVOR = re.compile(r"([0-9.,]+)\s*\+")
_RANGE = re.compile(r"([0-9]+(?:[.,][0-9]+)?)\s*(?:-|–|—|…|\.{2,}|to)\s*([0-9]+(?:[.,][0-9]+)?)")

_RIGHT = ("yes", "true", "1", "right", "survived", "stopped")
_LEFT = ("left",)
_FAILED = ("no", "false", "0", "failed")
_ENTRIES = ", ".join(f"'{e}'" for e in (*_RIGHT, *_LEFT, *_FAILED)) + " or an empty cell"


def to_bounds(cell: Cell | Oddity, notation: Notation = POINT) -> Bounds | Refusal:
    """Return the bounds that a cell holds: a number, ``>512``, ``<512`` or ``480..495``.

    ``>=`` and ``≥`` mean the same as ``>``, as the value is continuous; so for ``<``.
    """
    if isinstance(cell, str):
        text = cell.strip()
        if not notation.number.fullmatch(text):
            special = _from_text(text, notation)
            if special is not None:
                return special
    number = to_number(cell, notation)
    return number if isinstance(number, Refusal) else Bounds(number, number)


def _from_text(text: str, notation: Notation) -> Bounds | Refusal | None:
    """Return None for what is neither a bound nor meant as one."""
    shown = f"'{shortened(text)}'"
    bound = notation.bound.fullmatch(text)
    if bound:
        value = notation.value(bound[2])
        if not math.isfinite(value):
            return Refusal(f"{shown} is too large to be a number.")
        return Bounds(value, math.inf) if bound[1][0] in ">≥" else Bounds(-math.inf, value)
    between = notation.interval.fullmatch(text)
    if between and "..." not in text:
        return _interval(shown, notation, between[1], between[2])
    survivor, dash = _SURVIVOR.fullmatch(text), _RANGE.fullmatch(text)
    if not survivor and not dash and text[:1] not in set("<>≤≥"):
        return None
    suggestion = f"Allowed are a number, {FORMS}."
    if survivor:
        suggestion = f"Write >{shortened(survivor[1])}. " + suggestion
    elif dash:
        suggestion = f"Write {shortened(dash[1])}..{shortened(dash[2])}. " + suggestion
    elif notation.with_unit.fullmatch(text.lstrip("<>≤≥= ")):
        suggestion = "State the unit once for the column. " + suggestion
    return Refusal(f"{shown} is neither a value nor a bound.", suggestion)


def _interval(shown: str, notation: Notation, first: str, second: str) -> Bounds | Refusal:
    lower, upper = notation.value(first), notation.value(second)
    if not math.isfinite(lower) or not math.isfinite(upper):
        return Refusal(f"{shown} is too large to be an interval.")
    if lower == upper:
        return Refusal(f"{shown} has no width.", f"Write {first} for a value that was observed.")
    if lower > upper:
        return Refusal(f"{shown} has its larger bound first.", f"Write {second}..{first}.")
    return Bounds(lower, upper)


def to_flag(cell: Cell | Oddity) -> str | Refusal:
    """Return the entry of a flag column: ``right``, ``left``, ``failed`` or empty."""
    text = as_text(cell)
    entry = text.casefold()
    for kind, entries in (("right", _RIGHT), ("left", _LEFT), ("failed", _FAILED)):
        if entry in entries:
            return kind
    if not entry:
        return ""
    suggestion = f"Allowed are {_ENTRIES}."
    if entry == "interval":
        suggestion = "An interval is written in the value's cell, such as 480..495. " + suggestion
    return Refusal(f"'{shortened(text)}' does not say whether the specimen is censored.", suggestion)


def with_flag(bounds: Bounds, flag: str, column: str) -> Bounds | Refusal:
    """Combine the value's cell with the flag column; a contradiction is refused.

    ``failed`` agrees with a value, an interval and a left bound: in all three
    the specimen did fail.
    """
    lower, upper = bounds
    if lower == upper:
        if flag == "right":
            return Bounds(lower, math.inf)
        return Bounds(-math.inf, upper) if flag == "left" else bounds
    if math.isinf(upper):
        kind, agrees = f">{lower:g}", flag in {"", "right"}
    elif math.isinf(lower):
        kind, agrees = f"<{upper:g}", flag in {"", "left", "failed"}
    else:
        kind, agrees = f"{lower:g}..{upper:g}", flag in {"", "failed"}
    if agrees:
        return bounds
    return Refusal(
        f"'{kind}' contradicts column '{shortened(column)}', which marks the specimen as '{flag}'.",
        "Correct the one or the other.",
    )


def complete_only(value: float, flag: str, column: str) -> float | Refusal:
    """Return the value of an observed specimen, and refuse one marked as censored."""
    if flag in {"", "failed"}:
        return value
    return Refusal(
        f"'{value:g}' is marked as censored in column '{shortened(column)}': it is a bound, not a value.",
        COMPLETE_ONLY,
    )
