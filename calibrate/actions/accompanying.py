"""Accompanying values of variable actions by the design-value method, as parts of their leading values."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.distributions import Distribution, maximum_of
from calibrate.errors import InputError

Array = npt.NDArray[np.float64]

ALPHA_LEADING = 0.7
"""Size of the sensitivity factor of a leading action, EN 1990:2002, C.7 (from memory)."""

ACCOMPANYING_PART = 0.4
"""Part of it for an accompanying action, EN 1990:2002, C.7 (from memory)."""


def interval_beta(beta: float, intervals: float) -> float:
    """Return the index of the leading design value in one of so many independent intervals of the reference period.

    The design value is exceeded in the reference period with probability Phi(-0.7 beta), and in one interval with that
    divided by their number.
    """
    if not intervals >= 1.0:
        raise InputError(f"The number of intervals is at least 1; got {intervals:g}.")
    return float(-special.ndtri_exp(special.log_ndtr(-ALPHA_LEADING * beta) - np.log(intervals)))


def accompanying_part(maximum: Distribution, beta: float, intervals: float = 1.0) -> Array:
    """Return psi, the accompanying over the leading design value of an action.

    Parameters
    ----------
    maximum : Distribution
        Of the largest value in the reference period.
    beta : float
        Reliability index that is aimed at, for the reference period.
    intervals : float
        How often the slower of leading and accompanying action changes in the reference period. With 1 both design
        values are fractiles of the maximum: Phi(0.28 beta) and Phi(0.7 beta).

    Returns
    -------
    array
        Shape of the distribution.

    Raises
    ------
    InputError
        Fewer than one interval.

    Notes
    -----
    The design-value rule of EN 1990:2002, C.7 and C.10 (from memory) in words: leading, the action has the value of
    index 0.7 beta in the reference period, which is beta' in one interval; accompanying, it has the value of index
    0.4 beta' in one interval. The closed forms that the standard prints for single families are not used.
    """
    one = maximum if intervals == 1.0 else maximum_of(maximum, 1.0 / intervals)
    beside = one.x(ACCOMPANYING_PART * interval_beta(beta, intervals))
    return np.asarray(beside / maximum.x(ALPHA_LEADING * beta))
