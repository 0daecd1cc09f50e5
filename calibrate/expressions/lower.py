"""Rewrites powers into what numpy computes fast: products, roots and reciprocals.

A general power costs ten to forty times a product.  Whole exponents up to 8
become products, halves up to 4.5 products with a root, and ``x**p`` with
another p > 1 becomes ``x * x**(p-1)``: the power that the derivative needs
anyway.
"""

from __future__ import annotations

from collections.abc import Sequence

from calibrate.expressions.graph import Graph

_WHOLE = 8
_HALVES = 4.5


def lower(source: Graph, roots: Sequence[int]) -> tuple[Graph, list[int]]:
    """Return a graph without needless powers, and where the roots are in it."""
    target = Graph()
    at: dict[int, int] = {}
    for i in source.below(list(roots)):
        constant = source.constants[i]
        children = [at[c] for c in source.children[i]]
        if constant is not None:
            at[i] = target.constant(constant)
        elif source.ops[i] == "name":
            at[i] = target.name(source.names[i])
        elif source.ops[i] == "**" and (power := target.constants[children[1]]) is not None:
            at[i] = _power(target, children[0], power)
        else:
            at[i] = target.apply(source.ops[i], *children)
    return target, [at[r] for r in roots]


def _power(graph: Graph, x: int, p: float) -> int:
    if p == 1.0:
        return x
    if p == 0.5:
        return graph.apply("sqrt", x)
    if p < 0.0 and ((p >= -_HALVES and (2 * p).is_integer()) or (p >= -_WHOLE and p.is_integer())):
        return graph.apply("/", graph.constant(1.0), _power(graph, x, -p))
    if p.is_integer() and 0.0 < p <= _WHOLE:
        half = _power(graph, x, float(p // 2))
        square = graph.apply("*", half, half)
        return graph.apply("*", square, x) if p % 2 else square
    if (2 * p).is_integer() and 0.0 < p <= _HALVES:
        return graph.apply("*", _power(graph, x, p - 0.5), graph.apply("sqrt", x))
    if p > 1.0 and not p.is_integer():
        return graph.apply("*", x, _power(graph, x, p - 1.0))
    return graph.apply("**", x, graph.constant(p))
