"""What is known of a maximum at a value: both tails, and how they move with the value and with weights."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.distributions.normal_tails import log_phi, u_from_log_tails

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Slopes:
    """ln F and ln(1 - F) of a maximum, with the derivatives of ln F.

    Attributes
    ----------
    low, high : array (k,)
        ln F, ln(1 - F).
    by_value : array (k,)
        d ln F / dx.
    by_weight : array (m, k)
        d ln F / db for each action.
    """

    low: Array
    high: Array
    by_value: Array
    by_weight: Array


def standard_normal(found: Slopes) -> tuple[Array, Array, Array]:
    """Return the standard normal value of a maximum, and its derivatives by value (k,) and by weight (m, k)."""
    u = u_from_log_tails(found.low, found.high)
    # F / phi(u), both possibly out of range.
    scale = np.exp(np.minimum(found.low - log_phi(u), 700.0))
    return u, scale * found.by_value, scale * found.by_weight
