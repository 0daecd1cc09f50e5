# ruff: noqa: D102  (the formulas are documented in Model)
"""Likelihoods of the families between bounds: uniform, beta, truncated normal."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import ClassVar

import numpy as np
from scipy import special

from calibrate.fitting.jets import Array, Jet, Number, chain, chain2, log, log_gamma, square
from calibrate.fitting.model import Model, Rule
from calibrate.fitting.models.normal import HALF_LOG_2PI
from calibrate.fitting.tools import jet


def _between(x: Array, fixed: Mapping[str, float], *, strictly: bool) -> str | None:
    lower, upper = fixed.get("lower", -math.inf), fixed.get("upper", math.inf)
    if not lower < upper:
        return f"its bounds {lower:.12g} and {upper:.12g} leave nothing between them"
    outside = (x <= lower) | (x >= upper) if strictly else (x < lower) | (x > upper)
    if not np.any(outside):
        return None
    count = int(np.sum(outside))
    plural = "value is" if count == 1 else "values are"
    return (
        f"it holds only values between {lower:.12g} and {upper:.12g}; {count} {plural} not, "
        f"for example {x[outside][0]:.12g}"
    )


class UniformModel(Model):
    """The bounds of largest likelihood are the extreme values: not a point where a gradient vanishes."""

    family = "uniform"
    rules = (Rule("lower", "location"), Rule("upper", "location"))
    origin = "mean"
    regular = False

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        return _between(x, fixed, strictly=False)

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        return jet(-log(p["upper"] - p["lower"]))

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float]:
        return {
            "lower": fixed.get("lower", float(np.min(z))),
            "upper": fixed.get("upper", float(np.max(z))),
        }

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        return [self.exact(z, fixed)]

    def irregular(self, p: Mapping[str, float], free: Sequence[str]) -> str | None:
        return (
            "The bounds of largest likelihood are the extreme values of the sample; the true bounds lie outside "
            "them. Standard errors and AICc do not hold for this family."
        )


class BetaModel(Model):
    """Shapes are estimated between given bounds; the log-likelihood is concave in them."""

    family = "beta"
    rules = (
        Rule("shape_1", "shape", positive=True),
        Rule("shape_2", "shape", positive=True),
        Rule("lower", "location"),
        Rule("upper", "location"),
    )
    preset: ClassVar[Mapping[str, float]] = {"lower": 0.0, "upper": 1.0}
    closed = ("lower", "upper")

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        return _between(x, fixed, strictly=True)

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        a, b, lower, upper = p["shape_1"], p["shape_2"], p["lower"], p["upper"]
        width = upper - lower
        constant = log_gamma(a + b) - log_gamma(a) - log_gamma(b) - log(width)
        return jet((a - 1.0) * log((z - lower) / width) + (b - 1.0) * log((upper - z) / width) + constant)

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        lower, upper = fixed["lower"], fixed["upper"]
        y = (z - lower) / (upper - lower)
        mean, variance = float(np.mean(y)), float(np.var(y))
        total = max(mean * (1.0 - mean) / variance - 1.0, 0.2)
        return [{"shape_1": mean * total, "shape_2": (1.0 - mean) * total}]


WIDEST = 60.0
"""Parent scale in standard deviations of the sample beyond which the truncated normal is its own limit."""


class TruncatedNormalModel(Model):
    """Location and scale of the parent are estimated between given bounds.

    Notes
    -----
    The maximum need not exist: a sample more scattered than the uniform or
    exponential limit of the family drives the parent's scale to infinity [1]_.

    References
    ----------
    .. [1] J. del Castillo, The singly truncated normal distribution: a
       non-steep exponential family, Ann. Inst. Statist. Math. 46 (1994) 57-66.
    """

    family = "truncated_normal"
    rules = (
        Rule("location", "location"),
        Rule("scale", "scale", positive=True),
        Rule("lower", "location"),
        Rule("upper", "location"),
    )
    origin = "mean"
    preset: ClassVar[Mapping[str, float]] = {"lower": -math.inf, "upper": math.inf}
    closed = ("lower", "upper")

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        if math.isinf(fixed["lower"]) and math.isinf(fixed["upper"]):
            return "it needs a bound: give lower, upper or both"
        return _between(x, fixed, strictly=False)

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        u = (z - p["location"]) / p["scale"]
        core = jet(-0.5 * square(u) - log(p["scale"]) - HALF_LOG_2PI)
        return core - _log_mass(p)

    def allowed(self, z: Array, p: Mapping[str, float]) -> bool:
        return p["scale"] < WIDEST * float(np.std(z)) and abs(p["location"]) < 1e6

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        mean, sd = float(np.mean(z)), float(np.std(z))
        return [
            {"location": mean, "scale": sd},
            {"location": mean, "scale": 3.0 * sd},
            {"location": 2.0 * float(np.median(z)) - mean, "scale": 1.5 * sd},
        ]

    def obstacle(self, z: Array, p: Mapping[str, float]) -> str:
        if p["scale"] > 0.1 * WIDEST * float(np.std(z)):
            return (
                "the likelihood still grows as the parent's scale exceeds every measure: the sample is scattered "
                "more than any normal family cut at these bounds"
            )
        return super().obstacle(z, p)


def _log_mass(p: Mapping[str, Number]) -> Number:
    """Return ln of the parent's probability between the bounds; parameters may be arrays over samples."""
    lower, upper = p["lower"], p["upper"]
    assert not isinstance(lower, Jet)
    assert not isinstance(upper, Jet)
    ends = []
    for bound in (lower, upper):
        if np.isfinite(bound):
            ends.append((bound - p["location"]) / p["scale"])
        else:
            ends.append(float(bound))
    a, b = ends
    a_value, b_value = (np.asarray(e.value if isinstance(e, Jet) else e, dtype=np.float64) for e in ends)
    mass = _log_interval(a_value, b_value)
    # Hazards at the two ends: density of the parent there over its mass inside.
    at_a = np.exp(-0.5 * a_value**2 - HALF_LOG_2PI - mass)
    at_b = np.exp(-0.5 * b_value**2 - HALF_LOG_2PI - mass)
    if isinstance(a, Jet) and isinstance(b, Jet):
        second = (at_a * (a_value - at_a), at_a * at_b, -at_b * (b_value + at_b))
        return chain2(a, b, mass, (-at_a, at_b), second)
    if isinstance(a, Jet):
        return chain(a, mass, -at_a, at_a * (a_value - at_a))
    if isinstance(b, Jet):
        return chain(b, mass, at_b, -at_b * (b_value + at_b))
    return mass


_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)


def _log_interval(a: Array, b: Array) -> Array:
    """Return ln(Phi(b) - Phi(a)), from the tail in which the interval lies."""
    a, b = np.where(a > 0.0, -b, a), np.where(a > 0.0, -a, b)
    upper, lower = special.log_ndtr(b), special.log_ndtr(a)
    gap = np.where(np.isneginf(lower), -np.inf, lower - upper)
    narrow = gap > -1e-3
    found = upper + np.log1p(-np.exp(np.where(narrow, -1.0, gap)))
    if not np.any(narrow):
        return np.asarray(found)
    # A narrow interval: the difference of two equal numbers; the mean density by Gauss-Legendre instead.
    a, b = np.where(narrow, a, -1.0), np.where(narrow, b, 1.0)
    at = 0.5 * (a + b) + 0.5 * (b - a) * np.reshape(_NODES, (-1, *(1,) * a.ndim))
    peak = np.max(-0.5 * at**2, axis=0)
    inner = np.tensordot(_WEIGHTS, np.exp(-0.5 * at**2 - peak), axes=1)
    return np.where(narrow, np.log(0.5 * (b - a)) + np.log(inner) + peak - HALF_LOG_2PI, found)
