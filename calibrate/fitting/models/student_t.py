# ruff: noqa: D102  (the formulas are documented in Model)
"""The likelihood of Student's t family with location and scale."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number, log, log1p, log_gamma, reciprocal, square
from calibrate.fitting.model import Model, Rule
from calibrate.fitting.tools import jet

MOST_FREEDOM = 1000.0
"""Degrees of freedom above which no sample tells the family from the normal one."""

LEAST_FREEDOM = 0.2
"""Below, a few equal values let the likelihood grow without bound."""


class StudentTModel(Model):
    """Freedom is estimated unless it is fixed.

    References
    ----------
    .. [1] K. L. Lange, R. J. A. Little, J. M. G. Taylor, Robust statistical
       modeling using the t distribution, JASA 84 (1989) 881-896.
    """

    family = "student_t"
    rules = (
        Rule("location", "location"),
        Rule("scale", "scale", positive=True),
        Rule("freedom", "shape", positive=True),
    )
    origin = "mean"
    third = "kurtosis"
    third_parameter = "freedom"

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        freedom = p["freedom"]
        u = (z - p["location"]) / p["scale"]
        half = (freedom + 1.0) * 0.5
        inverse = reciprocal(freedom) if isinstance(freedom, Jet) else 1.0 / freedom
        constant = log_gamma(half) - log_gamma(freedom * 0.5) - log(freedom) * 0.5 - 0.5 * math.log(math.pi)
        return jet(constant - log(p["scale"]) - log1p(square(u) * inverse) * half)

    def allowed(self, z: Array, p: Mapping[str, float]) -> bool:
        return LEAST_FREEDOM < p["freedom"] < MOST_FREEDOM

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        middle = float(np.median(z))
        quarter, three_quarters = np.quantile(z, [0.25, 0.75])
        sd = float(np.std(z))
        robust = max(0.74 * float(three_quarters - quarter), 0.05 * sd)
        if "freedom" in fixed:
            return [{"location": middle, "scale": robust, "freedom": fixed["freedom"]}]
        d = z - float(np.mean(z))
        excess = float(np.mean(d**4)) / sd**4 - 3.0
        by_moments = 4.0 + 6.0 / excess if excess > 0.02 else 200.0
        return [
            {"location": middle, "scale": robust, "freedom": 3.0},
            {"location": float(np.mean(z)), "scale": 0.9 * sd, "freedom": min(by_moments, 200.0)},
        ]

    def obstacle(self, z: Array, p: Mapping[str, float]) -> str:
        if p["freedom"] > 0.3 * MOST_FREEDOM:
            return (
                "the likelihood still grows at a freedom of 1000: the sample shows no heavier tails than the "
                "normal family, which is the limit"
            )
        if p["freedom"] < 2.0 * LEAST_FREEDOM:
            return "the likelihood has no maximum: it grows without bound around equal or nearly equal values"
        return super().obstacle(z, p)
