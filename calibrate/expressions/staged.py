"""Splits an expression into what is fixed and what moves, for loops that evaluate it again and again.

Reliability analysis evaluates a limit state many times while only the basic
variables move; what depends on the situation alone is worth computing once.
Products are regrouped first, so that their fixed factors become one: results
differ from those of a plain program by rounding only.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from calibrate.expressions.derive import derivatives
from calibrate.expressions.graph import Graph, from_tree
from calibrate.expressions.lower import lower
from calibrate.expressions.program import Routine, Values, arranged, as_float
from calibrate.expressions.syntax import Tree


class Staged:
    """An expression in two stages: :meth:`fixed` once, then a call for each set of moving values.

    Attributes
    ----------
    wrt : tuple of str
        The names that move, and by which is differentiated.
    """

    __slots__ = ("_first", "_order", "_recipe", "_second", "wrt")

    def __init__(self, tree: Tree, wrt: tuple[str, ...], order: int, recipe: tuple[Any, ...]) -> None:
        self.wrt = wrt
        self._order = order
        self._recipe = recipe
        moving = frozenset(wrt)
        graph, root = _regroup(tree, moving)
        graph, roots = lower(graph, derivatives(graph, root, wrt, order))
        hoisted = _border(graph, roots, moving)
        self._first = Routine(graph, hoisted)
        second, roots = _cut(graph, roots, hoisted)
        self._second = Routine(second, roots, [*wrt, *(_slot(k) for k in range(len(hoisted)))])

    def __reduce__(self) -> tuple[Any, ...]:
        return self._recipe

    def fixed(self, values: Values) -> tuple[Any, ...]:
        """Evaluate what does not depend on ``wrt``.

        Returns
        -------
        tuple
            Arrays and scalars with the shapes of the inputs that they depend
            on; to use them for some situations only, index the arrays.
        """
        return self._first([as_float(values, name) for name in self._first.names])

    def __call__(self, moving: Sequence[Any], fixed: Sequence[Any]) -> Any:
        """Evaluate as :class:`Program` does.

        Parameters
        ----------
        moving : sequence
            float64 arrays (or numpy scalars) in order of ``wrt``; the rows of
            an array of shape (len(wrt), n) will do.
        fixed : sequence
            From :meth:`fixed`.
        """
        return arranged(self._second([*moving, *fixed]), len(self.wrt), self._order)


def _slot(k: int) -> str:
    """Return the name of a fixed part; no user name can be the same."""
    return f"#{k}"


def _border(graph: Graph, roots: Sequence[int], moving: frozenset[str]) -> list[int]:
    """Return the fixed nodes, constants apart, that moving ones or the result use."""
    used = set(roots)
    for i in graph.below(list(roots)):
        if graph.depends(i, moving):
            used.update(graph.children[i])
    return sorted(i for i in used if graph.constants[i] is None and not graph.depends(i, moving))


def _cut(graph: Graph, roots: Sequence[int], hoisted: Sequence[int]) -> tuple[Graph, list[int]]:
    """Copy the part above the border; what lies on it becomes an input."""
    target = Graph()
    slots = {i: _slot(k) for k, i in enumerate(hoisted)}
    at: dict[int, int] = {}
    for i in graph.below(list(roots)):
        constant = graph.constants[i]
        if i in slots or graph.names[i]:
            at[i] = target.name(slots.get(i, graph.names[i]))
        elif constant is not None:
            at[i] = target.constant(constant)
        else:
            at[i] = target.apply(graph.ops[i], *(at[c] for c in graph.children[i]))
    return target, [at[r] for r in roots]


@dataclass(frozen=True, slots=True)
class _Term:
    """``fixed * above / below``; None stands for 1."""

    fixed: int | None = None
    above: int | None = None
    below: int | None = None


def _regroup(tree: Tree, moving: frozenset[str]) -> tuple[Graph, int]:
    """Enter a tree into a new graph with the fixed factors of each product gathered."""
    source, graph = Graph(), Graph()
    root = from_tree(source, tree)
    writer = _Writer(graph)
    at: dict[int, _Term] = {}
    for i in source.below([root]):
        constant = source.constants[i]
        if constant is not None:
            at[i] = _Term(fixed=graph.constant(constant))
        elif source.names[i]:
            node = graph.name(source.names[i])
            at[i] = _Term(above=node) if source.names[i] in moving else _Term(fixed=node)
        else:
            at[i] = writer.combine(
                source.ops[i], [at[c] for c in source.children[i]], source.depends(i, moving)
            )
    return graph, writer.whole(at[root])


class _Writer:
    def __init__(self, graph: Graph) -> None:
        self.graph = graph

    def whole(self, term: _Term) -> int:
        """Return the term as one node."""
        top = self._times(term.above, term.fixed)
        if term.below is None:
            return self.graph.constant(1.0) if top is None else top
        return self._over(top, term.below)

    def combine(self, op: str, terms: list[_Term], moves: bool) -> _Term:
        g = self.graph
        a = terms[0]
        if moves and op == "*":
            b = terms[1]
            return _Term(
                self._times(a.fixed, b.fixed), self._times(a.above, b.above), self._times(a.below, b.below)
            )
        if moves and op == "/":
            b = terms[1]
            fixed = a.fixed if b.fixed is None else self._over(a.fixed, b.fixed)
            return _Term(fixed, self._times(a.above, b.below), self._times(a.below, b.above))
        if moves and op == "neg" and a.fixed is not None:
            return _Term(g.negate(a.fixed), a.above, a.below)
        if moves and op == "**" and (whole := self._whole_power(a, terms[1])):
            return whole
        nodes = [self.whole(t) for t in terms]
        match op:
            case "+":
                node = g.add(*nodes)
            case "-":
                node = g.subtract(*nodes)
            case "*":
                node = g.multiply(*nodes, keep_zero=True)
            case "/":
                node = g.divide(*nodes, keep_zero=True)
            case "neg":
                node = g.negate(*nodes)
            case "**":
                node = g.power(*nodes)
            case _:
                node = g.apply(op, *nodes)
        return _Term(above=node) if moves else _Term(fixed=node)

    def _whole_power(self, base: _Term, exponent: _Term) -> _Term | None:
        """Distribute a whole exponent over the factors."""
        g = self.graph
        power = None if exponent.fixed is None else g.constants[exponent.fixed]
        if (
            power is None
            or not power.is_integer()
            or exponent.above is not None
            or exponent.below is not None
        ):
            return None
        node = g.constant(power)
        parts = [None if p is None else g.power(p, node) for p in (base.fixed, base.above, base.below)]
        return _Term(*parts)

    def _times(self, a: int | None, b: int | None) -> int | None:
        if a is None or b is None:
            return b if a is None else a
        return self.graph.multiply(a, b, keep_zero=True)

    def _over(self, a: int | None, b: int) -> int:
        return self.graph.divide(self.graph.constant(1.0) if a is None else a, b, keep_zero=True)
