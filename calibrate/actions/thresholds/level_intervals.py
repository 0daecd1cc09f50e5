"""Profile-likelihood intervals of the levels that threshold exceedances reach once in many years.

The level with its return period stands for the scale: scale = (level - u)/s with s = ((rate T)**shape - 1)/shape. For
each level the largest likelihood over the shape is sought. The rate is taken as known: its scatter matters little
beside that of the shape.

References
----------
S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, section 4.3.3 (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.actions.maxima import checked_confidence
from calibrate.actions.thresholds.excesses import HEAVIEST, ExcessFit
from calibrate.distributions.exponentials import log1p_ratio

Array = NDArray[np.float64]

GRID = 240
"""Shapes among which the best is sought before it is refined."""

WIDENINGS = 40
"""Times that the search for an upper end widens by half, before it is given up."""


def level_interval(fit: ExcessFit, years: float, confidence: float = 0.95) -> tuple[float, float]:
    """Return the profile-likelihood interval of `ExcessFit.level`.

    Parameters
    ----------
    fit : ExcessFit
        With a rate.
    years : float
        More than 1/rate.
    confidence : float
        Of the two-sided interval.

    Returns
    -------
    lower, upper : float
        NaN for an end that was not found.

    Raises
    ------
    InputError
        As `ExcessFit.level`, or for a confidence that is none.
    """
    from scipy.optimize import brentq

    checked_confidence(confidence)
    best = float(fit.level(years)) - fit.threshold
    profile = _Profile.of(fit, math.log(fit.rate * years))
    lowest = fit.log_likelihood - 0.5 * float(special.chdtri(1.0, 1.0 - confidence))

    def rest(level: float) -> float:
        return profile(level) - lowest

    ends = []
    for factor in (1.0 / 1.5, 1.5):
        inner, outer, end = best, best * factor, math.nan
        for _ in range(WIDENINGS):
            if rest(outer) <= 0.0:
                end = fit.threshold + float(brentq(rest, inner, outer, rtol=1e-10))
                break
            inner, outer = outer, outer * factor
        ends.append(end)
    return ends[0], ends[1]


@dataclass(frozen=True, slots=True, eq=False)
class _Profile:
    """Largest log-likelihood of the excesses over the shape, given a level above the threshold."""

    excesses: Array
    shapes: Array
    log_m: float

    @classmethod
    def of(cls, fit: ExcessFit, log_m: float) -> _Profile:
        if fit.exponential:
            return cls(fit.excesses, np.zeros(1), log_m)
        near = fit.shape + np.linspace(-1.0, 1.0, GRID // 2)
        shapes = np.unique(np.concatenate((near, np.linspace(-1.0, HEAVIEST, GRID // 2))))
        return cls(fit.excesses, shapes[(shapes > -1.0) & (shapes < HEAVIEST)], log_m)

    def __call__(self, level: float) -> float:
        from scipy.optimize import minimize_scalar

        values = self.likelihood(level, self.shapes)
        if values.size == 1:
            return float(values[0])
        i = int(np.argmax(values))
        low, high = self.shapes[max(i - 1, 0)], self.shapes[min(i + 1, self.shapes.size - 1)]
        found = minimize_scalar(
            lambda shape: min(-float(self.likelihood(level, np.array([shape]))[0]), 1e300),
            bounds=(low, high), method="bounded", options={"xatol": 1e-9},
        )  # fmt: skip
        return max(-float(found.fun), float(values[i]))

    def likelihood(self, level: float, shapes: Array) -> Array:
        """Return the log-likelihood for each shape; -inf where an excess lies beyond the upper end."""
        scale = level / (self.log_m * special.exprel(shapes * self.log_m))
        s = self.excesses / scale[:, None]
        w = shapes[:, None] * s
        possible = np.min(w, axis=1) > -1.0
        y = np.where(possible[:, None], s * log1p_ratio(np.maximum(w, -1.0)), 0.0)
        value = -self.excesses.size * np.log(scale) - (1.0 + shapes) * np.sum(y, axis=1)
        return np.where(possible, value, -np.inf)
