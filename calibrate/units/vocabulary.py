"""The closed vocabulary of unit names, and the only place that asks pint.

pint knows more than a thousand names, among them constants (``c``, ``e``),
textile units (``Nm`` is *number metre*) and prefixed oddities (``pa`` is a
picoyear); a typing slip must not become one of them.  So a name is accepted
only if pint resolves it to a unit of :data:`_PREFIXES` with a prefix that this
unit usually carries, and a few names that pint or SI read in a way that is
hardly ever meant (``kn``, ``mPa``, ``ton``, ``C``) are refused with what to
write instead (:data:`MISREAD`).

pint is imported on first use.  Its numbers are decimals, so that factors are
the exact definitions.  A year is 365.25 days.
"""

from __future__ import annotations

import functools
from fractions import Fraction
from typing import Any

from calibrate.units.dimension import BASE_NAMES, BASE_SYMBOLS, DIMENSIONLESS, Dimension


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

# What most studies use, written out: building pint's registry costs more than half a second. Tests hold every
# entry against pint. Size in SI, then powers of the base units.
_USUAL: dict[str, tuple[str, str]] = {
    "m": ("1", "m"),
    "mm": ("1e-3", "m"),
    "cm": ("1e-2", "m"),
    "km": ("1e3", "m"),
    "kg": ("1", "kg"),
    "g": ("1e-3", "kg"),
    "t": ("1e3", "kg"),
    "s": ("1", "s"),
    "min": ("60", "s"),
    "h": ("3600", "s"),
    "day": ("86400", "s"),
    "year": ("31557600", "s"),
    "K": ("1", "K"),
    "rad": ("1", ""),
    "percent": ("0.01", ""),
    "N": ("1", "kg m s-2"),
    "kN": ("1e3", "kg m s-2"),
    "MN": ("1e6", "kg m s-2"),
    "Pa": ("1", "kg m-1 s-2"),
    "kPa": ("1e3", "kg m-1 s-2"),
    "MPa": ("1e6", "kg m-1 s-2"),
    "GPa": ("1e9", "kg m-1 s-2"),
    "J": ("1", "kg m2 s-2"),
    "kJ": ("1e3", "kg m2 s-2"),
    "Hz": ("1", "s-1"),
    "kgf": ("9.80665", "kg m s-2"),
    "in": ("0.0254", "m"),
    "ft": ("0.3048", "m"),
    "lb": ("0.45359237", "kg"),
    "lbf": ("4.4482216152605", "kg m s-2"),
    "kip": ("4448.2216152605", "kg m s-2"),
}

# Usual names that pint lacks, or reads otherwise, as products.
_OWN: dict[str, dict[str, int]] = {
    "°": {"degree": 1},
    "%": {"percent": 1},
    "Nm": {"N": 1, "m": 1},
    "kNm": {"kN": 1, "m": 1},
    "MNm": {"MN": 1, "m": 1},
    "Nmm": {"N": 1, "mm": 1},
    "kNmm": {"kN": 1, "mm": 1},
    "psf": {"lbf": 1, "ft": -2},
    "ksf": {"kip": 1, "ft": -2},
    "plf": {"lbf": 1, "ft": -1},
    "klf": {"kip": 1, "ft": -1},
    "kcf": {"kip": 1, "ft": -3},
    "kph": {"km": 1, "h": -1},
    "Δ°C": {"K": 1},
    "ΔK": {"K": 1},
}

_OFFSET = "Use 'K'; for a temperature difference 'K' or 'delta_degC' (or 'delta_degF')."
MISREAD = {
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
COMMON = _words(
    "mm m N kN MPa kPa Pa GPa kg s min h day year cm km MN t K deg rad % in ft lb lbf kip psi ksi psf "
    "ksf klf plf kgf tf bar mbar hPa daN Nm kNm Hz J kJ W kW mph knot inch foot yd mile meter metre newton "
    "pascal second minute hour week month yr degree percent ppm l ha acre g mg Mg dm um kph slug atm"
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
def lookup(name: str) -> tuple[Fraction, Dimension] | None:
    """Return (exact factor to SI, dimension) of one accepted name, else None."""
    if name in _USUAL:
        return _usual(*_USUAL[name])
    if name in _OWN:
        return _composed(_OWN[name])
    return _of_pint(name)


def _usual(size: str, powers: str) -> tuple[Fraction, Dimension]:
    found = {p.rstrip("-0123456789"): Fraction(p.lstrip("".join(BASE_SYMBOLS)) or 1) for p in powers.split()}
    return Fraction(size), Dimension(tuple(found.get(symbol, Fraction(0)) for symbol in BASE_SYMBOLS))


def _of_pint(name: str) -> tuple[Fraction, Dimension] | None:
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
    dimension = Dimension(tuple(powers.get(b, Fraction(0)) for b in BASE_NAMES))
    return Fraction(quantity.magnitude), dimension


def _composed(parts: dict[str, int]) -> tuple[Fraction, Dimension]:
    factor, dimension = Fraction(1), DIMENSIONLESS
    for name, power in parts.items():
        found = lookup(name)
        assert found is not None
        factor *= found[0] ** power
        dimension *= found[1] ** power
    return factor, dimension
