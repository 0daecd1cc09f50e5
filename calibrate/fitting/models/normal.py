# ruff: noqa: D102  (the formulas are documented in Model)
"""Normal and lognormal likelihoods."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number, log, square
from calibrate.fitting.model import Model, Rule, needs_above
from calibrate.fitting.tools import jet, logs

HALF_LOG_2PI = 0.5 * math.log(2.0 * math.pi)


class NormalModel(Model):
    """Closed form: mean and root mean square deviation."""

    family = "normal"
    rules = (Rule("location", "location"), Rule("scale", "scale", positive=True))
    origin = "mean"

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        u = (z - p["location"]) / p["scale"]
        return jet(-0.5 * square(u) - log(p["scale"]) - HALF_LOG_2PI)

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        location = float(np.mean(z))
        return {"location": location, "scale": float(np.sqrt(np.mean((z - location) ** 2)))}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        location = fixed.get("location", float(np.mean(z)))
        return [{"location": location, "scale": float(np.sqrt(np.mean((z - location) ** 2)))}]


class LognormalModel(Model):
    """Closed form: those of the logarithms."""

    family = "lognormal"
    rules = (Rule("median", "scale", positive=True), Rule("log_sd", "shape", positive=True))

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        return needs_above(x, 0.0, "zero")

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        y = log(z)
        u = (y - log(p["median"])) / p["log_sd"]
        return jet(-0.5 * square(u) - log(p["log_sd"]) - (y + HALF_LOG_2PI))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        centre, y = logs(z)
        mean = float(np.mean(y))
        return {"median": centre * math.exp(mean), "log_sd": float(np.sqrt(np.mean((y - mean) ** 2)))}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        centre, y = logs(z)
        mean = math.log(fixed["median"] / centre) if "median" in fixed else float(np.mean(y))
        return [{"median": centre * math.exp(mean), "log_sd": float(np.sqrt(np.mean((y - mean) ** 2)))}]
