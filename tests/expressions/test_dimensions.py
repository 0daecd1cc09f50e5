"""Dimensions of expressions, refusals that name the parts, and the dimension that a check implies."""

from fractions import Fraction

import pytest

from calibrate.expressions import (
    ExpressionError,
    dimension_of,
    dimension_of_comparison,
    infer_dimension,
    parse,
    parse_comparison,
)
from calibrate.units import ANY_DIMENSION, DIMENSIONLESS, parse_unit


def unit(text):
    return parse_unit(text).dimension


KNOWN = {
    "G": unit("kN"),
    "Q": unit("kN"),
    "f": unit("MPa"),
    "h": unit("mm"),
    "t": unit("m"),
    "g": DIMENSIONLESS,
    "n": DIMENSIONLESS,
    "T": unit("year"),
    "zero": ANY_DIMENSION,
}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("G + Q", "N"),
        ("G - Q + 0", "N"),
        ("0 + G", "N"),
        ("-G", "N"),
        ("+G", "N"),
        ("G*h", "N m"),
        ("G/f", "m^2"),
        ("sqrt(G/f) + h", "m"),
        ("f*h*t**2/6", "N m"),
        ("h**0.7 * t**1.3", "m^2"),
        ("(h**(1/3))**3 + t", "m"),
        ("h**(2/3) * h**(1/3) - t", "m"),
        ("h**-2", "m^-2"),
        ("abs(G) - min(G, Q, 0) + max(Q, 2*G)", "N"),
        ("where(h >= 0, G, Q)", "N"),
        ("where(h <= t, 0, Q)", "N"),
        ("exp(-G/Q)*log(g)*log10(h/t)*tanh(n)*G", "N"),
        ("sin(g) + cos(h/t) + tan(n) + asin(g) + acos(g) + atan(n) + pi", ""),
        ("g**n", ""),
        ("2**(h/t)", ""),
        ("(G/Q)**n * h", "m"),
        ("3.5", ""),
        ("zero + G", "N"),
        ("G + 0*h", "N"),
        ("1/T", "1/s"),
        ("max(0, 0, h)", "m"),
        ("h**0 + 1", ""),
    ],
)
def test_dimensions(text, expected):
    assert dimension_of(parse(text), KNOWN) == unit(expected)


@pytest.mark.parametrize(
    "text", ["0", "-0", "0.0", "0*G", "0/h", "zero", "sqrt(0)", "abs(0)", "zero**2", "min(0, 0)"]
)
def test_nothing_has_any_dimension(text):
    assert dimension_of(parse(text), KNOWN) == ANY_DIMENSION


@pytest.mark.parametrize(
    ("text", "column", "parts"),
    [
        ("G + h", 1, ["'G' is a force (kg·m/s²)", "'h' is a length (m)"]),
        ("2 * (G*h - Q)", 5, ["'G*h' is a moment or energy", "'Q' is a force"]),
        ("G + 5", 1, ["'5' is dimensionless"]),
        ("h + 3 - 3", 1, ["'h' is a length", "'3' is dimensionless"]),
        ("1 + exp(G)", 9, ["'exp'", "'G' is a force"]),
        ("sin(h/T)", 5, ["'h/T' is a velocity"]),
        ("atan(f)", 6, ["'atan'", "stress"]),
        ("G**n", 1, ["exponent that varies", "'G' is a force"]),
        ("2**(G + Q)", 4, ["exponent must be dimensionless", "'(G + Q)' is a force"]),
        ("where(h >= G, 1, 2)", 7, ["two sides of '>='", "left 'h' is a length", "right 'G' is a force"]),
        ("where(h >= t, G, 2)", 1, ["values of 'where'", "'2' is dimensionless"]),
        ("max(G, 0, h)", 1, ["values of 'max'", "'h' is a length"]),
        ("G\n +\n  h", 1, ["'G'", "'h'"]),
        ("sqrt(G) + G", 1, ["'sqrt(G)' is in kg^0.5·m^0.5/s"]),
        ("G + Q_k", 5, ["unknown name 'Q_k'"]),
        ("hh", 1, ["unknown name 'hh'", "Did you mean 'h'"]),
    ],
)
def test_disagreements_name_the_parts(text, column, parts):
    with pytest.raises(ExpressionError) as caught:
        dimension_of(parse(text), KNOWN)
    assert caught.value.column == column
    for part in parts:
        assert part in str(caught.value)


def test_comparisons_need_equal_sides():
    assert dimension_of_comparison(parse_comparison("G*h >= f*h**3"), KNOWN) == unit("N m")
    assert dimension_of_comparison(parse_comparison("G >= 0"), KNOWN) == unit("N")
    with pytest.raises(ExpressionError) as caught:
        dimension_of_comparison(parse_comparison("G*h  >= 2*Q"), KNOWN)
    assert "left 'G*h' is a moment or energy (kg·m²/s²), right '2*Q' is a force (kg·m/s²)" in str(
        caught.value
    )


def test_columns_count_in_the_whole_comparison():
    with pytest.raises(ExpressionError) as caught:
        dimension_of_comparison(parse_comparison("G*h >= 2*exp(Q)"), KNOWN)
    assert caught.value.column == 14


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("z*f/g >= g*G + n*Q", "m^2"),
        ("g*G + n*Q <= z*f/g", "m^2"),
        ("g*f*z**0.7*t**1.3 >= G*h/t", "m"),
        ("f*z**2/6 >= G", "m"),
        ("sqrt(z/h)*G >= Q", "m"),
        ("f >= G/z + Q*h/z**1.5", "m^2"),
        ("exp(-z/h)*G >= Q", "m"),
        ("G*g**(z/t) >= Q", "m"),
        ("G >= where(z >= h, Q, 0)", "m"),
        ("max(z, h)*f*t >= G", "m"),
        ("min(2*z, 0, t) >= h", "m"),
        ("z + h >= 0", "m"),
        ("(z/h)**g*G >= Q", "m"),
        ("z**n >= 2", ""),
        ("g*G >= z", "N"),
        ("z >= 1", ""),
        ("((z*h)**2)**(1/4)*f >= G/t", "m"),
    ],
)
def test_the_size_has_the_dimension_that_the_check_implies(text, expected):
    assert infer_dimension(parse_comparison(text), KNOWN, "z") == unit(expected)


def test_fractional_dimensions_are_exact():
    found = infer_dimension(parse_comparison("z**3*f >= G"), KNOWN, "z")
    assert found is not None
    assert found.exponents[0] == Fraction(2, 3)


@pytest.mark.parametrize("text", ["z/z >= 1", "G >= Q", "0 <= z", "z*G >= z*Q", "where(z >= 0, G, Q) >= 0"])
def test_nothing_is_implied(text):
    assert infer_dimension(parse_comparison(text), KNOWN, "z") is None


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        ("z*f + z*G >= Q", ["be added", "(counting 'z' as"]),
        ("z*G >= z*f", ["two sides"]),
        ("z + G >= h", ["'z + G' is a force", "(counting 'z' as a force"]),
        ("where(z >= h, z*f, Q) >= G", ["values of 'where'", "counting 'z' as a length"]),
        ("G >= f", ["two sides"]),
        ("exp(z)*z >= h", ["two sides", "counting 'z' as dimensionless"]),
        ("y*z >= h", ["unknown name 'y'"]),
    ],
)
def test_contradictions_are_refused(text, parts):
    with pytest.raises(ExpressionError) as caught:
        infer_dimension(parse_comparison(text), KNOWN, "z")
    for part in parts:
        assert part in str(caught.value)
