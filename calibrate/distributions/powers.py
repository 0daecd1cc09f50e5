"""The exponent y for which E**y, E standard exponential, has a given coefficient of variation."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions.log_gamma import excess
from calibrate.distributions.parameter import Array

_STEPS = 30


def power_from_cov(cov: Array) -> Array:
    """Return y > 0 with ``L(y) = ln(1 + cov**2)``, L from :func:`calibrate.distributions.log_gamma.excess`.

    Notes
    -----
    Newton's method on ln L against ln y, whose slope lies between 1 and 2: it converges from any start.
    """
    target = np.log(np.log1p(np.square(cov)))
    # Small cov: L = pi^2/6 y^2. Large: L grows like 2 ln 2 y.
    log_y = np.where(
        target < 0, 0.5 * (target - math.log(math.pi**2 / 6)), target - math.log(2 * math.log(2))
    )
    for _ in range(_STEPS):
        y = np.exp(log_y)
        value, slope = excess(y)
        step = (np.log(value) + 2.0 * log_y - target) * value / slope
        log_y = log_y - step
        if np.max(np.abs(step), initial=0.0) < 1e-15:
            break
    return np.exp(log_y)
