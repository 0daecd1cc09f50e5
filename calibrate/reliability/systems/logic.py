"""When a system fails, in terms of its components: minimal cut sets, path sets, and the margin of the system."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import reduce
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, Problem
from calibrate.expressions.logic_parser import Gate, LogicTree, read_logic

Array = npt.NDArray[np.float64]
Sets: TypeAlias = frozenset[frozenset[int]]

MOST_SETS = 200
"""Largest number of cut sets or path sets."""


@dataclass(frozen=True, slots=True)
class FailureLogic:
    """A coherent system; made by :func:`failure_logic`.

    Attributes
    ----------
    names : tuple of str
        The components in the order in which the text names them first; everywhere else component i is names[i].
    tree : LogicTree
        Names, and gates ``and`` and ``or``.
    cut_sets : tuple of tuple of int
        The minimal sets of components whose common failure makes the system fail, small ones first.
    path_sets : tuple of tuple of int
        The minimal sets of components that keep the system safe as long as they all hold.
    """

    names: tuple[str, ...]
    tree: LogicTree
    cut_sets: tuple[tuple[int, ...], ...]
    path_sets: tuple[tuple[int, ...], ...]

    @property
    def is_series(self) -> bool:
        """Whether the failure of any one component suffices."""
        return all(len(s) == 1 for s in self.cut_sets)

    @property
    def is_parallel(self) -> bool:
        """Whether all components must fail."""
        return len(self.cut_sets) == 1

    @property
    def text(self) -> str:
        """The logic in plain words, with brackets around every group inside another."""
        return _text(self.tree, outermost=True)

    def margin(self, g: Sequence[Array]) -> Array:
        """Return the limit state of the system: the least of ``or``, the greatest of ``and``.

        Parameters
        ----------
        g : sequence of array
            Limit state of each component, positive where it holds; their shapes broadcast.
        """
        return self.active(g)[0]

    def active(self, g: Sequence[Array]) -> tuple[Array, npt.NDArray[np.intp]]:
        """Return the limit state of the system, and which component it is; of equal ones the earlier."""
        at = {name: i for i, name in enumerate(self.names)}
        rows = {name: np.asarray(g[i], dtype=np.float64) for name, i in at.items()}
        return _active(self.tree, rows, at)

    def fails(self, failed: Sequence[npt.ArrayLike]) -> npt.NDArray[np.bool_]:
        """Return whether the system fails, given whether each component does; shapes broadcast."""
        margins = [np.where(np.asarray(f, dtype=np.bool_), -1.0, 1.0) for f in failed]
        return np.asarray(self.margin(margins) < 0.0)


def failure_logic(text: str, known: Sequence[str] | None = None) -> FailureLogic:
    """Read when a system fails, as in ``"yielding or (slip and rupture)"``.

    Parameters
    ----------
    text : str
        Names of components, ``and``, ``or``, round brackets.
    known : sequence of str, optional
        The names that may occur.

    Raises
    ------
    ExpressionError
        The text is not a failure logic; the message has the column.
    InputError
        The system has more than 200 cut sets or path sets.
    """
    tree = read_logic(text, known)
    names = tuple(dict.fromkeys(_names(tree)))
    at = {name: i for i, name in enumerate(names)}
    return FailureLogic(names, tree, _sorted(_expanded(tree, at, "or")), _sorted(_expanded(tree, at, "and")))


def series(names: Sequence[str]) -> FailureLogic:
    """Return the system that fails with any of its components."""
    return failure_logic(" or ".join(names), names)


def parallel(names: Sequence[str]) -> FailureLogic:
    """Return the system that fails when all of its components do."""
    return failure_logic(" and ".join(names), names)


def absorbed(sets: Iterable[frozenset[int]]) -> Sets:
    """Return the sets that contain no other one of them."""
    kept: list[frozenset[int]] = []
    for candidate in sorted(set(sets), key=lambda s: (len(s), sorted(s))):
        if not any(k <= candidate for k in kept):
            kept.append(candidate)
    return frozenset(kept)


def _names(tree: LogicTree) -> list[str]:
    return [tree] if isinstance(tree, str) else [name for item in tree.inputs for name in _names(item)]


def _text(tree: LogicTree, outermost: bool = False) -> str:
    if isinstance(tree, str):
        return tree
    text = f" {tree.word} ".join(_text(item) for item in tree.inputs)
    return text if outermost else f"({text})"


def _expanded(tree: LogicTree, at: Mapping[str, int], union: str) -> Sets:
    """Return the minimal sets; ``union`` is the gate that collects sets, while the other one merges them."""
    if isinstance(tree, str):
        return frozenset({frozenset({at[tree]})})
    parts = [_expanded(item, at, union) for item in tree.inputs]
    found = parts[0]
    for part in parts[1:]:
        found = absorbed(found | part if tree.word == union else {a | b for a in found for b in part})
        if len(found) > MOST_SETS:
            kind = "cut sets" if union == "or" else "path sets"
            raise InputError(
                Problem(
                    f"The system has more than {MOST_SETS} {kind}.",
                    suggestion="Combine components beforehand, or study parts of the system on their own.",
                )
            )
    return found


def _sorted(sets: Sets) -> tuple[tuple[int, ...], ...]:
    return tuple(sorted((tuple(sorted(s)) for s in sets), key=lambda s: (len(s), s)))


def _active(
    tree: LogicTree, rows: Mapping[str, Array], at: Mapping[str, int]
) -> tuple[Array, npt.NDArray[np.intp]]:
    if isinstance(tree, str):
        return rows[tree], np.full(rows[tree].shape, at[tree], dtype=np.intp)

    def better(
        a: tuple[Array, npt.NDArray[np.intp]], b: tuple[Array, npt.NDArray[np.intp]]
    ) -> tuple[Array, npt.NDArray[np.intp]]:
        least = tree.word == "or"
        chosen = b[0] < a[0] if least else b[0] > a[0]
        # A value that is not a number is no margin of the system either.
        value = np.minimum(a[0], b[0]) if least else np.maximum(a[0], b[0])
        return np.asarray(value), np.where(chosen, b[1], a[1])

    assert isinstance(tree, Gate)
    return reduce(better, (_active(item, rows, at) for item in tree.inputs))
