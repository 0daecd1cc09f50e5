"""Characteristic values of Gumbel, Weibull, Frechet and exponential populations, exact for samples of any size.

-ln x of a Weibull population is Gumbel, ln x of a Frechet one is, and a Gumbel population of minima is one of maxima
with the sign turned. (location - fractile)/scale of such estimates has a distribution without parameters.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.distributions import Distribution, distribution
from calibrate.errors import Doubt, InputError
from calibrate.fitting.characteristic.normal import no_scatter
from calibrate.fitting.characteristic.pivots import REPLICATES, Pivots, gumbel_rows, simulated
from calibrate.fitting.characteristic.result import INTERVAL_LEVEL, CharacteristicValue, Request, ordered
from calibrate.fitting.tools import logs

Array = NDArray[np.float64]

ROUTES = ("point", "tolerance", "prediction")

COARSE = 0.005
"""Relative Monte Carlo error of a value from which a doubt is recorded."""


@dataclass(frozen=True, slots=True)
class _Kind:
    """How a family becomes Gumbel of maxima: by the logarithm, by turning the sign."""

    of_logs: bool
    sign: float


_KINDS = {
    "gumbel": _Kind(of_logs=False, sign=1.0),
    "gumbel_min": _Kind(of_logs=False, sign=-1.0),
    "weibull": _Kind(of_logs=True, sign=-1.0),
    "frechet": _Kind(of_logs=True, sign=1.0),
}

FAMILIES = (*_KINDS, "exponential")
"""Families with a pivot besides `normal` and `lognormal`."""


def pivotal_value(
    values: Array,
    request: Request,
    least_cov: float | None = None,
    rng: np.random.Generator | None = None,
    replicates: int = REPLICATES,
) -> CharacteristicValue:
    """Return the characteristic value of a complete sample, from estimates of largest likelihood.

    Parameters
    ----------
    values : array, shape (n,)
        At least two; positive for `weibull` and `frechet`, not negative for `exponential`.
    request : Request
        Family one of `FAMILIES`, route one of `ROUTES`.
    least_cov : float, optional
        Floor: the scale is raised to the one at which the family has this cov, the location kept.
    rng : numpy.random.Generator, optional
        Needed for ``tolerance`` and ``prediction`` unless the family is `exponential`, whose limits are closed.
    replicates : int
        Simulated samples.

    References
    ----------
    .. [1] D. R. Thoman, L. J. Bain, C. E. Antle, Inferences on the parameters of the Weibull distribution,
       Technometrics 11 (1969) 445-460: the pivots and their simulation (from memory).
    .. [2] J. F. Lawless, Statistical Models and Methods for Lifetime Data, 2nd ed., Wiley 2003, section 5.1.
    """
    if request.family == "exponential":
        return _exponential(values, request, least_cov)
    assert request.family is not None
    kind = _KINDS[request.family]
    if kind.of_logs:
        _need_sign(values, request.family, "above zero", np.greater)
    centre, y = logs(values) if kind.of_logs else (1.0, values)
    if np.ptp(y) == 0.0:
        raise no_scatter(values.size)
    location, own = (float(a[0]) for a in gumbel_rows(kind.sign * y[None, :]))
    location *= kind.sign
    least = 0.0 if least_cov is None else _least_scale(request.family, least_cov, location)
    scale = max(own, least)

    def natural(moved: float) -> float:
        return centre * math.exp(location + moved) if kind.of_logs else location + moved

    tail = min(request.fractile, 1.0 - request.fractile)
    # In the Gumbel population of maxima a lower fractile of a turned one is an upper one.
    upper = request.lower == (kind.sign < 0.0)
    plain = Pivots(np.zeros(1), np.ones(1), values.size, normal=False)
    point = plain.quantile(tail, upper) * kind.sign
    k, error, interval, note = -kind.sign * point, 0.0, None, ""
    if request.route != "point":
        pivots = simulated(values.size, _needed(rng, request.family), replicates=replicates)
        if request.route == "tolerance":
            assert request.confidence is not None
            level = 1.0 - request.confidence if upper else request.confidence
            k, error = pivots.tolerance(values.size, tail, upper, level)
        else:
            k, error = pivots.prediction(values.size, tail, upper)
        if scale == own:
            half = 0.5 * INTERVAL_LEVEL
            ends = (pivots.tolerance(values.size, tail, upper, 0.5 + side * half)[0] for side in (-1.0, 1.0))
            interval = ordered(*(natural(-kind.sign * end * own) for end in ends))
        note = (
            f"The factor comes from {replicates} simulated samples of {pivots.n} values; its standard error is "
            f"{error:.2g}."
        )
    value = natural(-kind.sign * k * scale)
    value_error = error * scale * (abs(value) if kind.of_logs else 1.0)
    fitted = _gumbel_like(request.family, centre, location, scale)
    extra = "" if scale == own or least_cov is None else f"cov raised to {least_cov:g}"
    factor = -request.sign * kind.sign * k
    return request.answer(
        values,
        value=value,
        factor=factor,
        point_estimate=natural(point * own),
        cov_used=float(fitted.cov),
        floored=scale > own,
        interval=interval,
        statement=request.statement(values.size, factor, extra),
        notes=(note,) if note else (),
        monte_carlo_error=value_error if note else None,
        doubts=coarse(value, value_error, request),
    )


def coarse(value: float, error: float, request: Request) -> tuple[Doubt, ...]:
    """Return the doubt about a value whose Monte Carlo error matters."""
    if error <= COARSE * abs(value):
        return ()
    message = (
        f"The characteristic value {value:.4g} carries a standard error of {error:.2g} from the simulation."
    )
    return (Doubt("monte-carlo-error", message, request.where),)


def _needed(rng: np.random.Generator | None, family: str) -> np.random.Generator:
    if rng is None:
        raise InputError(
            f"Limits and predictions of the family '{family}' are simulated and need a generator (rng)."
        )
    return rng


def _least_scale(family: str, cov: float, location: float) -> float:
    """Return the scale, of logarithms where the family has them, at which the family has this cov."""
    if _KINDS[family].of_logs:
        return 1.0 / float(distribution(family, mean=1.0, cov=cov).parameters["shape"])
    # sd = pi/sqrt(6) scale is cov times |location + sign gamma scale|.
    towards = _KINDS[family].sign * math.copysign(np.euler_gamma, location)
    slope = math.pi / math.sqrt(6.0) - towards * cov
    if slope <= 0.0:
        raise InputError(f"A least cov of {cov:g} is more than the family '{family}' can have.")
    return cov * abs(location) / slope


def _gumbel_like(family: str, centre: float, location: float, scale: float) -> Distribution:
    if _KINDS[family].of_logs:
        return distribution(family, scale=centre * math.exp(location), shape=1.0 / scale)
    return distribution(family, location=location, scale=scale)


def _need_sign(values: Array, family: str, words: str, fine: np.ufunc) -> None:
    bad = np.flatnonzero(~fine(values, 0.0))
    if bad.size:
        i = bad[0]
        raise InputError(f"Value {i + 1} is {values[i]:g}; the family '{family}' needs values {words}.")


def _exponential(x: Array, request: Request, least_cov: float | None) -> CharacteristicValue:
    """Limits by chi-squared with 2 n degrees of freedom; predictions by the Lomax distribution."""
    _need_sign(x, "exponential", "not below zero", np.greater_equal)
    if least_cov is not None and least_cov > 1.0:
        raise InputError(
            f"A least cov of {least_cov:g} is not possible: an exponential population has a cov of 1."
        )
    n, mean = x.size, float(np.mean(x))
    if mean == 0.0:
        raise no_scatter(n)
    exceeded = -math.log1p(-request.fractile)

    def limit(level: float) -> float:
        """Return what lies below the fractile with this probability."""
        return exceeded * mean * n / float(special.gammaincinv(n, level))

    value = exceeded * mean
    if request.route == "tolerance":
        assert request.confidence is not None
        value = limit(request.confidence if request.lower else 1.0 - request.confidence)
    elif request.route == "prediction":
        value = n * mean * math.expm1(exceeded / n)
    half = 0.5 * INTERVAL_LEVEL
    return request.answer(
        x,
        value=value,
        factor=None,
        point_estimate=exceeded * mean,
        cov_used=1.0,
        interval=(limit(0.5 + half), limit(0.5 - half)),
    )
