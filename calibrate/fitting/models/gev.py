# ruff: noqa: D102  (the formulas are documented in Model)
"""The likelihood of the generalised extreme value family."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number, exp, log, log1p_ratio
from calibrate.fitting.model import Model, Rule
from calibrate.fitting.tools import gumbel_fit, jet

HEAVIEST = 5.0
"""Shape beyond which the search does not go: the mean is infinite from 1 on."""


class GevModel(Model):
    """Shape positive: heavy upper tail.

    Notes
    -----
    With ``w = shape (x - location)/scale`` and ``y = (x - location)/scale
    ln(1 + w)/w`` the log-density is ``-ln scale - (1 + shape) y - exp(-y)``,
    smooth through shape = 0. For shape < -1 the likelihood has no bound; for
    shape < -0.5 its maximum is not regular [1]_.

    References
    ----------
    .. [1] R. L. Smith, Maximum likelihood estimation in a class of nonregular
       cases, Biometrika 72 (1985) 67-90.
    """

    family = "gev"
    rules = (
        Rule("location", "location"),
        Rule("scale", "scale", positive=True),
        Rule("shape", "shape"),
    )
    origin = "mean"
    third = "skewness"
    third_parameter = "shape"

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        s = (z - p["location"]) / p["scale"]
        y = s * log1p_ratio(s * p["shape"])
        return jet(-log(p["scale"]) - y * (p["shape"] + 1.0) - exp(-y))

    def allowed(self, z: Array, p: Mapping[str, float]) -> bool:
        shape = p["shape"]
        if not -1.0 < shape < HEAVIEST:
            return False
        end = float(np.max(z)) if shape < 0.0 else float(np.min(z))
        return 1.0 + shape * (end - p["location"]) / p["scale"] > 1e-10

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        location, scale = gumbel_fit(z)
        shape = fixed.get("shape", 0.0)
        found = [_by_l_moments(z), {"location": location, "scale": scale, "shape": shape}]
        # Wide enough that every value lies inside the support, whatever shape is fixed.
        spread = float(np.max(np.abs(z - float(np.mean(z)))))
        wide = max(scale, 1.25 * abs(shape) * spread)
        found.append({"location": float(np.mean(z)), "scale": wide, "shape": shape})
        found.append({"location": float(np.mean(z)), "scale": max(wide, 0.5 * spread), "shape": -0.3})
        return found

    def obstacle(self, z: Array, p: Mapping[str, float]) -> str:
        if p["shape"] < -0.9:
            return (
                "the likelihood has no maximum: it grows without bound as the upper end of the distribution "
                "approaches the largest value (shape towards -1)"
            )
        if p["shape"] > 0.8 * HEAVIEST:
            return (
                f"the likelihood still grows at a shape of {HEAVIEST:g}: many values lie close together at the lower "
                "end and others far above them"
            )
        return super().obstacle(z, p)

    def irregular(self, p: Mapping[str, float], free: Sequence[str]) -> str | None:
        if p["shape"] >= -0.5:
            return None
        return (
            f"The shape {p['shape']:.3g} is below -0.5, where the likelihood is not regular and standard errors "
            "from it do not hold."
        )


def _by_l_moments(z: Array) -> dict[str, float]:
    """Return estimates by L-moments (Hosking and Wallis, Regional Frequency Analysis, 1997, A.6)."""
    x = np.sort(z)
    n = x.size
    i = np.arange(n)
    b0 = float(np.mean(x))
    b1 = float(np.sum(i * x)) / (n * (n - 1))
    b2 = float(np.sum(i * (i - 1) * x)) / (n * (n - 1) * max(n - 2, 1))
    l2 = 2.0 * b1 - b0
    l3 = 6.0 * b2 - 6.0 * b1 + b0
    c = 2.0 / (3.0 + l3 / l2) - math.log(2.0) / math.log(3.0)
    k = 7.8590 * c + 2.9554 * c * c
    k = min(max(k, -0.95), 0.95)
    if abs(k) < 1e-6:
        scale = l2 / math.log(2.0)
        return {"location": b0 - 0.5772156649015329 * scale, "scale": scale, "shape": 0.0}
    g = math.gamma(1.0 + k)
    scale = l2 * k / ((1.0 - 2.0**-k) * g)
    return {"location": b0 - scale * (1.0 - g) / k, "scale": scale, "shape": -k}
