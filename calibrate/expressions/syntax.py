"""The syntax tree of an expression, as a flat list, and the words of the language."""

from __future__ import annotations

import keyword
from dataclasses import dataclass

MAX_CHARACTERS = 2000
MAX_NODES = 500
MAX_DEPTH = 40
MAX_EXPONENT = 20.0
MAX_NAME = 40

# Functions with the least and the largest number of arguments.
FUNCTIONS: dict[str, tuple[int, int]] = dict.fromkeys(
    ("sqrt", "exp", "log", "log10", "abs", "sin", "cos", "tan", "asin", "acos", "atan", "tanh"), (1, 1)
) | {"min": (2, MAX_NODES), "max": (2, MAX_NODES), "where": (3, 3)}

# Python would read these as numbers that are not finite.
NOT_FINITE = frozenset({"nan", "NaN", "NAN", "inf", "Inf", "INF", "infinity", "Infinity"})

RESERVED_NAMES: frozenset[str] = frozenset(FUNCTIONS) | {"pi"} | frozenset(keyword.kwlist) | NOT_FINITE


@dataclass(frozen=True, slots=True)
class Node:
    """One node of a syntax tree.

    Parameters
    ----------
    op : str
        ``number``, ``name``, ``pi``, ``neg``, ``pos``, ``+ - * / **``, a
        function, or a comparison ``>=`` or ``<=``.
    children : tuple of int
        Places in the tree; always smaller than the node's own place.
    start, end : int
        ``text[start:end]`` is what the user wrote, brackets included.
    name : str
        Of a name; the digits of a number.
    constant : float or None
        The value, where no name occurs below.
    """

    op: str
    children: tuple[int, ...]
    start: int
    end: int
    name: str = ""
    constant: float | None = None


Tree = tuple[Node, ...]
"""Nodes in post-order: children before parents, the root last."""
