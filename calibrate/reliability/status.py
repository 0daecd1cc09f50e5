"""The words in which each situation ends."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

CONVERGED = 0
SEVERAL = 1
NO_FAILURE = 2
TOO_MANY = 3
NOT_FINITE = 4
KINK = 5
NO_SAFETY = 6
HIDDEN = 7

TEXTS: tuple[str, ...] = (
    "converged",
    "several design points",
    "no failure region within reach",
    "not converged: too many iterations",
    "not converged: the limit state is not finite where it was needed",
    "not converged: the nearest point found lies on a kink or jump of the limit state",
    "not converged: no safe region within reach",
    "not converged: a failure region was seen nearer than the point found",
)


def has_beta(code: npt.NDArray[np.int8]) -> npt.NDArray[np.bool_]:
    """Return where a code stands for a design point that was found."""
    return code <= SEVERAL


def texts(code: npt.NDArray[np.int8]) -> npt.NDArray[Any]:
    """Return the words of each code."""
    return np.asarray(TEXTS)[code]
