"""From a cell to a number, or to a reason why it is none: nothing is read by guess."""

from __future__ import annotations

import math
import re
from typing import NamedTuple

from calibrate.records.grid import Cell, Oddity, is_empty
from calibrate.records.notation import POINT, Notation

_NOT_FINITE = frozenset({"nan", "inf", "infinity"})
_MISSING = frozenset({"na", "n/a", "#n/a", "-", "--", "–", "—", "null", "none", ".", "?", "missing"})

COMPLETE_ONLY = (
    "Only complete samples can be used as asked; "
    "bounds need a method that honours censoring, such as likelihood."
)

_LONGEST_SLIP = 200
"""Characters; what is longer is a text, and looking for slips in it would take long."""


class Refusal(NamedTuple):
    """What is wrong with a cell, to be put behind the name of its column, and what to try."""

    message: str
    suggestion: str | None = None


_LIKE_BOUND = re.compile(r"[<>≤≥]=?\s*[0-9.,].*|[0-9.,]+\s*\+")


def to_number(cell: Cell | Oddity, notation: Notation = POINT) -> float | Refusal:
    """Return the finite number that a cell holds, or why it holds none."""
    if is_empty(cell):
        return Refusal("the cell is empty.", "Fill it, or delete the row if there is no value.")
    if isinstance(cell, Oddity):
        return Refusal(f"'{cell.text}' is {cell.reason}.", cell.suggestion)
    if isinstance(cell, bool):
        return Refusal(f"'{str(cell).upper()}' is a truth value, not a number.")
    if isinstance(cell, str):
        return _from_text(cell.strip(), notation)
    assert cell is not None
    value = float(cell)
    if not math.isfinite(value):
        return Refusal(f"'{cell}' is not a finite number.")
    return value


def _from_text(text: str, notation: Notation) -> float | Refusal:
    if notation.number.fullmatch(text):
        value = notation.value(text)
        if not math.isfinite(value):
            return Refusal(f"'{shortened(text)}' is too large to be a number.")
        return value
    return _reason(text, notation)


def _reason(text: str, notation: Notation) -> Refusal:
    """Recognise the usual slips: the better the message, the sooner the file is right."""
    shown = f"'{shortened(text)}'"
    if len(text) > _LONGEST_SLIP:
        return Refusal(f"{shown} is not a number.")
    plain = text.lstrip("+-").casefold()
    if plain in _NOT_FINITE:
        return Refusal(f"{shown} is not a finite number.", "Delete the row if there is no value.")
    if text.casefold() in _MISSING:
        return Refusal(f"{shown} marks a missing value.", "Delete the row if there is no value.")
    mark_slip = _mark_slip(text, shown, notation)
    if mark_slip is not None:
        return mark_slip
    hyphenated = text.replace("\u2212", "-")
    if hyphenated != text and notation.number.fullmatch(hyphenated):
        return Refusal(f"{shown} begins with a typographic minus sign, not a hyphen.", f"Write {hyphenated}.")
    if _LIKE_BOUND.fullmatch(text):
        return Refusal(f"{shown} is a bound, not a value.", COMPLETE_ONLY)
    if notation.interval.fullmatch(text):
        return Refusal(f"{shown} is an interval, not a value.", COMPLETE_ONLY)
    unit = notation.with_unit.fullmatch(text)
    if unit:
        return Refusal(
            f"{shown} holds more than a number.",
            f"If '{shortened(unit[2])}' is the unit, write {unit[1]} and state the unit once for the column.",
        )
    return Refusal(f"{shown} is not a number.")


def _mark_slip(text: str, shown: str, notation: Notation) -> Refusal | None:
    """Recognise the decimal mark of another country, and separators between thousands."""
    foreign, grouped = notation.foreign.fullmatch(text), notation.grouped.fullmatch(text)
    digits = shortened(re.sub(rf"[^0-9{re.escape(notation.mark)}+-]", "", text))
    if grouped and not foreign:
        return Refusal(f"{shown} has separators between thousands.", f"Write {digits}.")
    if not foreign:
        return None
    fixed = shortened(text.translate(str.maketrans(".,", ",.")))
    if grouped:
        what = "a comma" if notation is POINT else "a point"
        return Refusal(
            f"{shown} has {what}, which may stand for decimals or between thousands.",
            f"Write {fixed} or {digits}.",
        )
    if notation is POINT:
        return Refusal(f"{shown} has a decimal comma.", f"Write {fixed}.")
    return Refusal(f"{shown} has a decimal point in a file with decimal commas.", f"Write {fixed}.")


def as_text(cell: Cell | Oddity) -> str:
    """Return a cell as a label: without blanks around it, whole numbers without decimals."""
    if isinstance(cell, Oddity):
        return cell.text
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return "" if cell is None else str(cell).strip()


def shortened(text: str, most: int = 40) -> str:
    """Return a text cut to a length that fits into a message, with control characters made visible."""
    shown = "".join(c if c.isprintable() else "\ufffd" for c in text[: most + 1])
    return shown if len(shown) <= most else shown[: most - 1] + "…"
