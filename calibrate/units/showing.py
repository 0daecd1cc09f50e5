"""Units as people read them."""

from __future__ import annotations

import re
from fractions import Fraction

from calibrate.units.dimension import BASE_SYMBOLS, PRINT_ORDER, SUPERSCRIPTS, Dimension
from calibrate.units.reading import ONE, Unit


def si_unit(dimension: Dimension) -> Unit:
    """Return the coherent SI unit of a dimension, written readably.

    Forces and what derives from them are written in N and m (``N``, ``Pa``,
    ``N*m``, ``N/m^3``), the rest in base units (``kg/m^3``).  The text can be
    read back by :func:`parse_unit` where its powers do not exceed 6.
    """
    if dimension.anything or dimension.is_dimensionless:
        return ONE
    length, mass, time, *rest = dimension.exponents
    if mass == 1 and time == -2 and not any(rest):
        if length == -1:
            return Unit("Pa", 1.0, dimension)
        powers = [("N", Fraction(1)), ("m", length - 1)]
    else:
        powers = [(BASE_SYMBOLS[i], dimension.exponents[i]) for i in PRINT_ORDER]
    above = "*".join(n + _typed(p) for n, p in powers if p > 0) or "1"
    return Unit(above + "".join(f"/{n}{_typed(-p)}" for n, p in powers if p < 0), 1.0, dimension)


def _typed(power: Fraction) -> str:
    return "" if power == 1 else f"^{float(power):.6g}"


def format_unit(text: str) -> str:
    """Return a unit text for display: ``N/mm^2`` becomes ``N/mm²``, no unit an en dash."""
    clean = text.strip()
    if not clean:
        return "–"
    clean = re.sub(r"\bu(?=m\b|m[\^2-9])", "µ", clean)
    clean = re.sub(r" *(?:\^|\*\*) *", "^", clean)
    clean = re.sub(r"\^\+?(-?[0-9]+)(?![0-9.])", lambda m: m.group(1).translate(SUPERSCRIPTS), clean)
    clean = re.sub(r"(?<=[^\W\d_])([2-9])(?![\w.])", lambda m: m.group(1).translate(SUPERSCRIPTS), clean)
    return re.sub(r" *[*·⋅] *|(?<! )(?<!/) +(?![ /])", "·", re.sub(" */ *", "/", clean))
