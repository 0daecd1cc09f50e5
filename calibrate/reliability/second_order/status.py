"""The words in which the second-order analysis of each situation ends."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

SECOND_ORDER = 0
NEAREST = 1
NO_GUIDE = 2
BEYOND_LIMIT = 3
NO_INTEGRAL = 4
NOT_FINITE = 5
NO_POINT = 6

TEXTS: tuple[str, ...] = (
    "second order",
    "second order at the nearest of several design points, without the others",
    "the limit state departs so far from the fitted paraboloid that it is no guide",
    "curvature beyond the limit of the method: beta times kappa <= -1",
    "curvatures too different for the probability beyond the paraboloid",
    "curvature not finite",
    "no design point",
)


def texts(code: npt.NDArray[np.int8]) -> npt.NDArray[Any]:
    """Return the words of each code."""
    return np.asarray(TEXTS)[code]
