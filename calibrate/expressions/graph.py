"""A graph of operations in which equal parts are one node.

Nodes are numbered; children have smaller numbers than their parents, so every
pass over a graph is a plain loop.  The constructors simplify lightly and only
in ways that keep the value: constants are folded, ``x + 0``, ``x * 1`` and
signs are absorbed.  A product with a constant 0 becomes 0; the reader of user
text asks for ``keep_zero`` so that 0·∞ stays NaN as written.
"""

from __future__ import annotations

import numpy as np

from calibrate.expressions.operations import OPERATIONS
from calibrate.expressions.syntax import Tree

# min and max are not: the earlier argument wins a tie.
_COMMUTATIVE = frozenset({"+", "*"})


class Graph:
    """Append-only store of hash-consed nodes.

    ``ops[i]``, ``children[i]`` describe node i; ``constants[i]`` is the value
    of a constant, ``names[i]`` the name of an input (empty otherwise).
    """

    def __init__(self) -> None:
        self.ops: list[str] = []
        self.children: list[tuple[int, ...]] = []
        self.constants: list[float | None] = []
        self.names: list[str] = []
        self.inputs: list[frozenset[str]] = []
        self._known: dict[tuple[object, ...], int] = {}

    def __len__(self) -> int:
        return len(self.ops)

    def _node(self, op: str, children: tuple[int, ...], constant: float | None = None, name: str = "") -> int:
        if constant is None:
            key: tuple[object, ...] = (op, children, name)
        else:
            key = (op, constant, np.signbit(constant))
        found = self._known.get(key)
        if found is None:
            found = self._known[key] = len(self.ops)
            self.ops.append(op)
            self.children.append(children)
            self.constants.append(constant)
            self.names.append(name)
            below = frozenset({name}) if name else frozenset()
            self.inputs.append(below.union(*(self.inputs[c] for c in children)))
        return found

    def constant(self, value: float) -> int:
        """A number."""
        return self._node("constant", (), float(value))

    def name(self, name: str) -> int:
        """An input."""
        return self._node("name", (), name=name)

    def is_constant(self, i: int, value: float) -> bool:
        """Whether node i is this number."""
        return self.constants[i] == value

    def apply(self, op: str, *children: int) -> int:
        """An operation, without simplification other than folding constants."""
        values = [self.constants[c] for c in children]
        if op != "where" and all(v is not None for v in values):
            with np.errstate(all="ignore"):
                result = OPERATIONS[op](*(np.float64(v) for v in values if v is not None))
            return self.constant(float(result))
        if op in _COMMUTATIVE:
            children = tuple(sorted(children))
        return self._node(op, children)

    # ------------------------------------------------- simplifying constructors

    def add(self, a: int, b: int) -> int:
        """``a + b``."""
        if self.is_constant(a, 0.0):
            return b
        if self.is_constant(b, 0.0):
            return a
        if self.ops[b] == "neg":
            return self.subtract(a, self.children[b][0])
        if self.ops[a] == "neg":
            return self.subtract(b, self.children[a][0])
        if a == b:
            return self.multiply(self.constant(2.0), a)
        return self.apply("+", a, b)

    def subtract(self, a: int, b: int) -> int:
        """``a - b``."""
        if self.is_constant(b, 0.0):
            return a
        if self.is_constant(a, 0.0):
            return self.negate(b)
        if self.ops[b] == "neg":
            return self.add(a, self.children[b][0])
        return self.apply("-", a, b)

    def negate(self, a: int) -> int:
        """``-a``."""
        if self.ops[a] == "neg":
            return self.children[a][0]
        return self.apply("neg", a)

    def multiply(self, a: int, b: int, *, keep_zero: bool = False) -> int:
        """``a * b``."""
        for one, other in ((a, b), (b, a)):
            if self.is_constant(one, 1.0):
                return other
            if self.is_constant(one, -1.0):
                return self.negate(other)
            if self.is_constant(one, 0.0) and not keep_zero:
                return self.constant(0.0)
            if self.ops[one] == "neg":
                return self.negate(self.multiply(self.children[one][0], other, keep_zero=keep_zero))
        return self.apply("*", a, b)

    def divide(self, a: int, b: int, *, keep_zero: bool = False) -> int:
        """``a / b``."""
        if self.is_constant(b, 1.0):
            return a
        if self.is_constant(a, 0.0) and not keep_zero:
            return self.constant(0.0)
        if self.ops[a] == "neg":
            return self.negate(self.divide(self.children[a][0], b, keep_zero=keep_zero))
        if self.ops[b] == "neg":
            return self.negate(self.divide(a, self.children[b][0], keep_zero=keep_zero))
        return self.apply("/", a, b)

    def power(self, a: int, b: int) -> int:
        """``a ** b``."""
        if self.is_constant(b, 0.0):
            return self.constant(1.0)
        if self.is_constant(b, 1.0):
            return a
        if self.is_constant(b, 0.5):
            return self.apply("sqrt", a)
        return self.apply("**", a, b)

    def select(self, condition: int, a: int, b: int) -> int:
        """``a`` where the condition holds, else ``b``."""
        return a if a == b else self.apply("where", condition, a, b)

    # ----------------------------------------------------------------- passes

    def depends(self, i: int, names: frozenset[str]) -> bool:
        """Whether node i contains one of the names."""
        return not self.inputs[i].isdisjoint(names)

    def below(self, roots: list[int]) -> list[int]:
        """All nodes that the roots need, children first."""
        needed = set(roots)
        for i in range(max(roots, default=-1), -1, -1):
            if i in needed:
                needed.update(self.children[i])
        return sorted(needed)


def from_tree(graph: Graph, tree: Tree) -> int:
    """Enter a syntax tree into a graph; a comparison enters as its margin.

    Returns
    -------
    int
        The root.
    """
    at: list[int] = []
    for node in tree:
        c = [at[i] for i in node.children]
        if node.constant is not None:
            at.append(graph.constant(node.constant))
        else:
            at.append(_enter(graph, node.op, node.name, c))
    return at[-1]


def _enter(graph: Graph, op: str, name: str, c: list[int]) -> int:
    match op:
        case "name":
            return graph.name(name)
        case "+":
            return graph.add(*c)
        case "-":
            return graph.subtract(*c)
        case "*":
            return graph.multiply(*c, keep_zero=True)
        case "/":
            return graph.divide(*c, keep_zero=True)
        case "**":
            return graph.power(*c)
        case "neg":
            return graph.negate(*c)
        case "pos":
            return c[0]
        case "min" | "max":
            return _balanced(graph, op, c)
        case "<=":
            return graph.apply(">=", c[1], c[0])
        case "where":
            return graph.select(*c)
        case _:
            return graph.apply(op, *c)


def _balanced(graph: Graph, op: str, terms: list[int]) -> int:
    """Pair neighbours until one is left: long lists stay shallow, and the earlier one still wins a tie."""
    while len(terms) > 1:
        paired = [graph.apply(op, *terms[i : i + 2]) for i in range(0, len(terms) - 1, 2)]
        terms = paired + terms[len(paired) * 2 :]
    return terms[0]
