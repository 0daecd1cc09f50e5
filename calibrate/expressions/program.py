"""A graph becomes one straight-line numpy function.

The source is generated from node numbers only: inputs are ``a0, a1, ...``,
shared parts ``v7``, operations come from a fixed table, constants from
``repr(float)``.  No user text is in it.  Parts used once are written in place,
so numpy frees their buffers at once; shared parts are computed once.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions.graph import Graph
from calibrate.expressions.lower import lower
from calibrate.expressions.operations import OPERATIONS

Values = Mapping[str, Any]

_TEMPLATES = {
    "+": "({} + {})",
    "-": "({} - {})",
    "*": "({} * {})",
    "/": "({} / {})",
    "neg": "(-{})",
    ">=": "({} >= {})",
}
_CALLS = {op: op for op in OPERATIONS if op.isidentifier()} | {"**": "power", "where": "select"}
# Deeper than this, a part gets a name of its own: Python's compiler nests only so far.
_INLINE_DEPTH = 20


def compile_graph(
    graph: Graph, roots: Sequence[int]
) -> tuple[Callable[..., tuple[Any, ...]], tuple[str, ...]]:
    """Return a function of the inputs that gives the roots, and the names of the inputs in order.

    Roots that are constant come back as Python floats.
    """
    source, names = _source(*lower(graph, roots))
    space: dict[str, Any] = {name: OPERATIONS[op] for op, name in _CALLS.items()}
    space |= {"__builtins__": {}, "inf": np.inf, "nan": np.nan}
    exec(compile(source, "<expression>", "exec"), space)  # noqa: S102 - generated text, see above
    function: Callable[..., tuple[Any, ...]] = space["program"]
    return function, names


def _source(graph: Graph, roots: Sequence[int]) -> tuple[str, tuple[str, ...]]:
    needed = graph.below(list(roots))
    uses = dict.fromkeys(needed, 0)
    for used in (roots, *(graph.children[i] for i in needed)):
        for i in used:
            uses[i] += 1
    names = tuple(sorted(graph.names[i] for i in needed if graph.names[i]))
    text: dict[int, str] = {}
    depth: dict[int, int] = {}
    lines = [f"def program({', '.join(f'a{k}' for k in range(len(names)))}):"]
    for i in needed:
        constant = graph.constants[i]
        depth[i] = 0
        if constant is not None:
            text[i] = f"({constant!r})" if np.signbit(constant) else repr(constant)
            continue
        if graph.names[i]:
            text[i] = f"a{names.index(graph.names[i])}"
            continue
        parts = [text[c] for c in graph.children[i]]
        op = graph.ops[i]
        written = _TEMPLATES[op].format(*parts) if op in _TEMPLATES else f"{_CALLS[op]}({', '.join(parts)})"
        depth[i] = 1 + max(depth[c] for c in graph.children[i])
        if uses[i] > 1 or depth[i] > _INLINE_DEPTH:
            lines.append(f"    v{i} = {written}")
            written, depth[i] = f"v{i}", 0
        text[i] = written
    lines.append(f"    return ({', '.join(text[r] for r in roots)},)")
    return "\n".join(lines), names


class Program:
    """A compiled expression; call it with a mapping from name to float64 array or number.

    Order 0 returns the value; order 1 ``(value, gradient)``; order 2
    ``(value, gradient, hessian)`` with the gradient a list by ``wrt`` and the
    Hessian a list of lists, symmetric entries being the same object.

    Nothing is broadcast: an entry has the shape of the inputs that it depends
    on, and one that depends on none is a Python float (0.0 where the
    derivative vanishes).  The arrays may be shared between entries and with
    the inputs; do not write to them.  NaN and infinity come without warnings.

    Pickling stores the text and compiles again on loading.
    """

    __slots__ = ("_function", "_inputs", "_recipe", "order", "wrt")

    def __init__(
        self, graph: Graph, roots: Sequence[int], wrt: tuple[str, ...], order: int, recipe: tuple[Any, ...]
    ) -> None:
        self.wrt = wrt
        self.order = order
        self._function, self._inputs = compile_graph(graph, roots)
        self._recipe = recipe

    def __reduce__(self) -> tuple[Any, ...]:
        return self._recipe

    def __call__(self, values: Values) -> Any:
        """Evaluate; see the class for what comes back."""
        with np.errstate(all="ignore"):
            out = self._function(*[as_float(values, name) for name in self._inputs])
        if self.order == 0:
            return out[0]
        m = len(self.wrt)
        slopes = list(out[1 : m + 1])
        if self.order == 1:
            return out[0], slopes
        matrix: list[list[Any]] = [[None] * m for _ in range(m)]
        k = m + 1
        for i in range(m):
            for j in range(i, m):
                matrix[i][j] = matrix[j][i] = out[k]
                k += 1
        return out[0], slopes, matrix


def as_float(values: Values, name: str) -> Any:
    """Return the value of a name as float64 array or scalar."""
    try:
        value = values[name]
    except KeyError:
        hint = did_you_mean(name, sorted(values))
        raise InputError(Problem(f"no value is given for '{name}'.", suggestion=hint)) from None
    if isinstance(value, np.ndarray) and value.dtype.char == "d":
        return value
    return np.asarray(value, dtype=np.float64)[()]
