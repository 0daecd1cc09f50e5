"""Typesets a syntax tree as MathML: fractions, roots, subscripts, and no needless brackets.

Only elements and attributes of MathML Core are used.  All text is escaped.
``log`` is shown as ln and ``log10`` as log with the base, so that no reader
has to guess.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from html import escape

from calibrate.expressions.symbols import symbol
from calibrate.expressions.syntax import Node, Tree

Label = Callable[[str], str]
# What a part is, for the brackets around it: a fraction needs them only as a base,
# cases, which are open to the right, in every sum and product.
_COMPARISON, _CASES, _SUM, _SIGNED, _PRODUCT, _POWER, _FRACTION, _APPLIED, _ATOM = range(9)

_TITLES = {"log": "<mi>ln</mi>", "log10": "<msub><mi>log</mi><mn>10</mn></msub>"} | {
    "asin": "<mi>arcsin</mi>",
    "acos": "<mi>arccos</mi>",
    "atan": "<mi>arctan</mi>",
}
_SIGNS = {"+": "+", "-": "−", ">=": "≥", "<=": "≤"}

Part = tuple[str, int]


def mathml(tree: Tree, label: Label | None = None, *, block: bool = False) -> str:
    """Return a ``<math>`` element.

    Parameters
    ----------
    tree : Tree
    label : callable, optional
        Gives the name to be shown for a name; it is typeset like any other.
    block : bool
        Whether the formula stands on a line of its own.
    """
    at: list[Part] = []
    for node in tree:
        at.append(_set(node, [at[c] for c in node.children], label or str))
    display = ' display="block"' if block else ""
    return f'<math xmlns="http://www.w3.org/1998/Math/MathML"{display}><mrow>{at[-1][0]}</mrow></math>'


def name_mathml(name: str) -> str:
    """Return one typeset name, without the surrounding ``<math>``."""
    shown = symbol(name)
    base = _letters(shown.base, upright=len(shown.base) > 1)
    if not shown.subscripts:
        return base
    separator = '<mo separator="true">,</mo>'
    below = separator.join(_letters(s, upright=True) for s in shown.subscripts)
    return f"<msub>{base}<mrow>{below}</mrow></msub>"


def _letters(text: str, *, upright: bool) -> str:
    if text.isdigit():
        return f"<mn>{text}</mn>"
    # a single letter is italic by itself, a word upright
    variant = ' mathvariant="normal"' if upright and len(text) == 1 else ""
    return f"<mi{variant}>{escape(text)}</mi>"


def _set(node: Node, parts: list[Part], label: Label) -> Part:
    match node.op:
        case "number":
            return _number(node.name)
        case "pi":
            return '<mi mathvariant="normal">π</mi>', _ATOM
        case "name":
            return name_mathml(label(node.name)), _ATOM
        case "pos":
            return parts[0]
        case "neg":
            return f"<mrow><mo>−</mo>{_bracketed(parts[0], _PRODUCT)}</mrow>", _SIGNED
        case "+" | "-" | ">=" | "<=":
            return _joined(node.op, parts)
        case "*":
            a, b = (_bracketed(p, _PRODUCT) for p in parts)
            return f"{a}<mo>⋅</mo>{b}", _PRODUCT
        case "/":
            above, below = (f"<mrow>{p[0]}</mrow>" for p in parts)
            return f"<mfrac>{above}{below}</mfrac>", _FRACTION
        case "**":
            return _power(parts[0], parts[1])
        case "sqrt":
            return f"<msqrt>{parts[0][0]}</msqrt>", _ATOM
        case "abs":
            bar = '<mo fence="true" form="{}">|</mo>'
            return f"<mrow>{bar.format('prefix')}{parts[0][0]}{bar.format('postfix')}</mrow>", _ATOM
        case "where":
            return _cases(parts), _CASES
        case _:
            return _applied(node.op, parts), _APPLIED


def _number(digits: str) -> Part:
    mantissa, _, exponent = digits.lower().partition("e")
    if not exponent:
        return f"<mn>{mantissa}</mn>", _ATOM
    power = int(exponent)
    sign = "<mo>−</mo>" if power < 0 else ""
    ten = f"<msup><mn>10</mn><mrow>{sign}<mn>{abs(power)}</mn></mrow></msup>"
    return f"<mn>{mantissa}</mn><mo>⋅</mo>{ten}", _PRODUCT


def _brackets(inside: str) -> str:
    return f'<mrow><mo fence="true" form="prefix">(</mo>{inside}<mo fence="true" form="postfix">)</mo></mrow>'


def _bracketed(part: Part, least: int) -> str:
    return part[0] if part[1] >= least else _brackets(part[0])


def _joined(op: str, parts: list[Part]) -> Part:
    left, right = parts
    first = _bracketed(left, _SUM)
    if op in {">=", "<="}:
        return f"{first}<mo>{_SIGNS[op]}</mo>{right[0]}", _COMPARISON
    # a leading sign needs no brackets on the left: -a + b
    last = right[0] if op == "+" and right[1] == _SUM else _bracketed(right, _PRODUCT)
    return f"{first}<mo>{_SIGNS[op]}</mo>{last}", _SUM


def _power(base: Part, exponent: Part) -> Part:
    # x_k² reads better with both scripts on one letter
    scripts = re.fullmatch(r"<msub>(<mi[^<]*</mi>)(<mrow>(?:(?!</mrow>).)*</mrow>)</msub>", base[0])
    if scripts:
        return f"<msubsup>{scripts[1]}{scripts[2]}<mrow>{exponent[0]}</mrow></msubsup>", _POWER
    return f"<msup><mrow>{_bracketed(base, _ATOM)}</mrow><mrow>{exponent[0]}</mrow></msup>", _POWER


def _applied(op: str, parts: list[Part]) -> str:
    title = _TITLES.get(op, f"<mi>{op}</mi>")
    inside = '<mo separator="true">,</mo>'.join(p[0] for p in parts)
    return f"<mrow>{title}<mo>&#x2061;</mo>{_brackets(inside)}</mrow>"


def _cases(parts: list[Part]) -> str:
    condition, a, b = (f"<mrow>{p[0]}</mrow>" for p in parts)
    rows = (
        f"<mtr><mtd>{a}</mtd><mtd><mtext>if&#xa0;</mtext>{condition}</mtd></mtr>"
        f"<mtr><mtd>{b}</mtd><mtd><mtext>otherwise</mtext></mtd></mtr>"
    )
    brace = '<mo fence="true" form="prefix" stretchy="true">{</mo>'
    return f"<mrow>{brace}<mtable>{rows}</mtable></mrow>"
