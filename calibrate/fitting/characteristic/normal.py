"""Characteristic values of normal and lognormal populations, exact for samples of any size."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.fitting.characteristic.factors import (
    prediction_factor,
    prediction_factor_known,
    tolerance_factor,
    tolerance_factor_known,
)
from calibrate.fitting.characteristic.result import INTERVAL_LEVEL, CharacteristicValue, Request, ordered
from calibrate.fitting.tools import logs

Array = NDArray[np.float64]

KNOWN_ROUTES = ("tolerance_known", "prediction_known")
ROUTES = ("point", "tolerance", "prediction", *KNOWN_ROUTES)


def normal_value(
    values: Array, request: Request, known_cov: float | None = None, least_cov: float | None = None
) -> CharacteristicValue:
    """Return the characteristic value of a complete sample of a normal or lognormal population.

    Parameters
    ----------
    values : array, shape (n,)
        At least two values, one if the cov is known; positive for `lognormal`.
    request : Request
        Family `normal` or `lognormal`, one of `ROUTES`.
    known_cov : float, optional
        Needed by the routes ``tolerance_known`` and ``prediction_known``.
    least_cov : float, optional
        Floor: the sd is raised to this share of the mean, the sd of logarithms to sqrt(ln(1 + cov²)). The factor
        stays the one for an estimated sd.

    Notes
    -----
    The value is m - k s (lower fractile) or m + k s (upper), of the logarithms for `lognormal`. The mean m and the sd s
    (with n - 1, in every route) are those of the sample. ``point`` takes k = z, the normal distance of the fractile:
    that is neither the estimate of largest likelihood (sd with n) nor free of bias, but common practice. A known cov V
    gives s = V m, or sqrt(ln(1 + V²)) for logarithms (EN 1990:2002, D.7.2). EN 14358 states its floor for the sd of
    logarithms directly, 0.05, which is 0.06 % more than the floor for a cov of 0.05.
    """
    n = values.size
    of_logs = request.family == "lognormal"
    if of_logs and np.min(values) <= 0.0:
        i = int(np.argmin(values))
        raise InputError(f"Value {i + 1} is {values[i]:g}; the family 'lognormal' needs values above zero.")
    centre, y = logs(values) if of_logs else (1.0, values)
    location = float(np.mean(y))

    def scatter(cov: float) -> float:
        return math.sqrt(math.log1p(cov * cov)) if of_logs else cov * abs(location)

    def natural(moved: float) -> float:
        return centre * math.exp(location + moved) if of_logs else location + moved

    known = request.route in KNOWN_ROUTES
    own = float(np.std(y, ddof=1)) if n > 1 else math.nan
    if known:
        assert known_cov is not None
        own = scatter(known_cov)
    used = own if least_cov is None else max(own, scatter(least_cov))
    floored = used > own
    # Rounding of the mean may leave a trace of scatter among equal values.
    if not used > 0.0 or (used == own and not known and np.ptp(values) == 0.0):
        raise no_scatter(n)
    k = _factor(request, n)
    interval = None
    if not floored:
        factor = _known if known else _estimated
        ends = (factor(n, request.fractile, 0.5 + side * 0.5 * INTERVAL_LEVEL) for side in (-1.0, 1.0))
        interval = ordered(*(natural(request.sign * end * own) for end in ends))
    z = _known(1, request.fractile, 0.5)
    return request.answer(
        values,
        value=natural(request.sign * k * used),
        factor=k,
        point_estimate=natural(request.sign * z * own),
        cov_used=math.sqrt(math.expm1(used * used)) if of_logs else _ratio(used, abs(location)),
        floored=floored,
        interval=interval,
        statement=request.statement(
            n, k, _extra(known_cov if known else None, least_cov if floored else None)
        ),
    )


def no_scatter(n: int) -> InputError:
    """Return the refusal of a sample without scatter."""
    return InputError(
        Problem(
            f"All {n} values are equal, so the sample has no scatter to estimate.",
            suggestion="State a known or a least coefficient of variation.",
        )
    )


@lru_cache(maxsize=1024)
def _estimated(n: int, fractile: float, confidence: float) -> float:
    """Return `tolerance_factor`; samples of one size ask for the same numbers again and again."""
    return float(tolerance_factor(n, fractile, confidence))


def _known(n: int, fractile: float, confidence: float) -> float:
    return float(tolerance_factor_known(n, fractile, confidence))


def _factor(request: Request, n: int) -> float:
    p, c = request.fractile, request.confidence
    match request.route:
        case "tolerance":
            assert c is not None
            return _estimated(n, p, c)
        case "tolerance_known":
            assert c is not None
            return _known(n, p, c)
        case "prediction":
            return float(prediction_factor(n, p))
        case "prediction_known":
            return float(prediction_factor_known(n, p))
        case _:
            return _known(1, p, 0.5)


def _extra(known_cov: float | None, least_cov: float | None) -> str:
    parts = []
    if known_cov is not None:
        parts.append(f"cov {known_cov:g} taken as known")
    if least_cov is not None:
        parts.append(f"cov raised to {least_cov:g}")
    return ", ".join(parts)


def _ratio(a: float, b: float) -> float:
    return a / b if b > 0.0 else math.nan
