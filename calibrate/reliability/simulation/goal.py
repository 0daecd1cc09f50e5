"""What is wanted of each situation, and where its random numbers come from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from calibrate.engine import stream


@dataclass(frozen=True, slots=True)
class Goal:
    """What is wanted of each situation.

    Attributes
    ----------
    cov : float
        Coefficient of variation of the estimate.
    most : int
        Evaluations of the limit state.
    confidence : float
        Confidence of the intervals.
    seed : int
        Seed of the random streams.
    purpose : str
        What the draws are for.
    """

    cov: float
    most: int
    confidence: float
    seed: int
    purpose: str

    def generator(self, method: str, key: int, *further: int) -> np.random.Generator:
        """Return the stream that belongs to a situation."""
        return stream(self.seed, self.purpose, method, key, *further)
