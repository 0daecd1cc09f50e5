"""From a sample and what is asked of it to the route that can answer, or a refusal."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import NoReturn

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.distributions import family_names
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.characteristic import bootstrap, normal, pivotal
from calibrate.fitting.characteristic.bootstrap import Refit, bootstrap_value
from calibrate.fitting.characteristic.factors import inside_unit
from calibrate.fitting.characteristic.lots import lots_value
from calibrate.fitting.characteristic.normal import KNOWN_ROUTES, normal_value
from calibrate.fitting.characteristic.order_statistics import order_statistic_value
from calibrate.fitting.characteristic.pivotal import pivotal_value
from calibrate.fitting.characteristic.result import CharacteristicValue, Request
from calibrate.records.observations import Observations

Array = NDArray[np.float64]

ROUTES = (*normal.ROUTES, "order_statistic")
"""Names of the routes; ``lots`` has its own function."""

NORMAL_FAMILIES = ("normal", "lognormal")
_WITH_CONFIDENCE = ("tolerance", "tolerance_known", "order_statistic")


def characteristic_value(
    values: ArrayLike | Observations,
    family: str | None,
    fractile: float = 0.05,
    confidence: float | None = None,
    route: str | None = None,
    known_cov: float | None = None,
    least_cov: float | None = None,
    rng: np.random.Generator | None = None,
    refit: Refit | None = None,
) -> CharacteristicValue:
    """Return a characteristic value of a sample.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        In any unit.
    family : str or None
        Family of the population; None assumes none.
    fractile : float
        Above 0.5 the safe side is above the fractile.
    confidence : float, optional
        That the value lies on the safe side.
    route : str, optional
        One of `ROUTES`. Default: with a confidence ``tolerance`` (``tolerance_known`` with a known cov,
        ``order_statistic`` without a family); without one ``point`` (``prediction_known`` with a known cov).
    known_cov : float, optional
        Coefficient of variation known from elsewhere; `normal` and `lognormal` only.
    least_cov : float, optional
        Floor of the coefficient of variation; not for families without a pivot.
    rng : numpy.random.Generator, optional
        Needed by whatever is simulated: limits and predictions of all families but `normal`, `lognormal` and
        `exponential`.
    refit : callable, optional
        ``Observations -> Distribution or None``; needed for samples with bounds and for families without a pivot, and
        used for nothing else.

    Raises
    ------
    InputError
        The route cannot honour what is asked of it.

    Examples
    --------
    >>> strengths = [512.0, 498.0, 530.0, 521.0, 507.0, 515.0]
    >>> characteristic_value(strengths, "lognormal", 0.05, 0.75).statement
    '5 % fractile at 75 % confidence, lognormal, n = 6, k = 2.34'
    """
    request = _request(family, fractile, confidence, route, known_cov)
    observations = _observations(values)
    _check_cov("known", known_cov, needed=request.route in KNOWN_ROUTES, route=request.route)
    _check_cov("least", least_cov, needed=False, route=request.route)
    least_n, words = (1, "one value") if request.route in KNOWN_ROUTES else (2, "two values")
    if observations.n < least_n:
        raise InputError(
            f"A characteristic value by the route '{request.route}' needs at least {words}; "
            f"there {'is' if observations.n == 1 else 'are'} {observations.n}."
        )
    if request.route == "order_statistic":
        _complete_only(observations, request)
        _no_floor(least_cov, "A distribution-free limit has no cov")
        return order_statistic_value(observations.values, request)
    if observations.complete and request.family in NORMAL_FAMILIES:
        return normal_value(observations.values, request, known_cov, least_cov)
    if observations.complete and request.family in pivotal.FAMILIES:
        _check_offered(request, pivotal.ROUTES, f"for the family '{request.family}'")
        return pivotal_value(observations.values, request, least_cov, rng)
    return _by_refit(observations, request, least_cov, rng, refit)


def characteristic_value_of_lots(
    values: ArrayLike | Observations,
    lots: ArrayLike,
    family: str,
    fractile: float = 0.05,
    confidence: float = 0.75,
    least_cov: float | None = None,
) -> CharacteristicValue:
    """Return the tolerance limit for a specimen of a random lot.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        Complete sample.
    lots : array_like, shape (n,)
        Name or number of the lot of each specimen; at least two lots.
    family : {"normal", "lognormal"}
    fractile, confidence, least_cov
        As in `characteristic_value`.

    Raises
    ------
    InputError
        The family, the sample or the lots do not allow it.
    """
    plain = _request(family, fractile, confidence, "tolerance", None)
    if family not in NORMAL_FAMILIES:
        _refuse(f"Limits over lots are not offered for the family '{family}'.", family, NORMAL_FAMILIES)
    observations = _observations(values)
    _complete_only(observations, plain)
    _check_cov("least", least_cov, needed=False, route="lots")
    names = np.asarray(lots)
    if names.shape != (observations.n,):
        raise InputError(
            f"There are {observations.n} values but {names.size} names of lots; each value needs one."
        )
    return lots_value(observations.values, names, Request(fractile, confidence, "lots", family), least_cov)


def _request(
    family: str | None, fractile: float, confidence: float | None, route: str | None, known_cov: float | None
) -> Request:
    inside_unit(fractile, "The fractile")
    if confidence is not None:
        inside_unit(confidence, "The confidence")
    families = [name for name in family_names() if name != "constant"]
    if family is not None and family not in families:
        _refuse(f"There is no family '{family}' with a characteristic value.", family, families)
    if route is None:
        route = _default_route(family, confidence, known_cov)
    if route not in ROUTES:
        _refuse(f"There is no route '{route}' to a characteristic value.", route, ROUTES)
    if route in _WITH_CONFIDENCE and confidence is None:
        raise InputError(f"The route '{route}' needs a confidence, such as 0.75.")
    if route not in _WITH_CONFIDENCE and confidence is not None:
        raise InputError(
            Problem(
                f"The route '{route}' knows no confidence; {confidence:g} was stated.",
                suggestion="Leave the confidence out, or take the route 'tolerance'.",
            )
        )
    if family is None and route != "order_statistic":
        raise InputError(
            Problem(
                f"The route '{route}' needs a family.",
                suggestion="Name one, or state a confidence for a limit by the route 'order_statistic'.",
            )
        )
    if route in KNOWN_ROUTES and family not in NORMAL_FAMILIES:
        raise InputError(f"The route '{route}' is offered for normal and lognormal only, not for '{family}'.")
    return Request(fractile, confidence, route, None if route == "order_statistic" else family)


def _default_route(family: str | None, confidence: float | None, known_cov: float | None) -> str:
    if family is None:
        return "order_statistic"
    if known_cov is not None:
        return "prediction_known" if confidence is None else "tolerance_known"
    return "point" if confidence is None else "tolerance"


def _by_refit(
    observations: Observations,
    request: Request,
    least_cov: float | None,
    rng: np.random.Generator | None,
    refit: Refit | None,
) -> CharacteristicValue:
    kind = f"for the family '{request.family}'" if observations.complete else "for samples with bounds"
    _check_offered(request, bootstrap.ROUTES, kind)
    _no_floor(least_cov, f"There is no floor of the cov {kind}")
    if refit is None:
        _complete_only(observations, request)
        raise InputError(
            f"A characteristic value {kind} needs a fit that can be repeated (refit); none was given."
        )
    return bootstrap_value(observations, request, refit, rng)


def _observations(values: ArrayLike | Observations) -> Observations:
    if isinstance(values, Observations):
        return values
    try:
        x = np.array(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InputError("The values must be numbers.") from error
    if x.ndim != 1:
        raise InputError(f"The values must be one row of numbers; they have {x.ndim} dimensions.")
    return Observations.of(x)


def _complete_only(observations: Observations, request: Request) -> None:
    if observations.complete:
        return
    inexact = observations.n - observations.n_exact
    what = (
        f"{inexact} of {observations.n} values are known by bounds only"
        if inexact
        else "The sample is truncated"
    )
    raise InputError(
        Problem(
            f"{what}, which the route '{request.route}' cannot honour as it stands.",
            suggestion="Give a fit that honours them (refit); the routes 'point' and 'tolerance' then use it.",
        )
    )


def _check_offered(request: Request, offered: Iterable[str], kind: str) -> None:
    if request.route not in offered:
        raise InputError(f"The route '{request.route}' is not offered {kind}; offered: {', '.join(offered)}.")


def _check_cov(which: str, cov: float | None, *, needed: bool, route: str) -> None:
    if cov is None:
        if needed:
            raise InputError(f"The route '{route}' needs a {which} cov.")
        return
    if which == "known" and not needed:
        raise InputError(
            Problem(
                f"The route '{route}' estimates the scatter and would ignore the known cov {cov:g}.",
                suggestion="Take the route 'tolerance_known' or 'prediction_known', or leave the known cov out.",
            )
        )
    if not (cov > 0.0 and math.isfinite(cov)):
        raise InputError(f"The {which} cov is {cov:g}; it must be a number above zero, such as 0.08.")


def _no_floor(least_cov: float | None, reason: str) -> None:
    if least_cov is not None:
        raise InputError(f"{reason}, so a least cov of {least_cov:g} cannot be honoured.")


def _refuse(message: str, name: str, known: Iterable[str]) -> NoReturn:
    raise InputError(Problem(message, suggestion=did_you_mean(name, known)))
