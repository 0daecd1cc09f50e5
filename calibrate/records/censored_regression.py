"""Linear regression with a normal residual, for responses that may be known by bounds only."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

ITERATIONS = 60


@dataclass(frozen=True, slots=True, eq=False)
class Regression:
    """Coefficients (p,), their covariance (p, p), the residual sd and its degrees of freedom."""

    coefficients: Array
    covariance: Array
    residual_sd: float
    freedom: int


class _Terms(NamedTuple):
    """Log-likelihood, its derivatives by both standardised bounds, and the second derivatives."""

    value: Array
    low: Array
    high: Array
    low_low: Array
    high_high: Array
    low_high: Array


def regress(design: Array, lower: Array, upper: Array) -> Regression | None:
    """Fit ``y = design @ coefficients + residual``.

    Parameters
    ----------
    design : array, shape (n, p)
        Of full rank on the rows observed exactly, of which there are more than p.
    lower, upper : array, shape (n,)
        Bounds of each response; equal where it was observed.

    Returns
    -------
    Regression or None
        None where the likelihood has no maximum that is found, as when the
        observed responses leave no residual.

    Notes
    -----
    Complete responses: least squares, residual variance RSS/(n - p). With
    bounds: maximum likelihood with observed information, in the parameters of
    Olsen (1978, Econometrica 46, 1211-1215; formulas rederived), in which it
    is concave; the residual variance and with it the covariance are scaled
    by m/(m - p), m the number observed, which gives least squares without
    bounds.
    """
    observed = lower == upper
    m, p = int(np.count_nonzero(observed)), design.shape[1]
    start, *_ = np.linalg.lstsq(design[observed], lower[observed], rcond=None)
    residual = lower[observed] - design[observed] @ start
    rss = float(residual @ residual)
    if m == lower.size:
        variance = rss / (m - p)
        return Regression(start, variance * np.linalg.inv(design.T @ design), float(np.sqrt(variance)), m - p)
    spread = float(np.max(np.abs(lower[observed])))
    if rss <= m * (1e-12 * max(spread, 1e-300)) ** 2:
        return None
    return _censored(design, lower, upper, start, float(np.sqrt(rss / m)))


def _censored(design: Array, lower: Array, upper: Array, start: Array, sd: float) -> Regression | None:
    theta = np.append(start, 1.0) / sd
    value, score, hessian = _likelihood(design, lower, upper, theta)
    for _ in range(ITERATIONS):
        try:
            step = np.linalg.solve(-hessian, score)
        except np.linalg.LinAlgError:
            return None
        gain = float(score @ step)
        if gain < 1e-18 * max(1.0, abs(value)):
            return _result(theta, -hessian, int(np.count_nonzero(lower == upper)))
        for halving in range(40):
            trial = theta + step * 0.5**halving
            if trial[-1] <= 0.0:
                continue
            found = _likelihood(design, lower, upper, trial)
            if found[0] >= value - 1e-12 * max(1.0, abs(value)):
                break
        else:
            return None
        theta, (value, score, hessian) = trial, found
    return None


def _result(theta: Array, information: Array, m: int) -> Regression:
    p = theta.size - 1
    sd = 1.0 / float(theta[-1])
    coefficients = theta[:-1] * sd
    # d(coefficients)/d(theta): identity/tau and -gamma/tau^2
    jacobian = np.hstack([sd * np.eye(p), -sd * coefficients[:, None]])
    widening = m / (m - p)
    covariance = widening * jacobian @ np.linalg.inv(information) @ jacobian.T
    return Regression(coefficients, covariance, sd * float(np.sqrt(widening)), m - p)


def _likelihood(design: Array, lower: Array, upper: Array, theta: Array) -> tuple[float, Array, Array]:
    """Return log-likelihood, score and Hessian by (coefficients/sd, 1/sd)."""
    tau = theta[-1]
    fitted = design @ theta[:-1]
    terms = _terms(tau * lower - fitted, tau * upper - fitted)
    exact = np.count_nonzero(lower == upper)
    low, high = (np.hstack([-design, _zeroed(bound)[:, None]]) for bound in (lower, upper))
    score = low.T @ terms.low + high.T @ terms.high
    mixed = low.T @ (terms.low_high[:, None] * high)
    hessian = low.T @ (terms.low_low[:, None] * low) + high.T @ (terms.high_high[:, None] * high)
    hessian += mixed + mixed.T
    score[-1] += exact / tau
    hessian[-1, -1] -= exact / tau**2
    return float(terms.value.sum() + exact * np.log(tau)), score, hessian


def _zeroed(bound: Array) -> Array:
    return np.where(np.isfinite(bound), bound, 0.0)


def _terms(low: Array, high: Array) -> _Terms:
    from scipy.special import log_ndtr

    exact = low == high
    # In the right half an interval has the probability of its mirror image, without cancellation.
    mirrored = ~exact & (low > 0.0)
    a, b = np.where(mirrored, -high, low), np.where(mirrored, -low, high)
    with np.errstate(divide="ignore", invalid="ignore"):
        log_probability = log_ndtr(b) + np.log1p(-np.exp(log_ndtr(a) - log_ndtr(b)))
    log_probability = np.where(exact, 0.0, log_probability)
    ratio_low, ratio_high = _ratio(low, log_probability), _ratio(high, log_probability)
    z_low, z_high = _zeroed(low), _zeroed(high)
    zero = np.zeros_like(low)
    return _Terms(
        np.where(exact, -0.5 * z_low**2, log_probability),
        np.where(exact, -z_low, -ratio_low),
        np.where(exact, zero, ratio_high),
        np.where(exact, -1.0, ratio_low * z_low - ratio_low**2),
        np.where(exact, zero, -ratio_high * z_high - ratio_high**2),
        np.where(exact, zero, ratio_low * ratio_high),
    )


def _ratio(z: Array, log_probability: Array) -> Array:
    """Return the normal density over the probability, 0 at infinity."""
    log_density = -0.5 * (_zeroed(z) ** 2 + np.log(2.0 * np.pi))
    with np.errstate(over="ignore"):
        return np.asarray(np.where(np.isfinite(z), np.exp(log_density - log_probability), 0.0))
