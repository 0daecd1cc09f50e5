# ruff: noqa: D102  (the formulas are documented in Family)
"""The Frechet family of maxima."""

from __future__ import annotations

import numpy as np

from calibrate.distributions.parameter import Array, Values
from calibrate.distributions.powers import PowerFamily


class Frechet(PowerFamily):
    """Frechet distribution of maxima; F = exp(-(x/scale)**-shape). Its sd exists for shape > 2."""

    name = "frechet"
    of_maxima = True

    def logpdf(self, x: Array, p: Values) -> Array:
        scale, shape = p
        log_t = np.log(np.where(np.greater(x, 0.0), x, scale) / scale)
        with np.errstate(over="ignore"):
            value = np.log(shape / scale) - (shape + 1.0) * log_t - np.exp(-shape * log_t)
        return np.where(np.greater(x, 0.0), value, -np.inf)

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        scale, shape = p
        return scale * ratio ** (1.0 / shape), shape
