"""Reliability indices of one reference period in terms of another, and the refusal to mix periods.

Two ways lead from one period to another. The conversion Phi(beta_n) = Phi(beta_1)**(n/k) knows nothing but the
index and repeats the whole event, resistance and all, in each independent interval. The direct way computes beta
anew with the action's maximum over the other period, while what does not vary in time is drawn once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.actions.arguments import positive
from calibrate.distributions import Distribution, maximum_of
from calibrate.distributions.normal_tails import from_log_hazard, log_hazard
from calibrate.errors import InputError, Problem

Array = npt.NDArray[np.float64]


def in_years(period: float) -> str:
    """Return a period as messages write it."""
    return "1 year" if period == 1.0 else f"{period:g} years"


def beta_of_period(
    beta: npt.ArrayLike, periods_ratio: npt.ArrayLike, independence: npt.ArrayLike = 1.0
) -> Array:
    """Return the reliability index of another period, Phi(beta_n) = Phi(beta_1)**(n/k).

    Parameters
    ----------
    beta : array_like
        Index of the period that is known; any sign, NaN stays NaN.
    periods_ratio : array_like
        Length of the wanted period over that of the known one, positive: 50 from annual to 50 years, 0.02 back.
    independence : array_like
        Independence interval k, counted in the shorter of the two periods, from 1 (independent from one to the next)
        to the number n of them in the longer one (fully dependent, beta stays).

    Returns
    -------
    array
        Of the common shape of the arguments.

    Raises
    ------
    InputError
        The ratio is not positive, or the independence interval is shorter than the shorter period or longer than
        the longer one.

    Notes
    -----
    The formula for k = 1 is that of EN 1990:2002, C.3 (from memory), extended by the interval k as in M. Holicky,
    "Reliability analysis for structural design" (2009, from memory). It is computed as a shift of
    ln(-ln Phi(beta)), which loses nothing in either tail.

    Examples
    --------
    >>> [round(float(beta_of_period(4.7, 50, k)), 2) for k in (1, 10)]
    [3.83, 4.36]
    """
    ratio = positive("The ratio of periods", periods_ratio)
    interval = np.asarray(independence, dtype=np.float64)
    repeats = np.maximum(ratio, 1.0 / ratio)
    # The ratio may come as 1/50, whose inverse is 50 only to rounding.
    good = (interval >= 1.0) & (interval <= repeats * (1.0 + 1e-12))
    if not good.all():
        worst = float(np.broadcast_to(interval, good.shape)[~good].flat[0])
        longest = float(np.broadcast_to(repeats, good.shape)[~good].flat[0])
        message = (
            f"The independence interval must lie between 1 and {longest:g} (the number of shorter periods in the "
            f"longer one); got {worst:g}."
        )
        raise InputError(Problem(message, suggestion="It is counted in the shorter of the two periods."))
    log_power = np.log(ratio) - np.where(ratio >= 1.0, 1.0, -1.0) * np.log(interval)
    return np.asarray(from_log_hazard(log_hazard(np.asarray(beta, dtype=np.float64)) + log_power))


def beta_of_one_period(
    beta: npt.ArrayLike, periods_ratio: npt.ArrayLike, independence: npt.ArrayLike = 1.0
) -> Array:
    """Return the inverse of :func:`beta_of_period`: Phi(beta_1) = Phi(beta_n)**(k/n).

    Parameters
    ----------
    beta : array_like
        Index of ``periods_ratio`` periods.
    periods_ratio, independence : array_like
        As in :func:`beta_of_period`.

    Raises
    ------
    InputError
        As :func:`beta_of_period`.
    """
    return beta_of_period(beta, 1.0 / positive("The ratio of periods", periods_ratio), independence)


def over_period(
    distribution: Distribution, period: npt.ArrayLike, reference_period: npt.ArrayLike
) -> Distribution:
    """Return an action's maximum over the reference period from that over its own period.

    Only for what varies in time: coefficients, model uncertainties and a station's own uncertainty are separate
    variables that keep their value over the years.

    Parameters
    ----------
    distribution : Distribution
        Of the maximum over ``period``.
    period, reference_period : float or array
        In the same unit, usually years.

    Raises
    ------
    InputError
        A period is not positive.
    """
    own = positive("The period of an action", period)
    return maximum_of(distribution, positive("The reference period", reference_period) / own)


@dataclass(frozen=True, slots=True)
class OtherPeriod:
    """The reliability index of one design over another period, by both ways.

    Attributes
    ----------
    beta, period : float
        Index and period in years as computed.
    other_period : float
        Years.
    converted : float
        By :func:`beta_of_period`.
    independence : float
        In the shorter of the two periods.
    direct : float or None
        Computed anew with the action's maximum over the other period; None where it was not.
    """

    beta: float
    period: float
    other_period: float
    converted: float
    independence: float
    direct: float | None

    @property
    def sentence(self) -> str:
        """One sentence for the report: both figures, and why they differ."""
        dependence = (
            "full independence"
            if self.independence == 1.0
            else f"independence intervals of {in_years(self.independence * min(self.period, self.other_period))}"
        )
        text = (
            f"β = {self.beta:.2f} for {in_years(self.period)} converts to {self.converted:.2f} for "
            f"{in_years(self.other_period)} under {dependence}"
        )
        if self.direct is None:
            return f"{text}."
        return (
            f"{text}; computed directly it is {self.direct:.2f}, because the conversion draws every variable anew in "
            "each interval, while resistance, model uncertainty and coefficients are in fact the same throughout."
        )


def other_period(
    beta: float, period: float, wanted: float, *, independence: float = 1.0, direct: float | None = None
) -> OtherPeriod:
    """Return beta over the wanted period in years; parameters as in :class:`OtherPeriod`.

    Raises
    ------
    InputError
        As :func:`beta_of_period`.
    """
    ratio = positive("The wanted period", wanted) / positive("The period", period)
    converted = float(beta_of_period(beta, ratio, independence))
    return OtherPeriod(beta, period, wanted, converted, independence, direct)


def require_same_period(
    beta: float, period: float, target: float, target_period: float, *, independence: float = 1.0,
    direct: float | None = None,
) -> None:  # fmt: skip
    """Raise unless the index and its target are for the same period.

    Parameters
    ----------
    beta, period : float
        Index and its period in years.
    target, target_period : float
        Target and its period in years.
    independence, direct : float, optional
        For the message, as in :class:`OtherPeriod`.

    Raises
    ------
    InputError
        The periods differ; the message says what beta would be over the target's period.
    """
    if period == target_period:
        return
    there = other_period(beta, period, target_period, independence=independence, direct=direct)
    direct_text = "" if direct is None else f"{direct:.2f} (direct) / "
    message = (
        f"β is for {in_years(period)}, the target {target:g} is for {in_years(target_period)}. Over "
        f"{in_years(target_period)} this design has about {direct_text}{there.converted:.2f} (converted)."
    )
    raise InputError(Problem(message, suggestion="Choose one period for actions, β and target."))
