"""Writes an expression as a sum of powers of one name, where it is one: c1·z^e1 + … + ck·z^ek.

Design checks nearly always are such sums in the size. Knowing it turns a search for the smallest size into a closed
form or into a root that Descartes' rule of signs proves to be the only one.
"""

from __future__ import annotations

from fractions import Fraction

from calibrate.expressions.errors import ExpressionError
from calibrate.expressions.expression import Expression, parse
from calibrate.expressions.syntax import Tree

MAX_TERMS = 12
MAX_EXPANDED_POWER = 4

Terms = dict[Fraction, list[str]]
"""By exponent, the texts whose sum is the coefficient."""


def powers_of(expression: Expression, name: str) -> tuple[tuple[float, Expression], ...] | None:
    """Return exponents and coefficients of ``name``, smallest exponent first.

    Parameters
    ----------
    expression : Expression
        What is to be written as a sum of powers.
    name : str
        The name whose powers are sought; taken to be positive.

    Returns
    -------
    tuple of (float, Expression), or None
        Coefficients do not contain the name. None where the expression is not such a sum, as far as this function
        can see.
    """
    terms = _Expansion(expression.text, expression.tree, name).terms(len(expression.tree) - 1)
    if terms is None or len(terms) > MAX_TERMS:
        return None
    try:
        return tuple((float(e), parse(" + ".join(texts))) for e, texts in sorted(terms.items()))
    except ExpressionError:  # a coefficient outgrew the limits of an expression
        return None


class _Expansion:
    def __init__(self, text: str, tree: Tree, name: str) -> None:
        self.text = text
        self.tree = tree
        self.name = name
        self.contains = [False] * len(tree)
        for i, node in enumerate(tree):
            self.contains[i] = (
                node.name == name if node.op == "name" else any(self.contains[c] for c in node.children)
            )

    def terms(self, i: int) -> Terms | None:
        """Return the terms of one node, or None."""
        node = self.tree[i]
        if not self.contains[i]:
            return {Fraction(0): [f"({self.text[node.start : node.end]})"]}
        if node.op == "name":
            return {Fraction(1): ["1"]}
        parts = [self.terms(c) for c in node.children]
        if node.op == "**":
            return self._power(parts[0], self.tree[node.children[1]].constant)
        if any(p is None for p in parts):
            return None
        known = [p for p in parts if p is not None]
        match node.op:
            case "pos":
                return known[0]
            case "neg":
                return _times({Fraction(0): ["(-1)"]}, known[0])
            case "+":
                return _plus(known[0], known[1])
            case "-":
                opposite = _times({Fraction(0): ["(-1)"]}, known[1])
                return None if opposite is None else _plus(known[0], opposite)
            case "*":
                return _times(known[0], known[1])
            case "/":
                inverse = _monomial_power(known[1], Fraction(-1))
                return None if inverse is None else _times(known[0], inverse)
            case "sqrt":
                return _monomial_power(known[0], Fraction(1, 2))
        return None

    @staticmethod
    def _power(base: Terms | None, exponent: float | None) -> Terms | None:
        if base is None or exponent is None:
            return None
        power = Fraction(repr(exponent))
        monomial = _monomial_power(base, power)
        if monomial is not None or power.denominator != 1 or not 2 <= power <= MAX_EXPANDED_POWER:
            return monomial
        product: Terms | None = base
        for _ in range(int(power) - 1):
            product = None if product is None else _times(product, base)
        return product


def _plus(a: Terms, b: Terms) -> Terms:
    return {e: a.get(e, []) + b.get(e, []) for e in {**a, **b}}


def _times(a: Terms, b: Terms) -> Terms | None:
    product: Terms = {}
    for ea, texts_a in a.items():
        for eb, texts_b in b.items():
            texts = product.setdefault(ea + eb, [])
            texts += [f"{s}*{t}" for s in texts_a for t in texts_b]
            if len(texts) > MAX_TERMS or sum(map(len, texts)) > 1500:
                return None
    return product


def _monomial_power(a: Terms, power: Fraction) -> Terms | None:
    if len(a) != 1:
        return None
    ((exponent, texts),) = a.items()
    coefficient = " + ".join(texts)
    return {exponent * power: [f"({coefficient})**({float(power)!r})"]}
