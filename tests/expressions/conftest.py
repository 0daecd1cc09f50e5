"""Random expression texts, each with a sympy twin built beside it, not from it."""

import pytest
import sympy
from hypothesis import strategies as st

from calibrate.expressions import ExpressionError, parse

NAMES = ("x", "y", "z_1")
SYMBOLS = {name: sympy.Symbol(name, real=True) for name in NAMES}


def _pieces(condition, a, b):
    return sympy.Piecewise((a, condition), (b, True))


# text template, twin
UNARY = [
    ("sqrt({})", sympy.sqrt),
    ("exp(-abs({}))", lambda a: sympy.exp(-_pieces(a >= 0, a, -a))),
    ("log({})", sympy.log),
    ("log10({})", lambda a: sympy.log(a, 10)),
    ("sin({})", sympy.sin),
    ("cos({})", sympy.cos),
    ("tan({})", sympy.tan),
    ("asin({}/9)", lambda a: sympy.asin(a / 9)),
    ("acos({}/9)", lambda a: sympy.acos(a / 9)),
    ("atan({})", sympy.atan),
    ("tanh({})", sympy.tanh),
    ("-{}", lambda a: -a),
    ("({})**2", lambda a: a**2),
    ("({})**3", lambda a: a**3),
    ("({})**-1", lambda a: 1 / a),
    ("({})**1.5", lambda a: a ** sympy.Rational(3, 2)),
    ("({})**0.7", lambda a: a ** sympy.Rational(7, 10)),
    ("({})**-2.5", lambda a: a ** sympy.Rational(-5, 2)),
    ("({})**2.3", lambda a: a ** sympy.Rational(23, 10)),
]
KINKED = [("abs({})", lambda a: _pieces(a >= 0, a, -a))]
BINARY = [
    ("({} + {})", lambda a, b: a + b),
    ("({} - {})", lambda a, b: a - b),
    ("({} * {})", lambda a, b: a * b),
    ("({} / {})", lambda a, b: a / b),
    ("({})**({})", lambda a, b: a**b),
    ("min({}, {})", lambda a, b: _pieces(a <= b, a, b)),
    ("max({}, {})", lambda a, b: _pieces(a >= b, a, b)),
    ("where({} >= 1, {}, 2)", lambda a, b: _pieces(a >= 1, b, 2)),
    ("where({} <= {}, 1, x)", lambda a, b: _pieces(a <= b, 1, SYMBOLS["x"])),
]


def _leaf():
    names = st.sampled_from(NAMES).map(lambda n: (n, lambda: SYMBOLS[n]))
    numbers = st.sampled_from(["0.5", "1", "2", "3.25"]).map(lambda t: (t, lambda: sympy.Rational(t)))
    return st.one_of(names, names, numbers)


def _grow(children):
    one = st.tuples(st.sampled_from(UNARY + KINKED), children).map(
        lambda p: (p[0][0].format(p[1][0]), lambda: p[0][1](p[1][1]()))
    )
    two = st.tuples(st.sampled_from(BINARY), children, children).map(
        lambda p: (p[0][0].format(p[1][0], p[2][0]), lambda: p[0][1](p[1][1](), p[2][1]()))
    )
    return st.one_of(one, two, two)


def _accepted(text):
    """Constant parts without a finite value are refused, rightly; everything else must be read."""
    try:
        parse(text)
    except ExpressionError as error:
        if any(
            t in str(error) for t in ("no finite value", "an exponent may be at most", "more than two high")
        ):
            return False
        raise
    return True


@pytest.fixture(scope="session")
def trees():
    """Strategy of (text, function that builds the sympy twin)."""
    return st.recursive(_leaf(), _grow, max_leaves=6).filter(lambda pair: _accepted(pair[0]))


def _flat(children):
    """Texts with as few brackets as the dice leave: precedence decides."""
    operator = st.sampled_from(["+", "-", "*", "/", " + ", " - ", "*-", "**2", "**-1"])
    pair = st.tuples(children, operator, children).map(
        lambda p: f"{p[0]}{p[1]}{p[2]}" if "**" not in p[1] else f"{p[0]}{p[1]} - {p[2]}"
    )
    wrapped = children.map(lambda t: f"({t})")
    signed = children.map(lambda t: f"-{t}")
    function = st.tuples(st.sampled_from(["abs", "tanh", "exp", "sin"]), children).map(
        lambda p: f"{p[0]}({p[1]})"
    )
    many = st.lists(children, min_size=2, max_size=4).map(lambda c: f"max({', '.join(c)})")
    return st.one_of(pair, pair, wrapped, signed, function, many)


@pytest.fixture(scope="session")
def flat_texts():
    """Strategy of texts with few brackets."""
    leaf = st.sampled_from(["x", "y", "z_1", "2", "0.5", "1.25e1", ".75"])
    return st.recursive(leaf, _flat, max_leaves=10).filter(_accepted)
