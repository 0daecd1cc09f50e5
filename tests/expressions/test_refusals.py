"""Texts that are refused: at once, with the column, in words."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.expressions import RESERVED_NAMES, ExpressionError, parse, parse_comparison

# text, column (from 1), part of the message
REFUSED = [
    ("", 1, "empty"),
    ("   \n ", 1, "empty"),
    ("2^3", 2, "'**'"),
    ("x ^ 2", 3, "'**'"),
    ("a.b", 2, "point"),
    ("x.__class__", 2, "point"),
    ("().__class__.__bases__", 3, "point"),
    ("foo(x)", 1, "unknown function 'foo'"),
    ("1 + sqr(x)", 5, "Did you mean 'sqrt'"),
    ("Sqrt(x)", 1, "Did you mean 'sqrt'"),
    ("ln(x)", 1, "unknown function 'ln'"),
    ("eval(x)", 1, "unknown function"),
    ("__import__('os')", 1, "begin with a letter"),
    ("_x + 1", 1, "begin with a letter"),
    ("[x for x in y]", 1, "round brackets"),
    ("{x: 1}", 1, "round brackets"),
    ("x[0]", 2, "round brackets"),
    ("lambda x: 3", 9, "assigned"),
    ("lambda x, y", 1, "reserved"),
    ("(x := 3)", 4, "assigned"),
    ("f'{x}'", 2, "quotes"),
    ('x + "abc"', 5, "quotes"),
    ("`x`", 1, "quotes"),
    ("9**9**9", 4, "at most 20"),
    ("9**9**9**9**9**9**9", 16, "at most 20"),
    ("x**y**x**y", 4, "more than two high"),
    ("x**(y**(x**(y**x)))", 8, "more than two high"),
    ("x**21", 4, "at most 20"),
    ("x**-20.5", 4, "at most 20"),
    ("x**(7*3)", 4, "at most 20"),
    ("nan", 1, "finite"),
    ("inf + 1", 1, "finite"),
    ("1 - Infinity", 5, "finite"),
    ("NaN*x", 1, "finite"),
    ("x + 1e400", 5, "too large"),
    ("-1e999", 2, "too large"),
    ("1_000", 1, "'_'"),
    ("0x1F", 1, "decimal"),
    ("0b11", 1, "decimal"),
    ("3j", 1, "real"),
    ("x + 2j", 5, "real"),
    ("1.2.3", 1, "one decimal point"),
    ("1e", 1, "exponent needs digits"),
    ("2x", 1, "2*x"),
    ("True", 1, "reserved"),
    ("None", 1, "reserved"),
    ("x if y else z", 3, "where"),
    ("x and y", 3, "reserved"),
    ("not x", 1, "reserved"),
    ("x is y", 3, "reserved"),
    ("import os", 1, "reserved"),
    ("x in y", 3, "reserved"),
    ("a >= b", 3, "not a comparison"),
    ("a + (b >= c)", 5, "where"),
    ("(a >= b) * 2", 1, "where"),
    ("sqrt(a >= b)", 6, "where"),
    ("where(a >= b, c >= d, 1)", 15, "where"),
    ("a < b", 3, "'<='"),
    ("a > b", 3, "'>='"),
    ("a == b", 3, "'=='"),
    ("a != b", 3, "'!='"),
    ("a = b", 3, "'='"),
    ("a = > b", 3, "'='"),
    ("where(x, 1, 2)", 7, "begins with a comparison"),
    ("where(a > b, 1, 2)", 9, "'>'"),
    ("where(a >= b >= c, 1, 2)", 14, "chained"),
    ("where(a >= b, 1)", 1, "3 arguments"),
    ("where()", 1, "3 arguments"),
    ("sqrt()", 1, "1 argument,"),
    ("2*sqrt(1, x)", 3, "1 argument,"),
    ("min(x)", 1, "2 or more"),
    ("max()", 1, "2 or more"),
    ("min(a, b,)", 9, "missing after this comma"),
    ("min(a,, b)", 7, "value is expected"),
    ("min(a b)", 7, "operator is missing"),
    ("min(*a)", 5, "value is expected"),
    ("min(a=1, b=2)", 6, "'='"),
    ("sqrt", 1, "in brackets"),
    ("sqrt*2", 1, "in brackets"),
    ("pi(3)", 1, "number"),
    ("3(x)", 2, "operator is missing"),
    ("x(3)", 1, "unknown function 'x'"),
    ("(x)(y)", 4, "operator is missing"),
    ("x y", 3, "x * y"),
    ("2 kN", 3, "no units"),
    ("500  MPa", 6, "no units"),
    ("5 % x", 3, "Units"),
    ("(a + b", 1, "never closed"),
    ("sqrt(a + (b)", 5, "never closed"),
    ("a + b)", 6, "closes nothing"),
    (")", 1, "value is expected"),
    ("()", 2, "value is expected"),
    ("a, b", 2, "comma"),
    ("(a, b)", 3, "comma"),
    ("a +", 4, "ends"),
    ("a **", 5, "ends"),
    ("* a", 1, "value is expected"),
    ("a */ b", 4, "value is expected"),
    ("a // b", 4, "value is expected"),
    ("a @ b", 3, "cannot be used"),
    ("a & b", 3, "min"),
    ("a; b", 2, "cannot be used"),
    ("a # b", 3, "cannot be used"),
    ("a \\ b", 3, "cannot be used"),
    ("$x", 1, "cannot be used"),
    ("x?", 2, "cannot be used"),
    ("x\x00 + 1", 2, "number 0"),
    ("x \x0c+ 1", 3, "number 12"),
    ("x\u200b + 1", 2, "number 8203"),
    ("x\xa0+ 1", 2, "number 160"),
    ("γ_M * x", 1, "letters A to Z"),
    ("x * ß", 5, "letters A to Z"),
    ("ｘ + 1", 1, "letters A to Z"),
    ("x²", 2, "'**2'"),
    ("a × b", 3, "'*'"),
    ("a − b", 3, "'-'"),
    ("a ≥ b", 3, "'>='"),
    ("x + ٣", 5, "cannot be used"),
    ("1/0", 1, "no finite value"),
    ("x + sqrt(-1)", 5, "no finite value"),
    ("x*log(0)", 3, "no finite value"),
    ("x + (exp(800))", 6, "no finite value"),
    ("1e300*1e300", 1, "no finite value"),
    ("(-8)**0.5", 1, "no finite value"),
    ("a" * 41, 1, "at most 40 characters"),
    ("(" * 60 + "x" + ")" * 60, 41, "40 deep"),
    ("-" * 60 + "x", 41, "40 deep"),
    ("+-" * 900, 41, "40 deep"),
    ("sqrt(" * 60 + "x" + ")" * 60, 205, "40 deep"),
    ("2**" * 60 + "x", 122, "40 deep"),
    ("x + " * 499 + "x", 1001, "at most 500"),
    ("(" * 2001, 2001, "at most 2000 characters"),
    ("9" * 3000, 2001, "at most 2000 characters"),
    ("9" * 1999, 1, "too large"),
    ("x + \n\n 2 ++ * y", 13, "value is expected"),
    ("x +\r\n\ty $", 9, "cannot be used"),
]


@pytest.mark.parametrize(("text", "column", "message"), REFUSED, ids=[repr(t[:24]) for t, _, _ in REFUSED])
def test_refused_with_column_and_reason(text, column, message):
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    error = caught.value
    assert isinstance(error, InputError)
    assert error.column == column
    assert message in str(error)
    (problem,) = error.problems
    assert f"(column {column})" in problem.message
    # the mark stands under the place
    _, excerpt, mark = problem.message.split("\n")
    offset = len(mark) - len(mark.lstrip())
    if column <= len(text):
        wanted = text[column - 1]
        assert excerpt[offset] == (wanted if wanted.isprintable() else excerpt[offset])
    assert len(excerpt) <= 90


@pytest.mark.parametrize(
    ("text", "column", "message"),
    [
        ("a", 1, "'left >= right'"),
        ("a + b", 1, "'left >= right'"),
        ("a >= b >= c", 8, "chained"),
        ("a >= b <= c", 8, "chained"),
        ("(a >= b) >= c", 1, "where"),
        ("a > b", 3, "'>='"),
        ("a == b", 3, "'=='"),
        ("a >= ", 6, "ends"),
        (">= a", 1, "value is expected"),
        ("where(a >= b, 1, 2)", 1, "'left >= right'"),
    ],
)
def test_comparisons_refused(text, column, message):
    with pytest.raises(ExpressionError, match="column") as caught:
        parse_comparison(text)
    assert caught.value.column == column
    assert message in str(caught.value)


@pytest.mark.parametrize(
    "text",
    [
        "x",
        "A1_b2",
        "a" * 40,
        "x**20",
        "x**-20",
        "x**y**2",
        "(" * 40 + "x" + ")" * 40,
        "x + " * 249 + "x",
        "1e308",
        "match + case + type",
        "e + E + J + I",
        "nano + info + infty",
        "x" + " " * 1999,
        "where((x >= 1), min(x, 2), max(x, 3, 4))",
    ],
)
def test_just_within_the_limits(text):
    assert parse(text).text == text


def column_of_refusal(reader, text):
    """Return 0 for a text that is read; any other exception fails the test."""
    try:
        reader(text)
    except ExpressionError as error:
        return error.column
    return 0


@given(st.text(max_size=60))
def test_any_text_is_read_or_refused(text):
    assert 0 <= column_of_refusal(parse, text) <= len(text) + 1


PIECES = [
    "x",
    "y1",
    "2",
    ".5",
    "1e3",
    "(",
    ")",
    "+",
    "-",
    "*",
    "/",
    "**",
    ",",
    ">=",
    "<=",
    " ",
    "\n",
    "min(",
    "where(",
]
PIECES += [
    "sqrt(",
    "pi",
    "where(x>=1,",
    "lambda",
    ".",
    "=",
    "^",
    "[",
    "'",
    "_",
    "nan",
    "0x1",
    "1_0",
    "if",
    "λ",
    "\x00",
]


@settings(max_examples=400)
@given(st.lists(st.sampled_from(PIECES), max_size=25).map("".join), st.booleans())
def test_any_sequence_of_words_is_read_or_refused(text, compared):
    assert 0 <= column_of_refusal(parse_comparison if compared else parse, text) <= len(text) + 1


def test_reserved_names():
    assert {"sqrt", "where", "pi", "lambda", "True", "nan"} <= RESERVED_NAMES
    assert "x" not in RESERVED_NAMES
    for name in sorted(RESERVED_NAMES - {"pi"}):
        with pytest.raises(ExpressionError):
            parse(name)


def test_long_texts_are_shown_around_the_place():
    text = "alpha_1 + " * 40 + "§ + " + "beta_2 + " * 40 + "1"
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    _, excerpt, mark = str(caught.value).split("\n")
    assert excerpt.strip().startswith("…")
    assert excerpt.endswith("…")
    assert excerpt[mark.index("^")] == "§"
