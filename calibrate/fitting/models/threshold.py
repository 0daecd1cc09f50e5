# ruff: noqa: D102  (the formulas are documented in Model)
"""Likelihoods of the families that begin at a threshold."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import ClassVar

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number, seed, total
from calibrate.fitting.model import Model, NoMaximumError, Rule, needs_above
from calibrate.fitting.models.extremes import WeibullModel
from calibrate.fitting.models.normal import LognormalModel

# Distance of the threshold below the smallest value, in standard deviations of the sample.
_NEAREST = 1e-8
_FARTHEST = 3e4
_GRID = np.geomspace(_NEAREST, _FARTHEST, 84)


class ThresholdModel(Model):
    """A positive family, moved; the threshold is given unless it is asked for.

    Notes
    -----
    With the threshold free, the likelihood can grow without bound as the
    threshold approaches the smallest value. The estimate is then the local
    maximum, which is consistent [1]_ [2]_; it is sought on the profile over
    the threshold, so that its absence is seen and not mistaken for slow
    progress.

    References
    ----------
    .. [1] B. M. Hill, The three-parameter lognormal distribution and Bayesian
       analysis of a point-source epidemic, JASA 58 (1963) 72-84.
    .. [2] R. L. Smith, Maximum likelihood estimation in a class of nonregular
       cases, Biometrika 72 (1985) 67-90.
    """

    base: ClassVar[Model]
    limit: ClassVar[str]
    """The family that it becomes as the threshold falls without end."""

    origin = "lowest"
    asked = ("threshold",)
    third = "skewness"
    third_parameter = "threshold"

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        if "threshold" not in fixed:
            return None
        return needs_above(x, fixed["threshold"], f"its threshold {fixed['threshold']:.12g}")

    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        return self.base.log_density(z - p["threshold"], p)

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float] | None:
        if "threshold" not in fixed:
            return None
        found = self.base.exact(z - fixed["threshold"], {})
        return None if found is None else {"threshold": fixed["threshold"], **found}

    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        others = {k: v for k, v in fixed.items() if k != "threshold"}
        if "threshold" in fixed:
            moved = self.base.starts(z - fixed["threshold"], others)
            return [{"threshold": fixed["threshold"], **p} for p in moved]
        sd = float(np.std(z))
        if others:
            return [
                {"threshold": float(np.min(z)) - gap * sd, **p}
                for gap in (0.05, 0.5, 2.0, 8.0)
                for p in self.base.starts(z - float(np.min(z)) + gap * sd, others)
            ]
        gaps, profile = self._profile(z)
        i = self._local_maximum(profile)
        gap = float(gaps[i])
        return [{"threshold": float(np.min(z)) - gap, **self._given(z, gap)}]

    def notes(self, z: Array, p: Mapping[str, float], free: Sequence[str]) -> list[tuple[str, str]]:
        if "threshold" not in free:
            return []
        gaps, profile = self._profile(z)
        gap = float(np.min(z)) - p["threshold"]
        here = float(np.interp(math.log(gap), np.log(gaps), profile))
        if float(np.max(profile[gaps < gap], initial=-np.inf)) <= here + 1e-6:
            return []
        message = (
            "The likelihood grows without bound as the threshold approaches the smallest value; "
            "the estimate is its local maximum."
        )
        return [("unbounded-likelihood", message)]

    def _given(self, z: Array, gap: float) -> dict[str, float]:
        found = self.base.exact(z - float(np.min(z)) + gap, {})
        assert found is not None
        return found

    def _profile(self, z: Array) -> tuple[Array, Array]:
        """Return distances of the threshold below the smallest value, and the log-likelihood at each."""
        gaps = _GRID * float(np.std(z))
        lowest = float(np.min(z))
        profile = np.empty(gaps.size)
        for i, gap in enumerate(gaps):
            p = self._given(z, float(gap))
            # Only the value is wanted: one scale parameter as a seed makes the formula return it.
            first = next(rule.name for rule in self.base.rules)
            seeded: dict[str, Number] = {**p, first: seed(0, 1, p[first], 0.0, 0.0)}
            profile[i] = total(self.base.log_density(z - lowest + gap, seeded), z.size)[0]
        return gaps, profile

    def _local_maximum(self, profile: Array) -> int:
        inner = np.flatnonzero((profile[1:-1] >= profile[:-2]) & (profile[1:-1] > profile[2:])) + 1
        far = float(profile[-1])
        best = int(inner[np.argmax(profile[inner])]) if inner.size else -1
        if best >= 0 and profile[best] > far:
            return best
        if profile[-1] > profile[-3]:
            raise NoMaximumError(
                "the likelihood grows as the threshold falls without end: the sample shows no threshold, "
                f"and the family {self.limit} is the limit"
            )
        raise NoMaximumError(
            "the likelihood has no maximum: it grows without bound as the threshold approaches the smallest value"
        )


class Weibull3Model(ThresholdModel):
    """Regular for shapes above two."""

    family = "weibull3"
    base = WeibullModel()
    limit = "gumbel_min"
    rules = (Rule("threshold", "threshold"), *WeibullModel.rules)

    def irregular(self, p: Mapping[str, float], free: Sequence[str]) -> str | None:
        if "threshold" not in free or p["shape"] > 2.0:
            return None
        return (
            f"The shape {p['shape']:.3g} is not above 2, where the likelihood of an estimated threshold is not "
            "regular and standard errors from it do not hold."
        )


class Lognormal3Model(ThresholdModel):
    """Regular at its local maximum."""

    family = "lognormal3"
    base = LognormalModel()
    limit = "normal"
    rules = (Rule("threshold", "threshold"), *LognormalModel.rules)
