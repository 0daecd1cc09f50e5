# ruff: noqa: D102  (the formulas are documented in Family)
"""The two-parameter Weibull family."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.parameter import Array, Values
from calibrate.distributions.powers import PowerFamily


class Weibull(PowerFamily):
    """Weibull distribution of minima; F = 1 - exp(-(x/scale)**shape)."""

    name = "weibull"
    of_maxima = False

    def logpdf(self, x: Array, p: Values) -> Array:
        scale, shape = p
        t = x / scale
        # At t = 0 the density is 0, finite or infinite as the shape is above, at or below one.
        return special.xlogy(shape - 1.0, t) - t**shape + np.log(shape / scale)

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        scale, shape = p
        return scale * ratio ** (-1.0 / shape), shape
