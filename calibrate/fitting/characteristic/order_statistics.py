"""Limits that assume no family: one of the values of the sample, chosen by its rank."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.errors import InputError, Problem
from calibrate.fitting.characteristic.factors import inside_unit
from calibrate.fitting.characteristic.result import CharacteristicValue, Request, percent

Array = NDArray[np.float64]


def smallest_sample(fractile: float, confidence: float) -> int:
    """Return the least number of specimens from which a distribution-free limit exists.

    Parameters
    ----------
    fractile, confidence : float
        Between 0 and 1; an upper fractile needs as many as the lower one at the same distance from the end.

    Notes
    -----
    With n specimens the extreme value lies beyond the fractile with probability ``1 - (1 - p)**n``, p being the
    distance of the fractile from its end.

    Examples
    --------
    >>> [smallest_sample(0.05, c) for c in (0.75, 0.90, 0.95)]
    [28, 45, 59]
    """
    p, c = _checked(fractile, confidence)
    exact = math.log1p(-c) / math.log1p(-p)
    return math.ceil(exact * (1.0 - 1e-12))


def rank(n: int, fractile: float, confidence: float) -> int:
    """Return the rank, from 1 for the smallest value, of the distribution-free limit of a fractile.

    The limit of a lower fractile lies at or below it with at least the stated confidence, that of an upper one (above
    0.5) at or above it; it is the closest value of the sample that does.

    Parameters
    ----------
    n : int
        Number of specimens.
    fractile, confidence : float
        Between 0 and 1.

    Raises
    ------
    InputError
        The sample is too small; the message tells the smallest that would do.

    References
    ----------
    .. [1] G. J. Hahn, W. Q. Meeker, Statistical Intervals, Wiley 1991, section 5.3.
    """
    p, c = _checked(fractile, confidence)
    least = smallest_sample(fractile, confidence)
    if n < least:
        raise InputError(
            Problem(
                f"A distribution-free limit of the {percent(fractile)} fractile at {percent(confidence)} confidence "
                f"needs at least {least} values; there are {n}.",
                suggestion="Name a family, test more specimens or state a lower confidence.",
            )
        )
    # At least r of n fall below the fractile with probability I_p(r, n - r + 1); it falls with r.
    candidates = np.arange(1, n + 1)
    enough = special.betainc(candidates, n - candidates + 1.0, p) >= c * (1.0 - 1e-12)
    r = max(int(np.count_nonzero(enough)), 1)
    return r if fractile <= 0.5 else n + 1 - r


def order_statistic_value(values: Array, request: Request) -> CharacteristicValue:
    """Return the order statistic that is the limit of a fractile.

    Parameters
    ----------
    values : array, shape (n,)
        Complete sample.
    request : Request
        With a confidence.

    Raises
    ------
    InputError
        As in `rank`.
    """
    assert request.confidence is not None
    n = values.size
    r = rank(n, request.fractile, request.confidence)
    ordered = np.sort(values)
    return request.answer(
        values,
        value=float(ordered[r - 1]),
        factor=None,
        point_estimate=float(np.quantile(ordered, request.fractile, method="weibull")),
        statement=f"{request.what()}, distribution-free, n = {n}, value number {r} of {n} in rising order",
    )


def _checked(fractile: float, confidence: float) -> tuple[float, float]:
    p = float(inside_unit(fractile, "The fractile"))
    return min(p, 1.0 - p), float(inside_unit(confidence, "The confidence"))
