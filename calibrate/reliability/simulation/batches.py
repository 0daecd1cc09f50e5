"""Cuts the samples of many situations into blocks of columns that are evaluated together.

What a situation draws and in which order its samples are added depends on that situation alone: samples come in
pieces of a fixed largest size, and sums are taken over cells of a fixed size, added one after the other.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Counts = npt.NDArray[np.int64]

CELL = 32
"""Samples whose sum is formed in one go; every number of samples is a multiple of it."""

FRESH = 3
"""Places of each cell that have a uniform number of their own also where the others are evenly spread."""

# Samples drawn in one go.
PIECE = 4096
# Columns evaluated together: larger blocks leave the cache, smaller ones pay for the calls.
BLOCK = 12_288


@dataclass(frozen=True, slots=True, eq=False)
class Block:
    """Pieces that are evaluated together.

    Attributes
    ----------
    owner : int array (pieces,)
        Situation of each piece.
    size : int array (pieces,)
        Its number of samples.
    first : int array (pieces,)
        Number of the situation's samples of this round before the piece.
    """

    owner: Counts
    size: Counts
    first: Counts

    @property
    def columns(self) -> Counts:
        """Situation of each sample."""
        return np.repeat(self.owner, self.size)

    def of(self, values: npt.NDArray[Any]) -> npt.NDArray[Any]:
        """Return what belongs to each sample, (..., k), of what belongs to each situation, (..., n)."""
        # Runs of equal values are repeated several times faster than they are looked up one by one.
        return np.repeat(np.take(values, self.owner, axis=-1), self.size, axis=-1)

    @property
    def cells(self) -> tuple[Counts, Counts]:
        """Situation of each cell, and which one it is of the situation's cells of this round."""
        count = self.size // CELL
        ends = np.cumsum(count)
        within = np.arange(ends[-1]) - np.repeat(ends - count, count)
        return np.repeat(self.owner, count), within + np.repeat(self.first // CELL, count)


def blocks(at: Counts, sizes: Counts) -> Iterator[Block]:
    """Return the blocks of a round, in order.

    Parameters
    ----------
    at : int array
        Situations that take part.
    sizes : int array
        Samples of each, multiples of ``CELL``.
    """
    pieces = -(-sizes // PIECE)
    owner = np.repeat(at, pieces)
    order = np.arange(owner.size) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    first = order * PIECE
    size = np.minimum(np.repeat(sizes, pieces) - first, PIECE)
    ends = np.cumsum(size)
    start = 0
    while start < owner.size:
        before = ends[start] - size[start]
        stop = max(start + 1, int(np.searchsorted(ends, before + BLOCK, side="right")))
        yield Block(owner[start:stop], size[start:stop], first[start:stop])
        start = stop


def rounded(samples: npt.NDArray[np.float64]) -> Counts:
    """Return the numbers of samples rounded up to whole cells."""
    return np.asarray(np.ceil(samples / CELL), dtype=np.int64) * CELL


def keep_memory() -> None:
    """Let the C library keep the memory of blocks for the next block.

    glibc gives pieces back to the system above a size that adapts to the largest one freed so far. Below it, arrays
    of every block would come page by page from the system again, which takes half as long as all the work on them.
    """
    # 16 MB that are never touched.
    np.empty(2_000_000)
