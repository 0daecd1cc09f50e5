# ruff: noqa: D102  (the formulas are documented in Model)
"""Gumbel likelihoods, and those of Weibull and Frechet, whose logarithms are Gumbel."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number, exp, log
from calibrate.fitting.model import Model, Rule, needs_above
from calibrate.fitting.tools import gumbel_fit, jet, logs


class GumbelModel(Model):
    """Largest values; ``sign`` -1 is the family of smallest values."""

    family = "gumbel"
    rules = (Rule("location", "location"), Rule("scale", "scale", positive=True))
    origin = "mean"
    sign = 1.0

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        y = (z - p["location"]) / p["scale"] * self.sign
        return jet(-log(p["scale"]) - y - exp(-y))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        location, scale = gumbel_fit(self.sign * z)
        return {"location": self.sign * location, "scale": scale}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        p = self.exact(z, fixed)
        return [p, {"location": float(np.mean(z)), "scale": 2.0 * float(np.std(z))}]


class GumbelMinModel(GumbelModel):
    """Smallest values."""

    family = "gumbel_min"
    sign = -1.0


class WeibullModel(Model):
    """-ln x is Gumbel with scale 1/shape."""

    family = "weibull"
    rules = (Rule("scale", "scale", positive=True), Rule("shape", "shape", positive=True))
    sign = -1.0

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        return needs_above(x, 0.0, "zero")

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        y = log(z)
        k = (y - log(p["scale"])) * p["shape"] * self.sign
        return jet(log(p["shape"]) - y - k - exp(-k))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        centre, y = logs(z)
        location, scale = gumbel_fit(self.sign * y)
        return {"scale": centre * math.exp(self.sign * location), "shape": 1.0 / scale}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        p = self.exact(z, fixed)
        return [p, {"scale": p["scale"], "shape": 0.5 * p["shape"]}]


class FrechetModel(WeibullModel):
    """ln x is Gumbel with scale 1/shape."""

    family = "frechet"
    sign = 1.0
