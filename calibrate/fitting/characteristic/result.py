"""What was asked of a sample, and the characteristic value that answers it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Doubt

Array = NDArray[np.float64]

INTERVAL_LEVEL = 0.95
"""Confidence of two-sided intervals of a fractile."""

FAR_OUT = 0.1
"""Expected number of specimens beyond the fractile below which a doubt is recorded."""


@dataclass(frozen=True, slots=True, eq=False)
class CharacteristicValue:
    """A fractile as estimated, limited or predicted from a sample, in the unit of the sample.

    Attributes
    ----------
    value : float
        The characteristic value.
    route : str
        How it was found, one of `calibrate.fitting.characteristic.ROUTES`.
    fractile : float
    confidence : float or None
        That the value lies on the safe side of the fractile; None where the route knows no confidence.
    family : str or None
        None for a distribution-free limit.
    n : int
        Number of specimens.
    factor : float or None
        k in location - k scale (lower fractile) or location + k scale (upper): mean and sd of normal values, or of
        logarithms for `lognormal`; location and scale of the Gumbel families, or of the logarithms of `weibull` and
        `frechet`. None where no such factor exists.
    point_estimate : float
        The fractile with no allowance for the size of the sample and with no floor.
    mean, cov : float
        Of the values as they are (of the fitted distribution for a sample with bounds); cov with n - 1, NaN if it
        cannot be computed.
    cov_used : float or None
        The cov behind the value: of the family, after a floor, or the known one; None if the family has no part in it.
    floored : bool
        Whether the floor of the cov took effect.
    interval : (float, float) or None
        Two-sided confidence interval of the fractile at ``interval_level``; None where none is defined, among others
        if a floor took effect.
    interval_level : float
    statement : str
        One sentence for the report.
    notes : tuple of str
        Full sentences on the method.
    monte_carlo_error : float or None
        Standard error of ``value`` from simulation; None if nothing was simulated.
    doubts : tuple of Doubt
    """

    value: float
    route: str
    fractile: float
    confidence: float | None
    family: str | None
    n: int
    factor: float | None
    point_estimate: float
    mean: float
    cov: float
    cov_used: float | None
    floored: bool
    interval: tuple[float, float] | None
    statement: str
    doubts: tuple[Doubt, ...] = ()
    notes: tuple[str, ...] = ()
    monte_carlo_error: float | None = None
    interval_level: float = INTERVAL_LEVEL


@dataclass(frozen=True, slots=True)
class Request:
    """What is asked of a sample; checked by whoever creates it."""

    fractile: float
    confidence: float | None
    route: str
    family: str | None

    @property
    def lower(self) -> bool:
        """Whether the safe side is below the fractile."""
        return self.fractile <= 0.5

    @property
    def sign(self) -> float:
        """-1 for a lower fractile, 1 for an upper one: value = location + sign k scale."""
        return -1.0 if self.lower else 1.0

    @property
    def where(self) -> str:
        """Place of its doubts."""
        return f"characteristic.{self.family or 'distribution_free'}"

    def what(self) -> str:
        """Return the beginning of the statement: the fractile and how sure it is."""
        name = f"{percent(self.fractile)} fractile"
        if self.confidence is not None:
            return f"{name} at {percent(self.confidence)} confidence"
        return f"predictive {name}" if self.route.startswith("prediction") else f"{name} as point estimate"

    def statement(self, n: int, factor: float | None = None, extra: str = "") -> str:
        """Return the sentence for the report."""
        parts = [self.what(), str(self.family)]
        if extra:
            parts.append(extra)
        parts.append(f"n = {n}")
        if factor is not None:
            parts.append(f"k = {factor:.2f}")
        return ", ".join(parts)

    def answer(
        self,
        values: Array,
        *,
        value: float,
        factor: float | None,
        doubts: tuple[Doubt, ...] = (),
        **rest: Any,
    ) -> CharacteristicValue:
        """Return the result; mean, cov and n come from the values unless given."""
        given: dict[str, Any] = {
            "mean": float(np.mean(values)),
            "cov": sample_cov(values),
            "n": int(values.size),
            "cov_used": None,
            "floored": False,
            "interval": None,
            **rest,
        }
        if "statement" not in given:
            given["statement"] = self.statement(given["n"], factor)
        return CharacteristicValue(
            value=value,
            route=self.route,
            fractile=self.fractile,
            confidence=self.confidence,
            family=self.family,
            factor=factor,
            doubts=(*doubts, *self._general_doubts(values, value)),
            **given,
        )

    def _general_doubts(self, values: Array, value: float) -> list[Doubt]:
        doubts = []
        if value < 0.0 <= float(np.min(values)):
            message = (
                f"The {percent(self.fractile)} fractile comes out negative ({value:.4g}) although no value of the "
                "sample is; the family has too much mass below zero for this scatter."
            )
            doubts.append(Doubt("negative-characteristic", message, self.where))
        beyond = min(self.fractile, 1.0 - self.fractile) * values.size
        if self.family is not None and beyond < FAR_OUT:
            end = "smallest" if self.lower else "largest"
            message = (
                f"The {percent(self.fractile)} fractile lies far beyond the {end} of {values.size} values; it rests on "
                f"the family '{self.family}', which such a sample cannot confirm there."
            )
            doubts.append(Doubt("far-fractile", message, self.where))
        return doubts


def sample_cov(values: Array) -> float:
    """Return the coefficient of variation with n - 1; NaN for one value or a mean of zero."""
    mean = abs(float(np.mean(values)))
    return float(np.std(values, ddof=1)) / mean if values.size > 1 and mean > 0.0 else math.nan


def percent(share: float) -> str:
    """Return a share as a percentage without superfluous digits."""
    return f"{100.0 * share:.6g} %"


def ordered(a: float, b: float) -> tuple[float, float]:
    """Return two numbers in rising order."""
    return (a, b) if a <= b else (b, a)
