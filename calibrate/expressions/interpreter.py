"""The reference path: a syntax tree evaluated node by node, as written."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.expressions.operations import OPERATIONS
from calibrate.expressions.program import Values, as_float
from calibrate.expressions.syntax import Tree


def interpret(tree: Tree, values: Values) -> npt.NDArray[np.float64]:
    """Return the value of a tree for arrays or numbers by name."""
    at: list[Any] = []
    with np.errstate(all="ignore"):
        for node in tree:
            parts = [at[c] for c in node.children]
            if node.op == "name":
                at.append(as_float(values, node.name))
            elif not parts:
                at.append(np.float64(node.constant))
            elif node.op in {"min", "max"}:
                at.append(functools.reduce(OPERATIONS[node.op], parts))
            else:
                at.append(OPERATIONS[node.op](*parts))
    return np.asarray(at[-1], dtype=np.float64)
