"""Exact derivatives on the graph, by one backward sweep per differentiated quantity.

At kinks the derivative is that of the active branch: ``where`` follows its
condition, ``min`` and ``max`` the earlier argument on a tie, ``abs`` the sign
(+1 at 0).  The gradient of ``min``, ``max`` and ``where`` is chosen as a whole
instead of being multiplied by 0 or 1, so that an infinite slope in the
inactive branch does no harm.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from calibrate.expressions.graph import Graph


def gradient(graph: Graph, root: int, wrt: Sequence[str]) -> list[int]:
    """Return the nodes of the derivatives of ``root`` by each name of ``wrt``."""
    return _Sweeps(graph, tuple(wrt)).gradient(root)


def derivatives(graph: Graph, root: int, wrt: Sequence[str], order: int) -> list[int]:
    """Return the root, then its gradient, then the upper triangle of its Hessian by rows."""
    roots = [root]
    if order >= 1:
        roots += gradient(graph, root, wrt)
    if order >= 2:
        for i, slope in enumerate(roots[1:]):
            roots += gradient(graph, slope, wrt[i:])
    return roots


class _Sweeps:
    """Backward sweeps that share what they found below the kinks."""

    def __init__(self, graph: Graph, wrt: tuple[str, ...]) -> None:
        self.graph = graph
        self.wrt = wrt
        self.names = frozenset(wrt)
        self.known: dict[int, list[int]] = {}

    def gradient(self, root: int) -> list[int]:
        if root not in self.known:
            self.known[root] = self._sweep(root)
        return self.known[root]

    def _sweep(self, root: int) -> list[int]:
        g = self.graph
        result = [g.constant(0.0)] * len(self.wrt)
        if not g.depends(root, self.names):
            return result
        adjoints = {root: g.constant(1.0)}
        # Nodes made on the way have numbers above the root and are never visited.
        for i in range(root, -1, -1):
            adjoint = adjoints.pop(i, None)
            if adjoint is None:
                continue
            op = g.ops[i]
            if op == "name":
                place = self.wrt.index(g.names[i])
                result[place] = g.add(result[place], adjoint)
            elif op in {"min", "max", "where"}:
                for place, slope in enumerate(self._kinked(i)):
                    result[place] = g.add(result[place], g.multiply(adjoint, slope))
            else:
                for which, child in enumerate(g.children[i]):
                    if g.depends(child, self.names):
                        part = self._part(i, which, adjoint)
                        adjoints[child] = g.add(adjoints[child], part) if child in adjoints else part
        return result

    def _kinked(self, i: int) -> list[int]:
        g = self.graph
        if g.ops[i] == "where":
            condition, a, b = g.children[i]
        else:
            a, b = g.children[i]
            condition = g.apply(">=", b, a) if g.ops[i] == "min" else g.apply(">=", a, b)
        return [g.select(condition, p, q) for p, q in zip(self.gradient(a), self.gradient(b), strict=True)]

    def _part(self, i: int, which: int, s: int) -> int:
        """Return s · ∂(node i)/∂(its child ``which``)."""
        g = self.graph
        op, children = g.ops[i], g.children[i]
        a = children[0]
        match op:
            case "+":
                return s
            case "-":
                return g.negate(s) if which else s
            case "neg":
                return g.negate(s)
            case "*":
                return g.multiply(s, children[1 - which])
            case "/":
                # by the divisor: -(s/b)·(a/b); the quotient is at hand
                scaled = g.divide(s, children[1])
                return g.negate(g.multiply(scaled, i)) if which else scaled
            case "**":
                return self._power_part(i, which, s)
            case "xlogy":
                if which == 0:
                    return g.apply("xlogy", s, children[1])
                return g.divide(g.multiply(s, a), children[1])
            case _:
                return self._function_part(op, i, a, s)

    def _power_part(self, i: int, which: int, s: int) -> int:
        g = self.graph
        a, b = g.children[i]
        if which == 0:
            return g.multiply(s, g.multiply(b, g.power(a, g.subtract(b, g.constant(1.0)))))
        base = g.constants[a]
        if base is not None and base > 0.0:
            return g.multiply(s, g.multiply(g.constant(math.log(base)), i))
        return g.multiply(s, g.apply("xlogy", i, a))

    def _function_part(self, op: str, i: int, a: int, s: int) -> int:
        g = self.graph
        one = g.constant(1.0)
        match op:
            case "sqrt":
                return g.divide(g.multiply(g.constant(0.5), s), i)
            case "exp":
                return g.multiply(s, i)
            case "log":
                return g.divide(s, a)
            case "log10":
                return g.divide(g.multiply(g.constant(1.0 / math.log(10.0)), s), a)
            case "abs":
                return g.multiply(s, g.apply("sgn", a))
            case "sin":
                return g.multiply(s, g.apply("cos", a))
            case "cos":
                return g.negate(g.multiply(s, g.apply("sin", a)))
            case "tan":
                return g.multiply(s, g.add(one, g.multiply(i, i)))
            case "asin" | "acos":
                # (1-x)(1+x) keeps its digits near ±1, where 1-x² loses them
                root = g.apply("sqrt", g.multiply(g.subtract(one, a), g.add(one, a)))
                return g.negate(g.divide(s, root)) if op == "acos" else g.divide(s, root)
            case "atan":
                return g.divide(s, g.add(one, g.multiply(a, a)))
            case "tanh":
                return g.multiply(s, g.apply("sech2", a))
            case "sech2":
                slope = g.multiply(g.multiply(g.constant(-2.0), g.apply("tanh", a)), i)
                return g.multiply(s, slope)
            case _:
                # sgn and comparisons are flat wherever they have a derivative
                assert op in {"sgn", ">="}
                return g.constant(0.0)
