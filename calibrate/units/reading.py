"""Text with units becomes numbers, factors and dimensions."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from calibrate.errors import InputError, Problem, nearest
from calibrate.units.dimension import DIMENSIONLESS, Dimension
from calibrate.units.vocabulary import COMMON, MISREAD, lookup

MAX_POWER = 6
MAX_LENGTH = 100

_PLAIN_DIGITS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit of measurement: SI value = number · ``factor``.

    Parameters
    ----------
    text : str
        As typed; empty for plain numbers.
    factor : float
        Size of the unit in coherent SI units, positive.
    dimension : Dimension
    """

    text: str
    factor: float
    dimension: Dimension


ONE = Unit("", 1.0, DIMENSIONLESS)

_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_VALUE = re.compile(rf"({_NUMBER}) (?=[^\W\d_]|[%°])(.*)", re.DOTALL)
_TOKEN = re.compile(
    r"(?P<name>(?:[^\W\d]|[°%])+)(?P<digits>[0-9]*)|(?P<power>\^|\*\*)|(?P<op>[*/·⋅])|(?P<space> +)"
)
_POWER_SIGN = re.compile(r" *(?:\^|\*\*)")
_POWER = re.compile(r" *([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?![\w.])")


def parse_unit(text: str) -> Unit:
    """Read a unit such as ``MPa``, ``N/mm^2``, ``kN m``, ``mm2``, ``1/s`` or ``%``.

    Parameters
    ----------
    text : str
        Names joined by ``*``, ``/`` or spaces, read from left to right: each
        ``/`` divides by the one name after it.  Powers by ``^`` or ``**``, at
        most 6 in size.  Empty, ``1``, ``-`` and ``–`` mean dimensionless.

    Returns
    -------
    Unit
        Its ``text`` is the argument without spaces around it.

    Raises
    ------
    InputError
        Unknown unit (with the nearest known name), a temperature with an
        offset zero, a power out of range, or text that is no unit.
    """
    clean = text.strip()
    if clean in {"", "1", "-", "–", "dimensionless"}:
        return ONE if not clean else Unit(clean, 1.0, DIMENSIONLESS)
    if len(clean) > MAX_LENGTH:
        raise _refusal(f"a unit has at most {MAX_LENGTH} characters, this one has {len(clean)}")
    shown = f"unit '{clean}'"
    parts = _split(re.sub("[⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+", lambda m: "^" + m.group().translate(_PLAIN_DIGITS), clean), shown)
    for name, power in parts:
        if abs(power) > MAX_POWER:
            raise _refusal(f"{shown}: the power of '{name}' may be at most {MAX_POWER} in size")
        if name in MISREAD or lookup(name) is None:
            raise _unknown(name, clean)
    try:
        exact, dimension = _product(parts)
        factor = float(exact)
    except OverflowError:
        factor = math.inf
    if not 0.0 < factor < math.inf:
        raise _refusal(f"{shown} is too large or too small to compute with")
    return Unit(clean, factor, dimension)


def _split(text: str, shown: str = "") -> list[tuple[str, Fraction]]:
    """Return (name, power) of each factor of a unit text."""
    parts: list[tuple[str, Fraction]] = []
    sign: int | None = 1  # None: a factor has just ended
    position = 0
    if lead := re.match(r"1 */ *", text):
        sign, position = -1, lead.end()
    while position < len(text):
        token = _TOKEN.match(text, position)
        if token is None:
            raise _refusal(f"{shown}: '{text[position]}' is not understood here", _SHAPE)
        position = token.end()
        kind = token.lastgroup
        if kind == "digits":
            if sign is None:
                raise _refusal(f"{shown} is not understood", _SHAPE)
            parts.append((token["name"], sign * Fraction(token["digits"] or 1)))
            sign = None
            if power := _POWER_SIGN.match(text, position):
                number = _POWER.match(text, power.end())
                if number is None or token["digits"]:
                    raise _refusal(f"{shown}: the power of '{token['name']}' is not a plain number", _SHAPE)
                name, direction = parts.pop()
                parts.append((name, (1 if direction > 0 else -1) * Fraction(number[1])))
                position = number.end()
        elif kind == "space":
            following = text[position : position + 1]
            if sign is None and following not in {"*", "/", "·", "⋅", ""}:
                sign = 1
        elif kind == "op" and sign is None:
            sign = -1 if token["op"] == "/" else 1
        else:
            raise _refusal(f"{shown}: '{token.group()}' follows nothing that it could join", _SHAPE)
    if sign is not None:
        raise _refusal(f"{shown} ends too early", _SHAPE)
    return parts


_SHAPE = "Write names joined by '*', '/' or a space, with powers like 'mm^2'; no brackets."


def _product(parts: Iterable[tuple[str, Fraction]]) -> tuple[Fraction, Dimension]:
    factor, dimension = Fraction(1), DIMENSIONLESS
    for name, power in parts:
        found = lookup(name)
        assert found is not None
        size = found[0]
        factor *= size**power.numerator if power.denominator == 1 else Fraction(float(size) ** float(power))
        dimension *= found[1] ** power
    return factor, dimension


def _refusal(message: str, suggestion: str | None = None) -> InputError:
    return InputError(Problem(message + ".", suggestion=suggestion))


def _unknown(name: str, text: str) -> InputError:
    place = "" if name == text else f" in '{text}'"
    if name in MISREAD:
        return _refusal(f"unit '{name}'{place} is not accepted", MISREAD[name])
    folded = [k for k in COMMON if k.casefold() == name.casefold()]
    close = folded[0] if folded else nearest(name, COMMON)
    if close is None:
        hint = "Common units: " + ", ".join(COMMON[:12]) + ", in, ft, lbf, kip, psi, ksi."
    else:
        hint = f"Did you mean '{close}'?"
    return _refusal(f"unknown unit '{name}'{place}", hint)


def split_value(text: str) -> tuple[float, Unit] | None:
    """Split ``"500 MPa"`` into a number and a unit.

    Parameters
    ----------
    text : str
        A value as a study file holds it.

    Returns
    -------
    (float, Unit) or None
        None when the text does not have the form *decimal, one space, a unit
        that begins with a letter, % or °*; then it is an expression.

    Raises
    ------
    InputError
        The text has that form but the unit is not accepted, or the number is
        not finite.
    """
    match = _VALUE.fullmatch(text.strip())
    if match is None:
        return None
    try:
        unit = parse_unit(match[2])
    except InputError as error:
        raise _perhaps_product(error.problems[0], match[1], match[2]) from None
    number = float(match[1])
    if not math.isfinite(number * unit.factor):
        raise _refusal(f"'{text.strip()}' is too large: numbers must be finite")
    return number, unit


def _perhaps_product(problem: Problem, number: str, unit: str) -> InputError:
    """Add what to write if ``0.6 Q_k`` was meant as a product, unless a unit was clearly meant."""
    hint = problem.suggestion or ""
    if len(unit) > MAX_LENGTH or unit in MISREAD or "Did you mean" in hint:
        return InputError(problem)
    return InputError(
        Problem(problem.message, suggestion=f"{hint} If a product was meant, write '{number} * {unit}'.")
    )
