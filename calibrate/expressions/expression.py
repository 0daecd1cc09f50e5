"""Checked expressions and comparisons: the public face of this folder."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.expressions import derive
from calibrate.expressions.graph import Graph, from_tree
from calibrate.expressions.interpreter import interpret
from calibrate.expressions.mathml import mathml
from calibrate.expressions.parser import read
from calibrate.expressions.plain import plain
from calibrate.expressions.program import Program, Values, as_float
from calibrate.expressions.staged import Staged
from calibrate.expressions.syntax import Tree

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Expression:
    """A checked expression; made by :func:`parse`.

    Two expressions are equal when their texts are.  Pickling stores the text.

    Attributes
    ----------
    text : str
        As typed.
    names : tuple of str
        The names that occur, sorted, without ``pi``.
    kinks : int
        Places where the derivative may jump: one for each ``abs`` and
        ``where``, one less than its arguments for ``min`` and ``max``; equal
        parts count once, constant ones not.
    constant : float or None
        The value, if no name occurs.
    """

    text: str
    tree: Tree = field(repr=False)
    names: tuple[str, ...] = field(repr=False)
    kinks: int = field(repr=False)
    constant: float | None = field(repr=False)
    _programs: dict[tuple[tuple[str, ...], int], Program] = field(default_factory=dict, repr=False)
    _staged: dict[tuple[tuple[str, ...], int], Staged] = field(default_factory=dict, repr=False)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Expression) and other.text == self.text

    def __hash__(self) -> int:
        return hash(self.text)

    def __reduce__(self) -> tuple[Any, ...]:
        return _restore, (self.text,)

    # ----------------------------------------------------------------- values

    def value(self, values: Values) -> Array:
        """Evaluate.

        Parameters
        ----------
        values : mapping
            Array or number for every name; the arrays broadcast.  Further
            entries are ignored.

        Returns
        -------
        Array
            Of the broadcast shape of the values used, float64, not shared
            with the input.  NaN and infinity follow IEEE rules.

        Raises
        ------
        InputError
            A name has no value.
        """
        result = np.asarray(self.program((), 0)(values), dtype=np.float64)
        return np.array(np.broadcast_to(result, self._shape(values)))

    def gradient(self, values: Values, wrt: Sequence[str]) -> tuple[Array, list[Array]]:
        """Evaluate with the derivative by each name of ``wrt``, all of the broadcast shape."""
        value, slopes = self.program(tuple(wrt), 1)(values)
        shape = self._shape(values)
        return _full(value, shape), [_full(s, shape) for s in slopes]

    def hessian(self, values: Values, wrt: Sequence[str]) -> tuple[Array, list[Array], list[list[Array]]]:
        """Evaluate with first and second derivatives, all of the broadcast shape."""
        value, slopes, matrix = self.program(tuple(wrt), 2)(values)
        shape = self._shape(values)
        full = [[_full(entry, shape) for entry in row] for row in matrix]
        return _full(value, shape), [_full(s, shape) for s in slopes], full

    def program(self, wrt: tuple[str, ...], order: int = 1) -> Program:
        """Return the compiled value (order 0), with gradient (1) and Hessian (2); compiled once."""
        key = (wrt, order)
        if key not in self._programs:
            self._programs[key] = _compile(self, wrt, order)
        return self._programs[key]

    def staged(self, wrt: tuple[str, ...], order: int = 1) -> Staged:
        """Return the program in two stages, for repeated evaluation while only ``wrt`` moves; compiled once."""
        key = (wrt, order)
        if key not in self._staged:
            self._staged[key] = Staged(self.tree, wrt, order, (_restore_staged, (self.text, wrt, order)))
        return self._staged[key]

    def interpret(self, values: Values) -> Array:
        """Evaluate node by node on the syntax tree: slow, independent of graph and compiler."""
        return interpret(self.tree, values)

    # ----------------------------------------------------------------- showing

    def mathml(self, label: Callable[[str], str] | None = None, *, block: bool = False) -> str:
        """Return the formula as a ``<math>`` element; ``label`` renames what is shown."""
        return mathml(self.tree, label, block=block)

    def plain(self) -> str:
        """Return the formula on one line of Unicode text."""
        return plain(self.tree)

    def _shape(self, values: Values) -> tuple[int, ...]:
        return np.broadcast_shapes(*(as_float(values, n).shape for n in self.names))

    # ---------------------------------------------------------------- questions

    def depends_on(self, name: str) -> bool:
        """Whether the name occurs."""
        return name in self.names

    def is_linear_in(self, *names: str) -> bool:
        """Whether the expression is certainly a + sum of b·name, with a and every b free of all these names.

        Symbolic and conservative: no derivative contains a name and no
        condition of a ``where`` does.
        """
        graph = Graph()
        root = from_tree(graph, self.tree)
        conditions = [i for i in graph.below([root]) if graph.ops[i] == ">="]
        slopes = derive.gradient(graph, root, names)
        return not any(graph.depends(i, frozenset(names)) for i in [*slopes, *conditions])


def _full(value: Any, shape: tuple[int, ...]) -> Array:
    return np.array(np.broadcast_to(value, shape), dtype=np.float64)


def _compile(expression: Expression, wrt: tuple[str, ...], order: int) -> Program:
    graph = Graph()
    roots = derive.derivatives(graph, from_tree(graph, expression.tree), wrt, order)
    return Program(graph, roots, wrt, order, (_restore_program, (expression.text, wrt, order)))


def _restore(text: str) -> Expression:
    return _build(text, read(text, derived=True))


def _restore_program(text: str, wrt: tuple[str, ...], order: int) -> Program:
    return _restore(text).program(wrt, order)


def _restore_staged(text: str, wrt: tuple[str, ...], order: int) -> Staged:
    return _restore(text).staged(wrt, order)


def _build(text: str, tree: Tree) -> Expression:
    names = tuple(sorted({node.name for node in tree if node.op == "name"}))
    graph = Graph()
    root = from_tree(graph, tree)
    kinks = sum(graph.ops[i] in {"abs", "min", "max", "where"} for i in graph.below([root]))
    return Expression(text, tree, names, kinks, tree[-1].constant)


def parse(text: str) -> Expression:
    """Read and check an expression.

    Parameters
    ----------
    text : str
        At most 2,000 characters, 500 nodes and 40 levels; line breaks count
        as spaces.

    Raises
    ------
    ExpressionError
        With the ``column`` of the trouble and a message that shows it.
    """
    return _build(text, read(text, comparison=False))


@dataclass(frozen=True, slots=True)
class Comparison:
    """``left >= right`` or ``left <= right``; ``margin`` is positive where it is met.

    Attributes
    ----------
    text : str
        As typed.
    left, right : Expression
    sense : str
        ``>=`` or ``<=``.
    margin : Expression
        left - right, or right - left.
    tree : tuple
        Of the whole text, so that messages can point into it.
    """

    text: str
    left: Expression
    right: Expression
    sense: str
    margin: Expression
    tree: Tree = field(repr=False, compare=False)

    def mathml(self, label: Callable[[str], str] | None = None, *, block: bool = False) -> str:
        """Return the formula as a ``<math>`` element; ``label`` renames what is shown."""
        return mathml(self.tree, label, block=block)

    def plain(self) -> str:
        """Return the formula on one line of Unicode text."""
        return plain(self.tree)


def parse_comparison(text: str) -> Comparison:
    """Read and check a text that holds exactly one comparison, ``>=`` or ``<=``, at top level.

    Raises
    ------
    ExpressionError
        As :func:`parse`; also when there is no comparison.
    """
    tree = read(text, comparison=True)
    root = tree[-1]
    sides = [text[tree[c].start : tree[c].end] for c in root.children]
    left, right = (_restore(side) for side in sides)
    above, below = sides if root.op == ">=" else sides[::-1]
    margin = above if _is_zero(below) else f"{above} - ({below})"
    return Comparison(text, left, right, root.op, _restore(margin), tree)


def _is_zero(text: str) -> bool:
    return read(text)[-1].constant == 0.0


def constant_expression(value: float) -> Expression:
    """Return an expression that is one number.

    Raises
    ------
    ValueError
        The number is not finite.
    """
    if not math.isfinite(value):
        raise ValueError(f"{value} is not finite")
    return parse(repr(float(value)))
