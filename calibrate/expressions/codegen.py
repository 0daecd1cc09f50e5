"""A graph becomes straight-line numpy source, then a function.

The source is generated from node numbers only: inputs are ``a0, a1, ...``,
parts ``v7``, operations come from a fixed table, constants from
``repr(float)``.  No user text is in it.

Most of the time of a cheap expression goes into memory for intermediate
arrays, so the source is made for a given set of inputs that are arrays of one
shape, the rest being scalars: each operation then writes into a buffer that is
no longer needed, if there is one.  Without such knowledge (arrays that
broadcast against each other) operations are nested and numpy allocates.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from calibrate.expressions.graph import Graph
from calibrate.expressions.operations import OPERATIONS

Function = Callable[..., tuple[Any, ...]]

_INFIX = {"+": "+", "-": "-", "*": "*", "/": "/", ">=": ">="}
_CALLS = {op: op for op in OPERATIONS if op.isidentifier()} | {
    "**": "power",
    "where": "select",
    "+": "add",
    "-": "subtract",
    "*": "multiply",
    "/": "divide",
    ">=": "reaches",
}
# These make an array of their own, whatever is free.
_OWN_BUFFER = frozenset({"where", "sech2", ">="})
# Deeper than this, a part gets a name of its own: Python's compiler nests only so far.
_INLINE_DEPTH = 20


def compile_graph(graph: Graph, roots: Sequence[int], names: Sequence[str], full: frozenset[str]) -> Function:
    """Return a function of the inputs ``names`` that gives the roots.

    ``full`` are the inputs that are arrays, all of one shape; the others must
    then be scalars.  With none, every input may have any shape.  Roots that
    are constant come back as Python floats.
    """
    source = _Writer(graph, list(roots), list(names), full).source()
    space: dict[str, Any] = {name: OPERATIONS[op] for op, name in _CALLS.items()}
    space |= {"__builtins__": {}, "inf": np.inf, "nan": np.nan}
    exec(compile(source, "<expression>", "exec"), space)  # noqa: S102 - generated text, see above
    function: Function = space["program"]
    return function


class _Writer:
    """Writes one function; keeps account of which buffers are free."""

    def __init__(self, graph: Graph, roots: list[int], names: list[str], full: frozenset[str]) -> None:
        self.graph = graph
        self.roots = roots
        self.names = names
        self.full = full
        self.needed = graph.below(roots)
        self.uses = dict.fromkeys(self.needed, 0)
        for used in (roots, *(graph.children[i] for i in self.needed)):
            for i in used:
                self.uses[i] += 1
        self.text: dict[int, str] = {}
        self.depth: dict[int, int] = {}
        self.owned: set[int] = set()
        self.free: list[str] = []
        self.lines = [f"def program({', '.join(f'a{k}' for k in range(len(names)))}):"]

    def source(self) -> str:
        """Return the whole text."""
        g = self.graph
        for i in self.needed:
            constant = g.constants[i]
            self.depth[i] = 0
            if constant is not None:
                self.text[i] = f"({constant!r})" if np.signbit(constant) else repr(constant)
            elif g.names[i]:
                self.text[i] = f"a{self.names.index(g.names[i])}"
            elif g.depends(i, self.full):
                self._statement(i)
            else:
                self._nested(i)
        results = "".join(f"{self.text[r]}, " for r in self.roots)
        return "\n".join([*self.lines, f"    return ({results})", ""])

    def _nested(self, i: int) -> None:
        op, children = self.graph.ops[i], self.graph.children[i]
        parts = [self.text[c] for c in children]
        if op == "neg":
            written = f"(-{parts[0]})"
        elif op in _INFIX:
            written = f"({parts[0]} {_INFIX[op]} {parts[1]})"
        else:
            written = f"{_CALLS[op]}({', '.join(parts)})"
        depth = 1 + max(self.depth[c] for c in children)
        if self.uses[i] > 1 or depth > _INLINE_DEPTH:
            self.lines.append(f"    v{i} = {written}")
            written, depth = f"v{i}", 0
        self.text[i], self.depth[i] = written, depth

    def _statement(self, i: int) -> None:
        op, children = self.graph.ops[i], self.graph.children[i]
        arguments = ", ".join(self.text[c] for c in children)
        for c in children:
            self.uses[c] -= 1
            if self.uses[c] == 0 and c in self.owned:
                self.free.append(self.text[c])
        if op not in _OWN_BUFFER and self.free:
            # numpy reserves the third position of these two for more arguments
            arguments += f", {'out=' if op in {'min', 'max'} else ''}{self.free.pop()}"
        self.lines.append(f"    v{i} = {_CALLS[op]}({arguments})")
        self.text[i] = f"v{i}"
        if op != ">=":
            self.owned.add(i)
