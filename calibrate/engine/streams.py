"""Random streams keyed by what they are for, never by the order in which work happens to run."""

from __future__ import annotations

import hashlib
from functools import lru_cache

import numpy as np


def stream(seed: int, *purpose: str | int) -> np.random.Generator:
    """Return the generator that belongs to a purpose.

    Parameters
    ----------
    seed : int
        The study's seed, at least 0.
    *purpose : str or int
        What the draw is for, for example ``"bootstrap", "f_u", 17``. Different purposes give independent streams;
        integers are at least 0.

    Notes
    -----
    The stream is that of a child of ``numpy.random.SeedSequence(seed)`` whose spawn key encodes the purpose, as
    :meth:`numpy.random.SeedSequence.spawn` encodes the index of a child.
    """
    key = tuple(word for part in purpose for word in _words(part))
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=key))


@lru_cache(maxsize=256)
def _words(part: str | int) -> tuple[int, ...]:
    # A leading mark keeps texts and numbers, and neighbours of different length, apart.
    if isinstance(part, str):
        digest = hashlib.sha256(part.encode()).digest()
        return (1, *(int.from_bytes(digest[i : i + 4], "little") for i in range(0, 16, 4)))
    if part < 0:
        raise ValueError(f"A purpose must be a text or a whole number of at least 0; got {part}.")
    words = []
    while part:
        words.append(part & 0xFFFFFFFF)
        part >>= 32
    return (2, len(words), *words)
