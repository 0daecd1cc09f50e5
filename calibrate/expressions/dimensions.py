"""Dimensions of expressions: every sum, comparison and function argument is checked before anything runs.

For one unknown name the same walk carries its dimension ``d`` along as a
symbol: each part has the dimension ``d**a * b``, and whatever must agree is an
equation for ``d``.  The first equation with different powers of ``d`` decides;
the plain check then finds any contradiction.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from calibrate.errors import did_you_mean
from calibrate.expressions.errors import ExpressionError, refuse
from calibrate.expressions.expression import Comparison, Expression
from calibrate.expressions.syntax import Node, Tree
from calibrate.units import ANY_DIMENSION, DIMENSIONLESS, Dimension

Dimensions = Mapping[str, Dimension]

_PLAIN = frozenset({"exp", "log", "log10", "sin", "cos", "tan", "asin", "acos", "atan", "tanh"})
_JOINING = frozenset({"+", "-", "min", "max", ">=", "<="})
_CONDITIONS = frozenset({">=", "<="})


def dimension_of(expression: Expression, dimensions: Dimensions) -> Dimension:
    """Return the dimension of an expression and check all of its parts.

    Parameters
    ----------
    expression : Expression
    dimensions : mapping
        Dimension of every name that occurs.

    Returns
    -------
    Dimension
        ``ANY_DIMENSION`` for a literal 0 and products with one.

    Raises
    ------
    ExpressionError
        A name is not known, or parts do not agree; the message names them as
        written, with their dimensions.
    """
    return _Walk(expression.text, expression.tree, dimensions).run()


def dimension_of_comparison(comparison: Comparison, dimensions: Dimensions) -> Dimension:
    """Return the common dimension of both sides; raises as :func:`dimension_of`."""
    return _Walk(comparison.text, comparison.tree, dimensions).run()


def infer_dimension(comparison: Comparison, dimensions: Dimensions, unknown: str) -> Dimension | None:
    """Return the dimension that a comparison implies for one name.

    Parameters
    ----------
    comparison : Comparison
    dimensions : mapping
        Dimension of every other name that occurs.
    unknown : str

    Returns
    -------
    Dimension or None
        None when every dimension would do, as in ``z / z >= 1``.

    Raises
    ------
    ExpressionError
        No dimension of the unknown makes the comparison consistent, or a name
        is not known.
    """
    text, tree = comparison.text, comparison.tree
    walk = _Walk(text, tree, dimensions, unknown)
    walk.run()
    # Without an equation all agree or disagree whatever d is; then any d serves the check.
    trial = walk.solution or DIMENSIONLESS
    note = f" (counting '{unknown}' as {trial.describe()})"
    _Walk(text, tree, {**dimensions, unknown: trial}, note=note).run()
    return walk.solution


@dataclass(frozen=True, slots=True)
class _Power:
    """The dimension ``d**a * b``."""

    a: Fraction
    b: Dimension

    @property
    def anything(self) -> bool:
        return self.b.anything


_ONE = _Power(Fraction(0), DIMENSIONLESS)
_ANY = _Power(Fraction(0), ANY_DIMENSION)


class _Walk:
    def __init__(
        self, text: str, tree: Tree, dimensions: Dimensions, unknown: str | None = None, note: str = ""
    ) -> None:
        self.text = text
        self.tree = tree
        self.dimensions = dimensions
        self.unknown = unknown
        self.note = note
        self.solution: Dimension | None = None
        self.at: list[_Power] = []

    def run(self) -> Dimension:
        for node in self.tree:
            self.at.append(self._rule(node))
        return self.at[-1].b

    def _rule(self, node: Node) -> _Power:
        below = node.children
        parts = [self.at[c] for c in below]
        match node.op:
            case "number":
                return _ANY if node.constant == 0.0 else _ONE
            case "pi":
                return _ONE
            case "name":
                return self._name(node)
            case "neg" | "pos" | "abs":
                return parts[0]
            case "*":
                return _product(parts[0], parts[1], 1)
            case "/":
                return _product(parts[0], parts[1], -1)
            case "**":
                return self._raise(node)
            case "sqrt":
                return _raised(parts[0], Fraction(1, 2))
            case "where":
                # the condition was checked as a comparison
                return self._join(node, below[1:])
            case op if op in _JOINING:
                return self._join(node, below)
            case op:
                assert op in _PLAIN
                self._plain(below[0], f"the argument of '{op}' must be dimensionless")
                return _ONE

    def _name(self, node: Node) -> _Power:
        if node.name == self.unknown:
            return _Power(Fraction(1), DIMENSIONLESS)
        if node.name not in self.dimensions:
            known = sorted({*self.dimensions, *([self.unknown] if self.unknown else [])})
            hint = did_you_mean(node.name, known)
            raise refuse(f"unknown name '{node.name}'", self.text, node.start, node.end, hint)
        return _Power(Fraction(0), self.dimensions[node.name])

    def _raise(self, node: Node) -> _Power:
        base, exponent = node.children
        self._plain(exponent, "an exponent must be dimensionless")
        constant = self.tree[exponent].constant
        if constant is not None:
            return _raised(self.at[base], _rational(constant))
        self._plain(base, "with an exponent that varies, the base must be dimensionless")
        return _ONE

    def _plain(self, part: int, rule: str) -> None:
        """Require that a part is dimensionless."""
        if not self._agree(self.at[part], _ONE):
            child = self.tree[part]
            raise refuse(
                f"{rule}, but '{self._written(child)}' is {self.at[part].b.describe()}{self.note}",
                self.text,
                child.start,
                child.end,
            )

    def _join(self, node: Node, parts: tuple[int, ...]) -> _Power:
        """Require that the parts agree, and return what they are."""
        joined, first = self.at[parts[0]], parts[0]
        for part in parts[1:]:
            if joined.anything:
                joined, first = self.at[part], part
            elif not self._agree(joined, self.at[part]):
                raise self._disagreement(node, first, part)
        return joined

    def _disagreement(self, node: Node, first: int, second: int) -> ExpressionError:
        a, b = (self.at[i].b.describe() for i in (first, second))
        left, right = (self._written(self.tree[i]) for i in (first, second))
        if node.op in _CONDITIONS:
            what = f"the two sides of '{node.op}' do not agree: left '{left}' is {a}, right '{right}' is {b}"
        elif node.op in {"+", "-"}:
            verb = "be added" if node.op == "+" else "be subtracted"
            what = f"these cannot {verb}: '{left}' is {a}, '{right}' is {b}"
        else:
            what = f"the values of '{node.op}' do not agree: '{left}' is {a}, '{right}' is {b}"
        return refuse(what + self.note, self.text, node.start, node.end)

    def _agree(self, x: _Power, y: _Power) -> bool:
        """Compare; with an unknown, take the first equation that determines it and go on."""
        if x.anything or y.anything:
            return True
        if self.unknown is None:
            return x.b == y.b
        if x.a != y.a and self.solution is None:
            self.solution = (y.b / x.b) ** (1 / (x.a - y.a))
        return True

    def _written(self, node: Node) -> str:
        text = " ".join(self.text[node.start : node.end].split())
        return text if len(text) <= 60 else f"{text[:28]} … {text[-28:]}"


def _product(x: _Power, y: _Power, sign: int) -> _Power:
    if x.anything or y.anything:
        return _ANY
    return _Power(x.a + sign * y.a, x.b * y.b**sign)


def _raised(x: _Power, power: Fraction) -> _Power:
    return _ANY if x.anything else _Power(x.a * power, x.b**power)


def _rational(value: float) -> Fraction:
    """Recognise 1/3 and 0.7 in their floats, so that cubed cube roots agree exactly."""
    near = Fraction(value).limit_denominator(10_000)
    return near if abs(near - Fraction(value)) <= 1e-12 * abs(value) else Fraction(value)
