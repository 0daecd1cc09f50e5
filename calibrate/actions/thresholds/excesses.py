"""Generalised Pareto or exponential excesses over a threshold by maximum likelihood.

    P(X - u > y | X > u) = (1 + shape y/scale)**(-1/shape),  shape 0: exp(-y/scale)

A positive shape is a heavy tail, a negative one has the upper end u - scale/shape.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.arguments import positive
from calibrate.actions.maxima import CONFIDENCE, shape_sign
from calibrate.actions.thresholds.periods import PeriodMaximum, annual_maximum
from calibrate.distributions.exponentials import exprel_slope
from calibrate.errors import Doubt, InputError
from calibrate.fitting.fits import checked_values
from calibrate.fitting.jets import log, log1p_ratio, seed, total
from calibrate.fitting.newton import Maximum, maximise
from calibrate.fitting.tools import jet

Array = NDArray[np.float64]

FEW_EXCESSES = 20
"""Number of exceedances below which a doubt is recorded (common practice, no source)."""

LEAST = 3
"""Exceedances: one more than there are parameters."""

HEAVIEST = 5.0
"""Shape beyond which the search does not go: the mean is infinite from 1 on."""

WHERE = "excesses"


@dataclass(frozen=True, slots=True, eq=False)
class ExcessFit:
    """Generalised Pareto excesses, with the rate of exceedances where the length of the record is known.

    Attributes
    ----------
    threshold, scale, shape : float
        In the unit of the values; the shape has none.
    excesses : array, shape (n,)
        Values above the threshold, less the threshold.
    covariance : array, shape (2, 2)
        Of scale and shape, by the observed information; NaN for a shape below -0.5.
    standard_errors : mapping of str to float
        Of ``scale`` and ``shape``, and of ``rate`` where there is one.
    log_likelihood : float
        Of the excesses.
    years, rate : float
        Length of the record, and exceedances per year; NaN if it was not given.
    doubts : tuple of Doubt
    exponential : bool
        Whether the shape was held at 0; its standard error is then 0.
    """

    threshold: float
    scale: float
    shape: float
    excesses: Array
    covariance: Array
    standard_errors: Mapping[str, float]
    log_likelihood: float
    years: float
    rate: float
    doubts: tuple[Doubt, ...]
    exponential: bool = False

    @property
    def n(self) -> int:
        """Number of exceedances."""
        return int(self.excesses.size)

    @property
    def upper_end(self) -> float:
        """Largest possible value; infinite unless the shape is negative."""
        return self.threshold - self.scale / self.shape if self.shape < 0.0 else math.inf

    @property
    def shape_interval(self) -> tuple[float, float]:
        """Interval of the shape by its standard error, with a confidence of 95 %; NaN for a shape below -0.5."""
        half = float(special.ndtri(0.5 + 0.5 * CONFIDENCE)) * self.standard_errors["shape"]
        return self.shape - half, self.shape + half

    def exceedance(self, x: ArrayLike) -> Array:
        """Return P(X > x | X > threshold); 1 below the threshold."""
        z = np.maximum((np.asarray(x, dtype=np.float64) - self.threshold) / self.scale, 0.0)
        w = np.maximum(self.shape * z, -1.0)
        with np.errstate(divide="ignore"):
            log_sf = -z if self.shape == 0.0 else -np.log1p(w) / self.shape
        return np.exp(log_sf)

    def level(self, years: ArrayLike) -> Array:
        """Return the level that is exceeded once in so many years on average.

        Parameters
        ----------
        years : array_like
            More than 1/rate. The level of rate 1/T per year; for long T that of annual probability 1/T.

        Raises
        ------
        InputError
            The length of the record was not given, or the level lies below the threshold.
        """
        return self._level(years)[0]

    def level_error(self, years: ArrayLike) -> Array:
        """Return the standard error of `level` by the delta method, with the scatter of the rate."""
        _, log_m, stretch = self._level(years)
        w = self.shape * log_m
        bend = self.scale * log_m**2 * exprel_slope(w)
        by_rate = self.scale * np.exp(w) / self.rate
        (v_scale, both), (_, v_shape) = self.covariance
        v_rate = self.standard_errors["rate"] ** 2
        variance = (
            stretch**2 * v_scale + 2.0 * stretch * bend * both + bend**2 * v_shape + by_rate**2 * v_rate
        )
        return np.asarray(np.sqrt(variance))

    def maximum(self, years: float = 1.0) -> PeriodMaximum:
        """Return the distribution of the maximum of a period, in years."""
        return annual_maximum(self._known_rate(), self.threshold, self.scale, self.shape, years)

    def _level(self, years: ArrayLike) -> tuple[Array, Array, Array]:
        m = self._known_rate() * np.asarray(years, dtype=np.float64)
        if not np.all(np.isfinite(m) & (m > 1.0)):
            raise InputError(
                f"A level above the threshold needs more than {1.0 / self.rate:.3g} years; got {years!r}."
            )
        log_m = np.log(m)
        stretch = log_m * special.exprel(self.shape * log_m)
        return self.threshold + self.scale * stretch, log_m, stretch

    def _known_rate(self) -> float:
        if math.isnan(self.rate):
            raise InputError("The length of the record is not known, so there is no rate; give its years.")
        return self.rate


def fit_excesses(values: ArrayLike, threshold: float, years: float | None = None) -> ExcessFit:
    """Fit generalised Pareto excesses to the values above a threshold.

    Parameters
    ----------
    values : array_like, shape (n,)
        Independent events; values up to the threshold are ignored.
    threshold : float
        In the unit of the values.
    years : float, optional
        Length of the record without its gaps; gives the rate.

    Raises
    ------
    InputError
        The values are no sample, fewer than three exceed the threshold, all excesses are equal, or their likelihood
        has no maximum.

    Notes
    -----
    Newton's method on exact derivatives in ln scale and shape, from several starts. The likelihood grows without bound
    as the shape passes -1; the maximum sought is the interior one. Standard errors of the rate are those of a Poisson
    process.

    References
    ----------
    S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, chapter 4;
    S. D. Grimshaw, Technometrics 35 (1993) 185-191 (both from memory).
    """
    y = _excesses(values, threshold, years)
    unit = float(np.mean(y))
    top = _top(y / unit)
    scale, shape = unit * math.exp(top.t[0]), float(top.t[1])
    stretch = np.array([scale, 1.0])
    covariance: Array = np.asarray(np.linalg.inv(-top.hessian * y.size) * np.outer(stretch, stretch))
    doubts = _doubts(
        y.size, shape, math.sqrt(covariance[1, 1]), threshold - scale / shape if shape else math.inf
    )
    if shape < -0.5:
        covariance = np.full((2, 2), np.nan)
    log_likelihood = y.size * (top.value - math.log(unit))
    return _fit(y, threshold, years, (scale, shape), covariance, log_likelihood, doubts, exponential=False)


def fit_exponential_excesses(values: ArrayLike, threshold: float, years: float | None = None) -> ExcessFit:
    """Fit exponential excesses, those of shape 0, to the values above a threshold.

    Parameters
    ----------
    values, threshold, years
        As in `fit_excesses`.

    Raises
    ------
    InputError
        As `fit_excesses`.

    Notes
    -----
    The scale is the mean excess, its standard error scale/sqrt(n).
    """
    y = _excesses(values, threshold, years)
    scale = float(np.mean(y))
    covariance = np.array([[scale**2 / y.size, 0.0], [0.0, 0.0]])
    log_likelihood = -y.size * (math.log(scale) + 1.0)
    doubts = _few(y.size)
    return _fit(y, threshold, years, (scale, 0.0), covariance, log_likelihood, doubts, exponential=True)


def _excesses(values: ArrayLike, threshold: float, years: float | None) -> Array:
    x = checked_values(values)
    if not math.isfinite(threshold):
        raise InputError(f"A threshold must be a finite number; got {threshold!r}.")
    if years is not None:
        positive("The length of a record, in years,", years)
    y = x[x > threshold] - threshold
    if y.size < LEAST:
        raise InputError(
            f"{y.size} of {x.size} values exceed the threshold {threshold:g}; at least {LEAST} are needed."
        )
    if float(np.ptp(y)) <= 1e-13 * float(np.max(y)):
        raise InputError(f"All {y.size} excesses over the threshold {threshold:g} are equal.")
    return y


def _fit(
    y: Array, threshold: float, years: float | None, estimates: tuple[float, float], covariance: Array,
    log_likelihood: float, doubts: list[Doubt], *, exponential: bool,
) -> ExcessFit:  # fmt: skip
    errors = dict(zip(("scale", "shape"), np.sqrt(np.diag(covariance)).tolist(), strict=True))
    rate = math.nan
    if years is not None:
        rate = y.size / years
        errors["rate"] = math.sqrt(y.size) / years
    covariance.flags.writeable = y.flags.writeable = False
    return ExcessFit(
        float(threshold), *estimates, y, covariance, errors, log_likelihood,
        math.nan if years is None else float(years), rate, tuple(doubts), exponential,
    )  # fmt: skip


def _top(z: Array) -> Maximum:
    """Return the largest interior maximum of the mean log-likelihood over (ln scale, shape); z has mean one."""
    largest = float(np.max(z))
    nowhere = (-math.inf, np.full(2, np.nan), np.full((2, 2), np.nan))

    def mean(t: Array) -> tuple[float, Array, Array]:
        scale, shape = math.exp(min(t[0], 300.0)), float(t[1])
        if not (abs(t[0]) < 300.0 and -1.0 < shape < HEAVIEST and 1.0 + shape * largest / scale > 1e-10):
            return nowhere
        a, b = seed(0, 2, scale, scale, scale), seed(1, 2, shape, 1.0, 0.0)
        s = z / a
        density = jet(-log(a) - s * log1p_ratio(s * b) * (b + 1.0))
        value, gradient, hessian = total(density, z.size)
        return value / z.size, gradient / z.size, hessian / z.size

    with np.errstate(all="ignore"):
        ends = [maximise(mean, np.array([math.log(scale), shape])) for scale, shape in _starts(z, largest)]
    tops = [end for end in ends if end.converged]
    if not tops:
        raise InputError(
            "The likelihood of the excesses has no maximum: it grows as the upper end of the distribution approaches "
            "the largest value (shape towards -1). Choose another threshold."
        )
    return max(tops, key=lambda end: end.value)


def _starts(z: Array, largest: float) -> list[tuple[float, float]]:
    """Return scales and shapes: by moments, by L-moments, exponential, and on either side; all hold every value."""
    ratio = 1.0 / float(np.var(z))
    n = z.size
    second = 2.0 * float(np.sum(np.arange(n) * np.sort(z))) / (n * (n - 1)) - 1.0
    guesses = [
        (0.5 * (1.0 + ratio), 0.5 * (1.0 - ratio)),
        (1.0 / second - 1.0, 2.0 - 1.0 / second),
        (1.0, 0.0),
        (0.7, 0.5),
        (1.3, -0.3),
    ]
    limited = [(scale, min(max(shape, -0.8), 0.8 * HEAVIEST)) for scale, shape in guesses]
    return [(max(scale, 1e-3, -1.05 * shape * largest), shape) for scale, shape in limited]


def _few(n: int) -> list[Doubt]:
    if n >= FEW_EXCESSES:
        return []
    message = f"Only {n} exceedances, fewer than {FEW_EXCESSES}: the shape of the tail rests on little."
    return [Doubt("few-excesses", message, WHERE)]


def _doubts(n: int, shape: float, error: float, end: float) -> list[Doubt]:
    doubts = _few(n)
    if shape < -0.5:
        message = (
            f"The shape {shape:.3g} is below -0.5, where the likelihood is not regular and standard errors from it do "
            f"not hold; the upper end {end:.6g} follows the largest value."
        )
        return [*doubts, Doubt("not-regular", message, WHERE)]
    half = float(special.ndtri(0.5 + 0.5 * CONFIDENCE)) * error
    return [*doubts, *shape_sign((shape - half, shape + half), WHERE)]
