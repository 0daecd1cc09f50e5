# ruff: noqa: D102  (the formulas are documented in Model)
"""Gamma and exponential likelihoods."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np
from scipy import special

from calibrate.fitting.jets import Array, Jet, Number, log, log_gamma
from calibrate.fitting.model import Model, Rule, needs_above
from calibrate.fitting.tools import jet, rising_root


class GammaModel(Model):
    """The scale is mean/shape; the shape solves ``ln k - digamma(k) = ln(mean) - mean(ln x)``.

    References
    ----------
    .. [1] N. L. Johnson, S. Kotz, N. Balakrishnan, Continuous Univariate
       Distributions, vol. 1, 2nd ed., Wiley 1994, section 17.7.
    """

    family = "gamma"
    rules = (Rule("shape", "shape", positive=True), Rule("scale", "scale", positive=True))

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        return needs_above(x, 0.0, "zero")

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        shape, scale = p["shape"], p["scale"]
        return jet((shape - 1.0) * log(z) - z / scale - shape * log(scale) - log_gamma(shape))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        mean = float(np.mean(z))
        d = (z - mean) / mean
        near = d > -0.5
        # mean(d) is zero: ln(mean) - mean(ln x) without cancellation where the scatter is small.
        log_ratio = np.where(near, np.log1p(np.where(near, d, 0.0)), np.log(z / mean))
        gap = float(np.mean(d - log_ratio))
        shape = self.shape_of(gap)
        return {"shape": shape, "scale": mean / shape}

    @staticmethod
    def shape_of(gap: float) -> float:
        """Return k with ln k - digamma(k) = gap > 0."""

        def condition(k: float) -> tuple[float, float]:
            if k < 200.0:
                difference = math.log(k) - float(special.digamma(k))
                return gap - difference, float(special.polygamma(1, k)) - 1.0 / k
            # ln k - digamma(k) cancels; its asymptotic series does not.
            r = 1.0 / k
            difference = r * (0.5 + r * (1.0 / 12.0 - r * r * (1.0 / 120.0 - r * r / 252.0)))
            return gap - difference, r * r * (0.5 + r * (1.0 / 6.0 - r * r / 30.0))

        # 1/(2k) < ln k - digamma(k) < 1/k bounds the root.
        start = (3.0 - gap + math.sqrt((gap - 3.0) ** 2 + 24.0 * gap)) / (12.0 * gap)
        return rising_root(condition, start, 0.499999 / gap, 1.000001 / gap)

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        p = self.exact(z, fixed)
        mean = float(np.mean(z))
        if "shape" in fixed:
            return [{"shape": fixed["shape"], "scale": mean / fixed["shape"]}]
        return [{"shape": mean / fixed.get("scale", p["scale"]), "scale": p["scale"]}]


class ExponentialModel(Model):
    """Closed form: the mean."""

    family = "exponential"
    rules = (Rule("scale", "scale", positive=True),)

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        lowest = float(np.min(x))
        if lowest < 0.0:
            return f"it holds only values from zero up; the smallest is {lowest:.12g}"
        return "all values are zero" if float(np.max(x)) == 0.0 else None

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        return jet(-z / p["scale"] - log(p["scale"]))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        return {"scale": float(np.mean(z))}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        return [self.exact(z, fixed)]
