"""From samples: a fit under censoring, and a fractile with confidence.

The failures are those of the NIST/SEMATECH e-Handbook of Statistical Methods, sections 8.4.1.2 and 8.4.1.3.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from scipy import special

from calibrate.fitting import fit_family
from calibrate.fitting.characteristic import tolerance_factor
from calibrate.records.observations import Observations
from calibrate.study.ladder.check import RELATIVE, Check, Figures
from calibrate.study.ladder.quadrature import bisected

FAILURES = (54.0, 187.0, 216.0, 240.0, 244.0, 335.0, 361.0, 373.0, 375.0, 386.0)
END, UNFAILED = 500.0, 10

SPECIMENS, FRACTILE, TOLERANCE_CONFIDENCE = 10, 0.05, 0.75


@cache
def _likelihood_equations() -> tuple[float, float]:
    """Return scale and shape from the likelihood equations of the Weibull distribution, solved by bisection."""
    time = np.array([*FAILURES, *[END] * UNFAILED]) / END
    log_time = np.log(time)
    mean_log = float(np.mean(log_time[: len(FAILURES)]))

    def equation(shape: float) -> float:
        power = time**shape
        return float(np.sum(power * log_time) / np.sum(power)) - 1.0 / shape - mean_log

    shape = bisected(equation, 0.1, 10.0)
    return END * float(np.sum(time**shape) / len(FAILURES)) ** (1.0 / shape), shape


def _fitted() -> tuple[float, float]:
    lower = np.array([*FAILURES, *[END] * UNFAILED])
    upper = np.array([*FAILURES, *[math.inf] * UNFAILED])
    found = fit_family(Observations(lower, upper), "weibull").parameters
    return float(found["scale"]), float(found["shape"])


def _scale() -> Figures:
    return Figures(_likelihood_equations()[0], _fitted()[0])


def _shape() -> Figures:
    return Figures(_likelihood_equations()[1], _fitted()[1])


def _tolerance() -> Figures:
    n, distance = SPECIMENS, -float(special.ndtri(FRACTILE))
    # The standard deviation of the sample over that of the population: chi over the root of n - 1.
    s = np.linspace(0.0, 5.0, 1001)[1:]
    log_density = (n - 2.0) * np.log(s) - 0.5 * (n - 1.0) * s * s
    density = np.exp(log_density - log_density.max())
    density /= density.sum()

    def excess(k: float) -> float:
        """Return by how much the confidence that mean - k s lies below the fractile exceeds what is wanted."""
        held = special.ndtr(math.sqrt(n) * (k * s - distance))
        return float(np.sum(density * held)) - TOLERANCE_CONFIDENCE

    return Figures(bisected(excess, 0.0, 10.0), float(tolerance_factor(n, FRACTILE, TOLERANCE_CONFIDENCE)))


CHECKS = (
    Check(
        "censored Weibull fit, scale",
        "Scale fitted to ten failures of twenty units on a test that ended at 500 hours.",
        "likelihood equations, bisected; NIST e-Handbook 8.4.1.3 prints 606.5280",
        _scale,
        RELATIVE,
        1e-6,
        "the optimiser's precision; the likelihood is flat at its maximum",
    ),
    Check(
        "censored Weibull fit, shape",
        "Shape fitted to the same failures.",
        "likelihood equations, bisected; NIST e-Handbook 8.4.1.3 prints 1.7208",
        _shape,
        RELATIVE,
        1e-6,
        "the optimiser's precision; the likelihood is flat at its maximum",
    ),
    Check(
        "tolerance factor k",
        "Factor k of the 5 % fractile with 75 % confidence from ten specimens, normal, standard deviation unknown.",
        "quadrature over the standard deviation",
        _tolerance,
        RELATIVE,
        1e-9,
        "the factor claims ten digits",
    ),
)
