"""The border to pint: text with units becomes plain SI numbers and dimensions, and nothing else.

The vocabulary is closed.  pint knows more than a thousand names, among them
constants (``c``, ``e``), textile units (``Nm`` is *number metre*) and prefixed
oddities (``pa`` is a picoyear); a typing slip must not become one of them.  So
a name is accepted only if pint resolves it to a unit of :data:`_PREFIXES` with
a prefix that this unit usually carries, and a few names that pint or SI read
in a way that is hardly ever meant (``kn``, ``mPa``, ``ton``, ``C``) are
refused with what to write instead (:data:`_MISREAD`).

The text is split here; pint is only ever asked for single names.  It is
imported on first use.  Factors are exact products of the exact definitions,
rounded once.  A year is 365.25 days.
"""

from __future__ import annotations

import functools
import math
import re
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from calibrate.errors import InputError, Problem, nearest

MAX_POWER = 6
MAX_LENGTH = 100

_BASE = ("length", "mass", "time", "current", "temperature", "substance", "luminosity")
_SYMBOLS = ("m", "kg", "s", "A", "K", "mol", "cd")
# The order in which factors are printed: a force reads kg·m/s², not m·kg/s².
_PRINT_ORDER = (1, 0, 3, 4, 5, 6, 2)


# ----------------------------------------------------------------- dimensions


@dataclass(frozen=True, slots=True)
class Dimension:
    """A physical dimension: rational exponents of the seven SI base dimensions.

    Parameters
    ----------
    exponents : tuple of fractions.Fraction
        Of length, mass, time, current, temperature, substance, luminosity.
    anything : bool
        True only for :data:`ANY_DIMENSION`, the dimension of a literal 0,
        which agrees with every other and stays what it is in products.

    Notes
    -----
    Angles are dimensionless.  ``str`` gives words ("mass·length/time²").
    """

    exponents: tuple[Fraction, ...] = (Fraction(0),) * 7
    anything: bool = False

    @property
    def is_dimensionless(self) -> bool:
        """Whether a plain number has this dimension."""
        return not any(self.exponents)

    def __mul__(self, other: Dimension) -> Dimension:
        if self.anything or other.anything:
            return ANY_DIMENSION
        return Dimension(tuple(a + b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __truediv__(self, other: Dimension) -> Dimension:
        return self * other**-1

    def __pow__(self, power: Fraction | int) -> Dimension:
        return self if self.anything else Dimension(tuple(a * power for a in self.exponents))

    def agrees(self, other: Dimension) -> bool:
        """Whether the two may be added or compared."""
        return self.anything or other.anything or self == other

    def __str__(self) -> str:
        if self.anything:
            return "any dimension"
        return self._compose(_BASE) or "dimensionless"

    def describe(self) -> str:
        """Return words for a message: ``a force (kg·m/s²)``, ``dimensionless``, ``in kg/s``."""
        if self.anything or self.is_dimensionless:
            return str(self)
        units = self._compose(_SYMBOLS)
        name = _NAMED.get(self.exponents)
        return f"{name} ({units})" if name else f"in {units}"

    def _compose(self, names: tuple[str, ...]) -> str:
        above = [(names[i], self.exponents[i]) for i in _PRINT_ORDER if self.exponents[i] > 0]
        below = [(names[i], -self.exponents[i]) for i in _PRINT_ORDER if self.exponents[i] < 0]
        if not above and not below:
            return ""
        top = "·".join(n + _raised(e) for n, e in above) or "1"
        return top + "".join("/" + n + _raised(e) for n, e in below)


_SUPERSCRIPTS = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
_PLAIN_DIGITS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")


def _raised(power: Fraction) -> str:
    if power == 1:
        return ""
    if power.denominator == 1:
        return str(power.numerator).translate(_SUPERSCRIPTS)
    return f"^{float(power):.6g}"


def _dimension(length: float = 0, mass: float = 0, time: float = 0, temperature: float = 0) -> Dimension:
    zero = Fraction(0)
    return Dimension(
        (Fraction(length), Fraction(mass), Fraction(time), zero, Fraction(temperature), zero, zero)
    )


DIMENSIONLESS = Dimension()
ANY_DIMENSION = Dimension(anything=True)

_NAMED = {
    _dimension(1).exponents: "a length",
    _dimension(2).exponents: "an area",
    _dimension(3).exponents: "a volume",
    _dimension(4).exponents: "a second moment of area",
    _dimension(0, 1).exponents: "a mass",
    _dimension(0, 0, 1).exponents: "a time",
    _dimension(0, 0, -1).exponents: "a frequency or rate",
    _dimension(0, 0, 0, 1).exponents: "a temperature",
    _dimension(1, 0, -1).exponents: "a velocity",
    _dimension(1, 0, -2).exponents: "an acceleration",
    _dimension(1, 1, -2).exponents: "a force",
    _dimension(0, 1, -2).exponents: "a force per length",
    _dimension(-1, 1, -2).exponents: "a stress or pressure",
    _dimension(-2, 1, -2).exponents: "a force per volume",
    _dimension(2, 1, -2).exponents: "a moment or energy",
    _dimension(2, 1, -3).exponents: "a power",
    _dimension(-3, 1).exponents: "a density",
}


# ----------------------------------------------------------------- vocabulary


def _words(text: str) -> list[str]:
    return text.split()


# pint's names of the accepted units, with the prefixes that each may carry.
_PREFIXES: dict[str, str] = {
    "meter": "nano micro milli centi deci kilo",
    "gram": "micro milli kilo mega",
    "second": "nano micro milli",
    "kelvin": "milli",
    "mole": "milli kilo",
    "ampere": "milli kilo",
    "newton": "milli deca hecto kilo mega giga",
    "pascal": "milli hecto kilo mega giga",
    "bar": "milli",
    "joule": "milli kilo mega giga",
    "watt": "milli kilo mega giga",
    "watt_hour": "kilo mega",
    "hertz": "kilo mega giga",
    "liter": "milli centi deci hecto",
    "radian": "micro milli",
    "volt": "milli kilo",
    "force_gram": "kilo",
} | dict.fromkeys(
    _words(
        "inch foot yard mile nautical_mile thou acre hectare gallon metric_ton pound ounce slug stone "
        "force_pound force_kilogram force_metric_ton poundal dyne kip pound_force_per_square_inch "
        "kip_per_square_inch standard_atmosphere torr minute hour day week month year degree arcminute "
        "arcsecond grade turn percent permille ppm dimensionless knot mile_per_hour kilometer_per_hour "
        "horsepower british_thermal_unit delta_degree_Celsius delta_degree_Fahrenheit candela lumen lux "
        "ohm farad henry siemens tesla weber coulomb"
    ),
    "",
)

# Usual names that pint lacks, or reads otherwise.
_OWN = {
    "°": "degree",
    "%": "percent",
    "Nm": "N*m",
    "kNm": "kN*m",
    "MNm": "MN*m",
    "Nmm": "N*mm",
    "kNmm": "kN*mm",
    "psf": "lbf/ft^2",
    "ksf": "kip/ft^2",
    "plf": "lbf/ft",
    "klf": "kip/ft",
    "kcf": "kip/ft^3",
    "kph": "km/h",
    "Δ°C": "K",
    "ΔK": "K",
}

_OFFSET = "Use 'K'; for a temperature difference 'K' or 'delta_degC' (or 'delta_degF')."
_MISREAD = {
    "kn": "Did you mean 'kN'? (The unit of speed is written 'knot'.)",
    "kt": "Write 'knot' for the speed, '1000 t' for the mass.",
    "mN": "Did you mean 'MN'? (The thousandth of a newton is written 'millinewton'.)",
    "mPa": "Did you mean 'MPa'? (The thousandth of a pascal is written 'millipascal'.)",
    "mil": "Write 'thou' for the thousandth of an inch.",
    "ton": "Write 't' for 1000 kg; a US ton is '2000 lb', as a force '2000 lbf'.",
    "tons": "Write 't' for 1000 kg; a US ton is '2000 lb', as a force '2000 lbf'.",
    "pcf": "Write 'lbf/ft^3' for a weight, 'lb/ft^3' for a mass per volume.",
    "C": f"For a temperature: {_OFFSET} The unit of charge is written 'coulomb'.",
    "F": f"For a temperature: {_OFFSET} The unit of capacitance is written 'farad'.",
    "T": "Write 't' for 1000 kg. (The magnetic unit is written 'tesla'.)",
    "S": "Did you mean 's'? (The unit of conductance is written 'siemens'.)",
    "H": "Did you mean 'h'? (The unit of inductance is written 'henry'.)",
} | dict.fromkeys(
    _words(
        "degC degF °C °F celsius fahrenheit Celsius Fahrenheit degree_Celsius degree_Fahrenheit "
        "degreeC degreeF degree_C degree_F deg_C deg_F"
    ),
    f"Temperatures with an offset zero are not accepted. {_OFFSET}",
)

# What a slip is compared with, the most usual first.
_COMMON = _words(
    "mm m N kN MPa kPa Pa GPa kg s min h day year cm km MN t K deg rad % in ft lb lbf kip psi ksi psf ksf "
    "klf plf kgf tf bar mbar hPa daN Nm kNm Hz J kJ W kW mph knot inch foot yd mile meter metre newton pascal "
    "second minute hour week month yr degree percent ppm l ha acre g mg Mg dm um kph slug atm"
)
# A plural s is understood in long names ("yards") and here: "Ns" must not become newtons.
_SHORTEST_PLURAL = 5
_SHORT_PLURALS = {"lbs": "lb", "kips": "kip", "hrs": "hr", "yrs": "yr", "mins": "min"}


@functools.cache
def _registry() -> Any:
    from decimal import Decimal

    import pint

    return pint.UnitRegistry(non_int_type=Decimal, cache_folder=None)


@functools.cache
def _single(name: str) -> tuple[Fraction, Dimension] | None:
    """Return (exact factor to SI, dimension) of one accepted name, else None."""
    if name in _OWN:
        return _product(_split(_OWN[name]))
    resolved = _registry().parse_unit_name(_SHORT_PLURALS.get(name, name))
    if not resolved:
        return None
    prefix, unit, plural = resolved[0]
    if unit not in _PREFIXES or (prefix and prefix not in _PREFIXES[unit].split()):
        return None
    if plural and len(name) < _SHORTEST_PLURAL:
        return None
    quantity = _registry().Quantity(1, prefix + unit).to_base_units()
    powers = {str(k).strip("[]"): Fraction(v) for k, v in quantity.dimensionality.items()}
    dimension = Dimension(tuple(powers.get(b, Fraction(0)) for b in _BASE))
    return Fraction(quantity.magnitude), dimension


# -------------------------------------------------------------------- reading


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
        if name in _MISREAD or _single(name) is None:
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
        found = _single(name)
        assert found is not None
        size = found[0]
        factor *= size**power.numerator if power.denominator == 1 else Fraction(float(size) ** float(power))
        dimension *= found[1] ** power
    return factor, dimension


def _refusal(message: str, suggestion: str | None = None) -> InputError:
    return InputError(Problem(message + ".", suggestion=suggestion))


def _unknown(name: str, text: str) -> InputError:
    place = "" if name == text else f" in '{text}'"
    if name in _MISREAD:
        return _refusal(f"unit '{name}'{place} is not accepted", _MISREAD[name])
    folded = [k for k in _COMMON if k.casefold() == name.casefold()]
    close = folded[0] if folded else nearest(name, _COMMON)
    if close is None:
        hint = "Common units: " + ", ".join(_COMMON[:12]) + ", in, ft, lbf, kip, psi, ksi."
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
    if len(unit) > MAX_LENGTH or unit in _MISREAD or "Did you mean" in hint:
        return InputError(problem)
    return InputError(
        Problem(problem.message, suggestion=f"{hint} If a product was meant, write '{number} * {unit}'.")
    )


# -------------------------------------------------------------------- showing


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
        powers = [(_SYMBOLS[i], dimension.exponents[i]) for i in _PRINT_ORDER]
    above = "*".join(n + _typed(p) for n, p in powers if p > 0) or "1"
    return Unit(above + "".join(f"/{n}{_typed(-p)}" for n, p in powers if p < 0), 1.0, dimension)


def _typed(power: Fraction) -> str:
    return "" if power == 1 else f"^{float(power):.6g}"


def format_unit(text: str) -> str:
    """Return a unit text for display: ``N/mm^2`` becomes ``N/mm²``, no unit an en dash."""
    clean = text.strip()
    if not clean:
        return "–"
    clean = re.sub(r" *(?:\^|\*\*) *", "^", clean)
    clean = re.sub(r"\^\+?(-?[0-9]+)(?![0-9.])", lambda m: m.group(1).translate(_SUPERSCRIPTS), clean)
    clean = re.sub(r"(?<=[^\W\d_])([2-9])(?![\w.])", lambda m: m.group(1).translate(_SUPERSCRIPTS), clean)
    return re.sub(r" *[*·⋅] *|(?<! )(?<!/) +(?![ /])", "·", re.sub(" */ *", "/", clean))
