"""Formulas: well-formed, and read back they are the expression again."""

import math
import re
import xml.etree.ElementTree as ET

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibrate.expressions import name_mathml, name_plain, parse, parse_comparison
from calibrate.expressions.symbols import GREEK, symbol

NAMESPACE = "{http://www.w3.org/1998/Math/MathML}"
POINT = {"x": 0.731, "y": 1.613, "z_1": 2.207}
LETTERS = {letter: name for name, letter in GREEK.items()}


def tag(element):
    return element.tag.removeprefix(NAMESPACE)


def spoken(element):
    """Write what a reader of the formula sees as an expression text: brackets only where they are shown."""
    kind = tag(element)
    if kind == "mtable":
        (yes, condition), (no, _) = ([spoken(cell) for cell in row] for row in element)
        return f"where({condition},{yes},{no})"
    parts = [spoken(child) for child in element]
    if kind in {"math", "mrow", "mtd"}:
        return "".join(parts)
    if kind == "mn":
        return element.text
    if kind == "mi":
        return {"ln": "log", "arcsin": "asin", "arccos": "acos", "arctan": "atan", "π": "pi"}.get(
            element.text, LETTERS.get(element.text, element.text)
        )
    if kind == "mo":
        if element.text == "|":
            return {"prefix": "abs(", "postfix": ")"}[element.get("form")]
        if element.text == "{":
            return ""
        return {"−": "-", "⋅": "*", "≥": ">=", "≤": "<=", "\u2061": ""}.get(element.text, element.text)
    if kind == "mfrac":
        return f"(({parts[0]})/({parts[1]}))"
    if kind == "msqrt":
        return f"sqrt({''.join(parts)})"
    if kind == "msup":
        return f"{parts[0]}**({parts[1]})"
    if kind == "msub":
        return "log10" if parts == ["log", "10"] else f"{parts[0]}_{parts[1].replace(',', '_')}"
    if kind == "msubsup":
        return f"{parts[0]}_{parts[1].replace(',', '_')}**({parts[2]})"
    if kind == "mtext":
        return ""
    raise AssertionError(kind)


def from_mathml(text):
    return spoken(ET.fromstring(text))


def from_plain(text):
    digits = "⁰¹²³⁴⁵⁶⁷⁸⁹"
    text = re.sub(f"[{digits}]+", lambda m: "**" + "".join(str(digits.index(c)) for c in m.group()), text)
    text = text.replace("√", "sqrt").replace("^", "**").replace("π", "pi")
    text = text.replace("·", "*").replace("−", "-").replace("≥", ">=").replace("≤", "<=")
    return "".join(LETTERS.get(c, c) for c in text)


def close(a, b):
    if not math.isfinite(b):
        return not math.isfinite(a)
    return a == pytest.approx(b, rel=1e-9, abs=1e-12)


@settings(max_examples=200)
@given(data=st.data())
def test_both_forms_read_back(data, trees, flat_texts):
    text = data.draw(st.one_of(trees.map(lambda pair: pair[0]), flat_texts))
    expression = parse(text)
    truth = float(expression.interpret(POINT))
    if abs(truth) > 1e8:
        return
    for again in (from_plain(expression.plain()), from_mathml(expression.mathml())):
        assert close(float(parse(again).interpret(POINT)), truth), (text, again)


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("A_d*f_uk/gamma_M >= gamma_G*G_k + gamma_Q*Q_k", "A_d · f_uk / γ_M ≥ γ_G · G_k + γ_Q · Q_k"),
        ("theta_R*A_d*f_u <= (G + Q)", "θ_R · A_d · f_u ≤ G + Q"),
        ("a - (b - c) >= -(a*b)", "a − (b − c) ≥ −a · b"),
        ("(a + b) + (c + d) >= ((a*b)*(c*d))", "a + b + c + d ≥ a · b · c · d"),
        ("(a + b)*c/(d*e) >= (x)**(2)", "(a + b) · c / (d · e) ≥ x²"),
        ("(-a)**2 - -b >= (a**b)**2", "(−a)² − (−b) ≥ (a^b)²"),
        ("a*(b/c)/d >= a/(b/c)", "a · (b / c) / d ≥ a / (b / c)"),
        ("sqrt(x**0.7) + 2**(x + 1) >= pi", "√(x^0.7) + 2^(x + 1) ≥ π"),
        ("where(x >= 1, min(x, 2), abs(x)) >= 0", "where(x ≥ 1, min(x, 2), abs(x)) ≥ 0"),
    ],
)
def test_plain(text, shown):
    assert parse_comparison(text).plain() == shown


def content(text):
    return re.sub(r"</?m(row|ath)[^>]*>", "", text)


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("f_uk", "<msub><mi>f</mi><mi>uk</mi></msub>"),
        ("gamma_M", '<msub><mi>γ</mi><mi mathvariant="normal">M</mi></msub>'),
        ("theta", "<mi>θ</mi>"),
        ("depth", "<mi>depth</mi>"),
        ("k1", "<msub><mi>k</mi><mn>1</mn></msub>"),
        ("x**2", "<msup><mi>x</mi><mn>2</mn></msup>"),
        ("x_k**2", '<msubsup><mi>x</mi><mi mathvariant="normal">k</mi><mn>2</mn></msubsup>'),
        ("a/b", "<mfrac><mi>a</mi><mi>b</mi></mfrac>"),
        ("sqrt(a + b)", "<msqrt><mi>a</mi><mo>+</mo><mi>b</mi></msqrt>"),
        ("2.1e-5", "<mn>2.1</mn><mo>⋅</mo><msup><mn>10</mn><mo>−</mo><mn>5</mn></msup>"),
        ("-(a*b)", "<mo>−</mo><mi>a</mi><mo>⋅</mo><mi>b</mi>"),
    ],
)
def test_mathml(text, shown):
    assert content(parse(text).mathml()) == shown


def test_brackets_only_where_needed():
    count = [
        parse(t).mathml().count(">(<")
        for t in ("(a + b) + c", "(a*b)/(c + d)", "a*(b + c)", "a - (b - c)", "(a/b)**2", "a*(b*c)")
    ]
    assert count == [0, 0, 1, 1, 1, 0]


def test_cases_are_bracketed_inside_sums_and_products():
    assert from_mathml(parse("2*where(x >= 1, 3, 4) + where(x <= 2, 5, 6)*7").mathml()).count("(where") == 2


def test_block_and_labels():
    expression = parse("a*b_1")
    assert 'display="block"' in expression.mathml(block=True)
    assert "display" not in expression.mathml()
    assert expression.mathml({"a": "alpha_x", "b_1": "beta"}.__getitem__) == parse("alpha_x*beta").mathml()
    assert "<script>" not in expression.mathml(lambda _: "<script>alert(1)</script>")
    ET.fromstring(expression.mathml(lambda _: "<&>\"'_<b>"))


@pytest.mark.parametrize(
    ("name", "base", "subscripts"),
    [
        ("A", "A", ()),
        ("A_d", "A", ("d",)),
        ("f_c_k", "f", ("c", "k")),
        ("gamma_M0", "γ", ("M0",)),
        ("Gamma", "Γ", ()),
        ("sigma_theta", "σ", ("θ",)),
        ("gamma1_k", "γ", ("1", "k")),
        ("x12", "x", ("12",)),
        ("hats2", "hats2", ()),
        ("Omega_0", "Ω", ("0",)),
        ("a__b_", "a", ("b",)),
        ("phi", "φ", ()),
        ("lamda_y", "λ", ("y",)),
    ],
)
def test_symbols(name, base, subscripts):
    shown = symbol(name)
    assert (shown.base, shown.subscripts) == (base, subscripts)


def test_every_greek_name_is_typeset():
    assert len(set(GREEK.values())) >= 48 + 4 - 2
    for name, letter in GREEK.items():
        assert letter in name_mathml(name)
        assert name_plain(f"{name}_k") == f"{letter}_k"
    # Unicode names of a few, so that the order of the table is not trusted
    assert (GREEK["xi"], GREEK["Psi"], GREEK["sigma"], GREEK["omicron"]) == (
        "\u03be",
        "\u03a8",
        "\u03c3",
        "\u03bf",
    )


def test_accepted_names_never_need_escaping_but_are_escaped():
    assert np.all([c not in name_mathml("<&>") for c in ("<&", "&>")])
