"""Sums of powers of a size: what is recognised, and that it equals the expression."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.expressions import parse
from calibrate.expressions.powers import powers_of

VALUES = {"a": 1.7, "b": 0.45, "c": 3.1}


def rebuilt(powers, z):
    return sum(c.value(VALUES) * z**e for e, c in powers)


@pytest.mark.parametrize(
    ("text", "exponents"),
    [
        ("a * z - b", [0, 1]),
        ("a * z**2 / 6 - b * z - c", [0, 1, 2]),
        ("(a * z + b) * (z - c)", [0, 1, 2]),
        ("a * z**0.7 * b**1.3 - c", [0, 0.7]),
        ("sqrt(a * z) - b / z", [-1, 0.5]),
        ("-(a - z)**3", [0, 1, 2, 3]),
        ("a / (b * z**2) - z", [-2, 1]),
        ("+z - a*b*c", [0, 1]),
    ],
)
@pytest.mark.parametrize("z", [1e-3, 0.8, 42.0])
def test_sum_of_powers_equals_the_expression(text, exponents, z):
    powers = powers_of(parse(text), "z")
    assert [e for e, _ in powers] == pytest.approx(exponents, abs=1e-15)
    terms = [abs(c.value(VALUES)) * z**e for e, c in powers]
    expected = parse(text).value({**VALUES, "z": z})
    assert rebuilt(powers, z) == pytest.approx(expected, abs=1e-13 * sum(terms))


@pytest.mark.parametrize(
    "text", ["exp(a * z) - b", "max(z, a) - b", "a / (z + b)", "a**2 * 2**(z/3)", "sqrt(z + a)", "abs(z - a)"]
)
def test_what_is_no_sum_of_powers_is_left_alone(text):
    assert powers_of(parse(text), "z") is None


def test_functions_of_other_names_are_coefficients():
    powers = powers_of(parse("max(a, b) * z - where(a >= b, exp(a), c)"), "z")
    assert [c.value(VALUES) for _, c in powers] == pytest.approx([-np.exp(1.7), 1.7], rel=1e-15)


@given(
    exponents=st.lists(st.integers(-3, 4), min_size=1, max_size=4, unique=True),
    z=st.floats(0.05, 20.0),
)
def test_any_signed_sum_is_found(exponents, z):
    text = " - ".join(f"a * z**({e})" for e in exponents)
    powers = powers_of(parse(text), "z")
    terms = [VALUES["a"] * z**e for e in exponents]
    assert len(powers) == len(exponents)
    assert rebuilt(powers, z) == pytest.approx(terms[0] - sum(terms[1:]), abs=1e-13 * sum(terms))
