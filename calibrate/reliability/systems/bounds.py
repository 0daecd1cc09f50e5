"""Bounds of the probability of a union, from the probabilities of its events and of their pairs."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.rows import add_rows

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]


def simple_bounds(single: Array, associated: Flags | bool = False) -> tuple[Array, Array]:
    """Return the uni-modal bounds of a union.

    Parameters
    ----------
    single : array (c, n)
        Probabilities of the events.
    associated : bool array (n,) or bool
        Whether the events are known to be positively dependent: margins with correlations of at least 0 and events
        that fail together. Independence is then the upper bound; otherwise it is the sum.
    """
    lower = np.max(single, axis=0)
    # 1 - (1 - p1)(1 - p2)... in the tail.
    with np.errstate(divide="ignore"):
        independent = -np.expm1(add_rows(np.log1p(-np.minimum(single, 1.0))))
    upper = np.where(associated, independent, np.minimum(add_rows(single), 1.0))
    return lower, np.maximum(upper, lower)


def ditlevsen_bounds(single: Array, pair: Array) -> tuple[Array, Array]:
    """Return the bi-modal bounds of a union.

    Parameters
    ----------
    single : array (c, n)
        Probabilities of the events.
    pair : array (c, c, n)
        Probabilities of two events together; the diagonal is not used.

    Notes
    -----
    O. Ditlevsen, "Narrow reliability bounds for structural systems", Journal of Structural Mechanics 7 (1979) 453-472
    (from memory). Both depend on the order of the events. The best upper bound over all orders subtracts the
    heaviest tree of pairs (D. Hunter, Journal of Applied Probability 13 (1976)). The lower one is the best over the
    order of falling probability, and those that begin with each other event and continue so.
    """
    upper = np.minimum(add_rows(single) - _heaviest_tree(pair), 1.0)
    c, n = single.shape
    falling = np.argsort(-single, axis=0, kind="stable")
    lower = np.zeros(n)
    for begin in range(c):
        # Event ``begin`` moves to the front, those before it step back.
        place = np.arange(c)[:, None]
        moved = np.where(place == 0, begin, np.where(place <= begin, place - 1, place))
        order = np.take_along_axis(falling, np.broadcast_to(moved, (c, n)), axis=0)
        lower = np.maximum(lower, _lower(single, pair, order))
    return lower, np.maximum(upper, lower)


def _lower(single: Array, pair: Array, order: npt.NDArray[np.intp]) -> Array:
    c, n = single.shape
    column = np.arange(n)
    total = single[order[0], column]
    for i in range(1, c):
        rest = single[order[i], column]
        for j in range(i):
            rest = rest - pair[order[i], order[j], column]
        total = total + np.maximum(rest, 0.0)
    return np.asarray(total)


def _heaviest_tree(pair: Array) -> Array:
    """Return the largest sum of pairs that form a tree, by the algorithm of R. C. Prim."""
    c, _, n = pair.shape
    column = np.arange(n)
    reached = np.zeros((c, n), dtype=np.bool_)
    reached[0] = True
    best = np.array(pair[0])
    total = np.zeros(n)
    for _ in range(c - 1):
        open_ones = np.where(reached, -np.inf, best)
        pick = np.argmax(open_ones, axis=0)
        total = total + open_ones[pick, column]
        reached[pick, column] = True
        best = np.maximum(best, pair[pick, :, column].T)
    return total
