"""Compiled expressions: value, gradient and Hessian for arrays by name."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions.codegen import Function, compile_graph
from calibrate.expressions.graph import Graph
from calibrate.expressions.lower import lower

Values = Mapping[str, Any]

# Below this many elements, telling numpy where to write costs more than it saves.
_LONG = 1024


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

    __slots__ = ("_recipe", "_routine", "order", "wrt")

    def __init__(
        self, graph: Graph, roots: Sequence[int], wrt: tuple[str, ...], order: int, recipe: tuple[Any, ...]
    ) -> None:
        self.wrt = wrt
        self.order = order
        self._routine = Routine(graph, roots)
        self._recipe = recipe

    def __reduce__(self) -> tuple[Any, ...]:
        return self._recipe

    def __call__(self, values: Values) -> Any:
        """Evaluate; see the class for what comes back."""
        out = self._routine([as_float(values, name) for name in self._routine.names])
        return arranged(out, len(self.wrt), self.order)


class Routine:
    """The roots of a graph as a function of the inputs in order of ``names``."""

    __slots__ = ("_functions", "_graph", "_roots", "names")

    def __init__(self, graph: Graph, roots: Sequence[int], names: Sequence[str] | None = None) -> None:
        self._graph, self._roots = lower(graph, roots)
        below = self._graph.below(self._roots)
        used = sorted(self._graph.names[i] for i in below if self._graph.names[i])
        self.names = tuple(used if names is None else names)
        self._functions: dict[frozenset[str], Function] = {}

    def __call__(self, arguments: Sequence[Any]) -> tuple[Any, ...]:
        """Evaluate for float64 arrays or numpy scalars, without warnings."""
        full = _full_inputs(self.names, arguments)
        function = self._functions.get(full)
        if function is None:
            function = self._functions[full] = compile_graph(self._graph, self._roots, self.names, full)
        with np.errstate(all="ignore"):
            return function(*arguments)


def arranged(out: Sequence[Any], m: int, order: int) -> Any:
    """Sort the roots into value, gradient and symmetric Hessian."""
    if order == 0:
        return out[0]
    slopes = list(out[1 : m + 1])
    if order == 1:
        return out[0], slopes
    matrix: list[list[Any]] = [[None] * m for _ in range(m)]
    rest = iter(out[m + 1 :])
    for i in range(m):
        for j in range(i, m):
            matrix[i][j] = matrix[j][i] = next(rest)
    return out[0], slopes, matrix


def _full_inputs(names: Sequence[str], arguments: Sequence[Any]) -> frozenset[str]:
    """Return the names of the arrays if all have one shape and are long, else none."""
    shapes = {value.shape for value in arguments if value.ndim}
    if len(shapes) != 1 or math.prod(*shapes) < _LONG:
        return frozenset()
    return frozenset(name for name, value in zip(names, arguments, strict=True) if value.ndim)


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
