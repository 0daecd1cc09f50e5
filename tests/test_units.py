"""Units: exact factors, a closed vocabulary, and refusals that say what to write."""

import subprocess
import sys
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.units import (
    ANY_DIMENSION,
    DIMENSIONLESS,
    ONE,
    Dimension,
    format_unit,
    parse_unit,
    si_unit,
    split_value,
    vocabulary,
)

# Definitions: SI Brochure, 9th edition (2019), Tables 4, 7 and 8; NIST Special Publication 811 (2008),
# Appendix B.8 for inch, foot, pound, pound-force, psi, kip, kilogram-force, slug, acre, knot, mile.
FACTORS = {
    "m": 1.0,
    "mm": 1e-3,
    "cm": 1e-2,
    "km": 1e3,
    "um": 1e-6,
    "µm": 1e-6,
    "in": 0.0254,
    "inch": 0.0254,
    "inches": 0.0254,
    "ft": 0.3048,
    "feet": 0.3048,
    "yd": 0.9144,
    "mile": 1609.344,
    "thou": 2.54e-5,
    "acre": 4046.872609874252,
    "ha": 1e4,
    "l": 1e-3,
    "L": 1e-3,
    "kg": 1.0,
    "g": 1e-3,
    "t": 1e3,
    "tonne": 1e3,
    "lb": 0.45359237,
    "lbs": 0.45359237,
    "slug": 14.593902937206364,
    "N": 1.0,
    "kN": 1e3,
    "MN": 1e6,
    "daN": 10.0,
    "millinewton": 1e-3,
    "lbf": 4.4482216152605,
    "kip": 4448.2216152605,
    "kips": 4448.2216152605,
    "kgf": 9.80665,
    "tf": 9806.65,
    "Pa": 1.0,
    "kPa": 1e3,
    "MPa": 1e6,
    "GPa": 1e9,
    "bar": 1e5,
    "mbar": 1e2,
    "atm": 101325.0,
    "psi": 6894.757293168361,
    "ksi": 6894757.293168361,
    "psf": 47.88025898033584,
    "ksf": 47880.25898033584,
    "plf": 14.593902937206364,
    "klf": 14593.902937206364,
    "N/mm^2": 1e6,
    "N/mm**2": 1e6,
    "N/mm2": 1e6,
    "N/mm²": 1e6,
    "lbf/in^2": 6894.757293168361,
    "kN m": 1e3,
    "kN*m": 1e3,
    "kN·m": 1e3,
    "kNm": 1e3,
    "Nm": 1.0,
    "kN/m": 1e3,
    "kN/m^3": 1e3,
    "mm2": 1e-6,
    "mm^2": 1e-6,
    "m3": 1.0,
    "mm^4": 1e-12,
    "m^-1": 1.0,
    "1/m": 1.0,
    "m s^-2": 1.0,
    "MPa m^0.5": 1e6,
    "s": 1.0,
    "ms": 1e-3,
    "min": 60.0,
    "h": 3600.0,
    "day": 86400.0,
    "year": 31557600.0,
    "1/year": 1 / 31557600.0,
    "K": 1.0,
    "delta_degC": 1.0,
    "delta_degF": 5 / 9,
    "%": 0.01,
    "percent": 0.01,
    "ppm": 1e-6,
    "°": 0.017453292519943295,
    "deg": 0.017453292519943295,
    "rad": 1.0,
    "mrad": 1e-3,
    "mph": 0.44704,
    "km/h": 1 / 3.6,
    "knot": 1852 / 3600,
    "J": 1.0,
    "kW": 1e3,
    "kWh": 3.6e6,
    "Hz": 1.0,
    "": 1.0,
    "1": 1.0,
    "-": 1.0,
}


@pytest.mark.parametrize("text", FACTORS)
def test_factors_are_the_definitions(text):
    # Exact rational products, rounded once: at most the last digit of the table's own float may differ.
    assert parse_unit(text).factor == pytest.approx(FACTORS[text], rel=3e-16, abs=0)


@pytest.mark.parametrize(
    ("text", "same"),
    [
        ("kip", "kN"),
        ("psi", "N/m^2"),
        ("ksf", "MPa"),
        ("kNm", "J"),
        ("klf", "N/m"),
        ("kgf", "kg*m/s^2"),
        ("acre", "m^2"),
        ("mph", "m/s"),
        ("deg", ""),
        ("%", ""),
        ("Hz", "1/s"),
        ("W", "J/s"),
        ("delta_degF", "K"),
        ("l", "m^3"),
    ],
)
def test_dimensions(text, same):
    assert parse_unit(text).dimension == parse_unit(same).dimension


# Each of these is something else for pint or in SI, or a frequent slip.
@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("MPA", "'MPa'"),
        ("Mpa", "'MPa'"),
        ("mpa", "'MPa'"),
        ("mPa", "'MPa'"),
        ("KPA", "'kPa'"),
        ("kn", "'kN'"),
        ("KN", "'kN'"),
        ("Kn", "'kN'"),
        ("n", "'N'"),
        ("mN", "'MN'"),
        ("pa", "'Pa'"),
        ("Kg", "'kg'"),
        ("Mm", "'mm'"),
        ("mmm", "'mm'"),
        ("kt", "'knot'"),
        ("ton", "'t'"),
        ("mil", "'thou'"),
        ("pcf", "'lbf/ft^3'"),
        ("T", "'t'"),
        ("S", "'s'"),
        ("H", "'h'"),
        ("C", "'K'"),
        ("F", "'K'"),
        ("degC", "'K'"),
        ("°C", "'K'"),
        ("degF", "'K'"),
        ("celsius", "'K'"),
        ("metr", "'metre'"),
        ("k N", "'K'"),
        ("Ns", "Did you mean"),
        ("kNs", "Did you mean"),
    ],
)
def test_misreadable_names_are_refused_with_what_to_write(text, hint):
    with pytest.raises(InputError) as caught:
        parse_unit(text)
    (problem,) = caught.value.problems
    assert hint in problem.suggestion
    assert problem.file is None
    assert problem.line is None


@pytest.mark.parametrize(
    "text",
    [
        "c",
        "e",
        "pi",
        "hbar",
        "gamma",
        "g_0",
        "k_B",
        "dB",
        "Np",
        "bit",
        "pixel",
        "count",
        "kyear",
        "kin",
        "kft",
        "kpsi",
        "microfoot",
        "USD",
        "G",
        "M",
        "R",
        "D",
        "x",
        "__import__",
    ],
)
def test_constants_and_oddities_are_no_units(text):
    with pytest.raises(InputError, match="unknown unit"):
        parse_unit(text)


@pytest.mark.parametrize(
    "text",
    [
        "m^7",
        "m^-6.5",
        "m**9",
        "m9",
        "mm^2^3",
        "mm2^2",
        "m^",
        "m^x",
        "m^(2)",
        "/m",
        "*m",
        "m/",
        "m*",
        "m//s",
        "m**s",
        "2 m",
        "kN/(m s)",
        "m,s",
        "m;s",
        "m=s",
        "m'",
        "m\x00s",
        "1/1/m",
        "m^1e3",
        "lambda: m",
        "m" * 101,
        "m^6 " * 30,
        "km^6*" * 18 + "km^6",
        "N.m",
        "m*1s",
        "m-s",
        "m^--2",
        "[m]",
        "{m}",
    ],
)
def test_malformed_units_are_refused(text):
    if text == "m^2.":
        # surrounding white space and "2." are harmless
        assert parse_unit(text).factor == 1.0
        return
    with pytest.raises(InputError):
        parse_unit(text)


@pytest.mark.parametrize("text", [" m\n", "m^2.", "m^+2", "m ^ 2", "m  *  s", "m   s"])
def test_harmless_spelling(text):
    assert parse_unit(text).factor == 1.0


def test_division_binds_the_next_name_only():
    assert parse_unit("J/kg/K").dimension == parse_unit("m^2/s^2/K").dimension
    assert parse_unit("kN/m*s").dimension == parse_unit("kN*s/m").dimension


@pytest.mark.parametrize(
    ("text", "number", "unit"),
    [
        ("500 MPa", 500.0, "MPa"),
        ("-3.5e3 kN", -3500.0, "kN"),
        ("+.5 %", 0.5, "%"),
        ("5. m", 5.0, "m"),
        ("30 °", 30.0, "°"),
        ("2 kN/m", 2.0, "kN/m"),
        ("1e-3 kN m", 1e-3, "kN m"),
        (" 4 mm ", 4.0, "mm"),
    ],
)
def test_numbers_with_units(text, number, unit):
    value, found = split_value(text)
    assert value == number
    assert found == parse_unit(unit)
    assert found.text == unit


@pytest.mark.parametrize(
    "text",
    [
        "500",
        "500MPa",
        "500  MPa",
        "1.0 * G_k",
        "500 /m",
        "500 (m)",
        "500\tMPa",
        "P * 2",
        "0.6*Q_k",
        "",
        "1 2",
        "1_0 m",
        "0x10 m",
        "nan m",
        "inf m",
        "1,5 m",
        "٣ m",
        "1 _m",
        "- 5 m",
        "5 -m",
    ],
)
def test_everything_else_is_an_expression(text):
    assert split_value(text) is None


@pytest.mark.parametrize("text", ["1e400 N", "-1e999 m", "1e305 MPa", "9" * 400 + " m"])
def test_numbers_that_are_not_finite_are_refused(text):
    with pytest.raises(InputError, match="finite"):
        split_value(text)


def test_a_product_mistaken_for_a_unit_is_explained():
    with pytest.raises(InputError, match=r"If a product was meant, write '0\.6 \* Q_k'"):
        split_value("0.6 Q_k")
    with pytest.raises(InputError, match="Did you mean 'MPa'") as caught:
        split_value("500 MPA")
    assert "product" not in str(caught.value)


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("", "–"),
        ("N/mm^2", "N/mm²"),
        ("N/mm**2", "N/mm²"),
        ("mm2", "mm²"),
        ("kN*m", "kN·m"),
        ("kN m", "kN·m"),
        ("m s^-2", "m·s⁻²"),
        ("m^0.5", "m^0.5"),
        ("kN / m", "kN/m"),
        ("%", "%"),
        ("lb/ft^3", "lb/ft³"),
    ],
)
def test_display(text, shown):
    assert format_unit(text) == shown


@pytest.mark.parametrize(
    ("text", "si"),
    [
        ("kip", "N"),
        ("ksi", "Pa"),
        ("mm^2", "m^2"),
        ("kN m", "N*m"),
        ("kN/m", "N/m"),
        ("kN/m^3", "N/m^3"),
        ("lb/ft^3", "kg/m^3"),
        ("1/year", "1/s"),
        ("mph", "m/s"),
        ("deg", ""),
        ("kN/mm m^2", "N*m"),
        ("kg/s", "kg/s"),
    ],
)
def test_si_units_are_readable(text, si):
    unit = si_unit(parse_unit(text).dimension)
    assert unit.text == si
    assert unit.factor == 1.0


halves = st.integers(-8, 8).map(lambda k: Fraction(k, 2))
dimensions = st.tuples(*[halves] * 7).map(Dimension)


@given(dimensions)
def test_si_units_read_back(dimension):
    unit = si_unit(dimension)
    if any(abs(e) > 6 for e in (dimension.exponents[0] - 1, *dimension.exponents)):
        return
    again = parse_unit(unit.text)
    assert again.dimension == dimension
    assert again.factor == 1.0


@given(dimensions, dimensions, halves)
def test_dimensions_form_a_vector_space(a, b, p):
    assert a * b == b * a
    assert a / b * b == a
    assert (a * b) ** p == a**p * b**p
    assert a / a == DIMENSIONLESS
    assert hash(a * b) == hash(b * a)


NAMES = st.sampled_from(["mm", "m", "kN", "MPa", "kip", "in", "s", "year", "kg", "%", "deg", "K"])
POWERS = st.sampled_from(["", "^2", "**3", "^-1", "^0.5", "^-2.5"])


@given(st.lists(st.tuples(st.sampled_from("*/ "), NAMES, POWERS), min_size=1, max_size=5))
def test_products_of_names_multiply(parts):
    text, factor, dimension = "", 1.0, DIMENSIONLESS
    for joint, name, power in parts:
        text += (joint if text else "") + name + power
        sign = -1 if joint == "/" and len(text) > len(name + power) else 1
        exponent = Fraction(power.lstrip("^*") or 1) * sign
        factor *= parse_unit(name).factor ** float(exponent)
        dimension *= parse_unit(name).dimension ** exponent
    unit = parse_unit(text)
    assert unit.factor == pytest.approx(factor, rel=1e-13)
    assert unit.dimension == dimension
    assert unit.text == text


def test_the_wildcard_agrees_with_everything():
    force = parse_unit("N").dimension
    assert ANY_DIMENSION.agrees(force)
    assert force.agrees(ANY_DIMENSION)
    assert ANY_DIMENSION * force == ANY_DIMENSION
    assert force / ANY_DIMENSION == ANY_DIMENSION
    assert not force.agrees(DIMENSIONLESS)
    assert si_unit(ANY_DIMENSION) == ONE


def test_words_of_dimensions():
    assert str(parse_unit("N").dimension) == "mass·length/time²"
    assert str(parse_unit("1/s").dimension) == "1/time"
    assert str(DIMENSIONLESS) == "dimensionless"
    assert parse_unit("N").dimension.describe() == "a force (kg·m/s²)"
    assert parse_unit("kg/s").dimension.describe() == "in kg/s"
    assert DIMENSIONLESS.describe() == "dimensionless"


@pytest.mark.parametrize("name", sorted(vocabulary._USUAL))
def test_units_written_out_are_those_of_pint(name):
    size, dimension = vocabulary._of_pint(name)
    assert vocabulary.lookup(name) == (size, dimension)


def test_pint_is_loaded_only_for_unusual_units():
    code = (
        "import sys, calibrate.units as u\n"
        "u.parse_unit('kN/mm^2')\n"
        "assert 'pint' not in sys.modules\n"
        "u.parse_unit('mile')\n"
        "assert 'pint' in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
