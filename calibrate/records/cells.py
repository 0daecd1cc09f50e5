"""From a cell to a number, or to a reason why it is none: nothing is read by guess."""

from __future__ import annotations

import math
import re

from calibrate.records.grid import Cell, Oddity, is_empty

# Python's float() also takes underscores, 'nan', 'infinity' and digits of other scripts.
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_DECIMAL_COMMA = re.compile(r"[+-]?[0-9]+,[0-9]+(?:[eE][+-]?[0-9]+)?")
_GROUPED = re.compile(r"[+-]?[0-9]{1,3}(?:[,'\u2019 \u00a0\u202f][0-9]{3})+(?:\.[0-9]*)?")
_WITH_UNIT = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*([A-Za-z%°µ].*)")
_BOUND = re.compile(r"[<>≤≥]\s*[0-9.]+.*|[0-9.]+\s*\+")
_NOT_FINITE = frozenset({"nan", "inf", "infinity"})
_MISSING = frozenset({"na", "n/a", "#n/a", "-", "--", "–", "—", "null", "none", ".", "?", "missing"})

Refusal = tuple[str, str | None]
"""What is wrong with a cell, to be put behind the name of its column, and what to try."""


def to_number(cell: Cell | Oddity) -> float | Refusal:
    """Return the finite number that a cell holds, or why it holds none."""
    if is_empty(cell):
        return "the cell is empty.", "Fill it, or delete the row if there is no value."
    if isinstance(cell, Oddity):
        return f"'{cell.text}' is {cell.reason}.", cell.suggestion
    if isinstance(cell, bool):
        return f"'{str(cell).upper()}' is a truth value, not a number.", None
    if isinstance(cell, str):
        return _from_text(cell.strip())
    assert cell is not None
    value = float(cell)
    if not math.isfinite(value):
        return f"'{cell}' is not a finite number.", None
    return value


def _from_text(text: str) -> float | Refusal:
    if _NUMBER.fullmatch(text):
        value = float(text)
        if not math.isfinite(value):
            return f"'{shortened(text)}' is too large to be a number.", None
        return value
    return _reason(text)


def _reason(text: str) -> Refusal:
    """Recognise the usual slips: the better the message, the sooner the file is right."""
    shown = f"'{shortened(text)}'"
    plain = text.lstrip("+-").casefold()
    if plain in _NOT_FINITE:
        return f"{shown} is not a finite number.", "Delete the row if there is no value."
    if text.casefold() in _MISSING:
        return f"{shown} marks a missing value.", "Delete the row if there is no value."
    if _GROUPED.fullmatch(text) and not _DECIMAL_COMMA.fullmatch(text):
        digits = re.sub(r"[^0-9.+-]", "", text)
        return f"{shown} has separators between thousands.", f"Write {digits}."
    if _DECIMAL_COMMA.fullmatch(text):
        return f"{shown} has a decimal comma.", f"Write {text.replace(',', '.')}."
    if "\u2212" in text and _NUMBER.fullmatch(text.replace("\u2212", "-")):
        fixed = text.replace("\u2212", "-")
        return f"{shown} begins with a typographic minus sign, not a hyphen.", f"Write {fixed}."
    if _BOUND.fullmatch(text):
        return (
            f"{shown} is a bound, not a value.",
            "Only complete samples can be read: a value for each specimen, none of them censored.",
        )
    unit = _WITH_UNIT.fullmatch(text)
    if unit:
        return (
            f"{shown} holds more than a number.",
            f"If '{shortened(unit[2])}' is the unit, write {unit[1]} and state the unit once for the column.",
        )
    return f"{shown} is not a number.", None


def shortened(text: str, most: int = 40) -> str:
    """Return a text cut to a length that fits into a message, with control characters made visible."""
    shown = "".join(c if c.isprintable() else "\ufffd" for c in text)
    return shown if len(shown) <= most else shown[: most - 1] + "…"
