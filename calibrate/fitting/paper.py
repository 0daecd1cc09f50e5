"""Probability paper: the scales on which the members of a family are straight lines.

On its paper a family reads y = a + b q(p), with y the value or its logarithm and q the reduced variate of the
non-exceedance probability p.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.records.observations import Observations

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Paper:
    """The paper of one family.

    Attributes
    ----------
    logarithmic : bool
        Whether y is the logarithm of the value (less the threshold, where the family has one).
    variate : callable
        Reduced variate q of the non-exceedance probability.
    through_origin : bool
        Whether a is zero for all members.
    scale_name, inverse : str, bool
        The parameter that b stands for, and whether it is 1/b.
    level_name : str
        The parameter that a stands for; empty where there is none.
    """

    logarithmic: bool
    variate: Callable[[Array], Array]
    level_name: str
    scale_name: str
    inverse: bool = False
    through_origin: bool = False

    def parameters(self, a: float, b: float) -> dict[str, float]:
        """Return the parameters of the line y = a + b q."""
        found = {self.scale_name: 1.0 / b if self.inverse else b}
        if self.level_name:
            found[self.level_name] = float(np.exp(a)) if self.logarithmic else a
        return found

    def slopes(self, a: float, b: float) -> dict[str, Array]:
        """Return the derivatives of each parameter by (a, b)."""
        found = {self.scale_name: np.array([0.0, -1.0 / b**2 if self.inverse else 1.0])}
        if self.level_name:
            found[self.level_name] = np.array([float(np.exp(a)) if self.logarithmic else 1.0, 0.0])
        return found


def _normal(p: Array) -> Array:
    return np.asarray(special.ndtri(p))


def _largest(p: Array) -> Array:
    return np.asarray(-np.log(-np.log(p)))


def _smallest(p: Array) -> Array:
    return np.asarray(np.log(-np.log1p(-p)))


def _exponential(p: Array) -> Array:
    return np.asarray(-np.log1p(-p))


PAPERS: Mapping[str, Paper] = MappingProxyType(
    {
        "normal": Paper(False, _normal, "location", "scale"),
        "lognormal": Paper(True, _normal, "median", "log_sd"),
        "gumbel": Paper(False, _largest, "location", "scale"),
        "gumbel_min": Paper(False, _smallest, "location", "scale"),
        "weibull": Paper(True, _smallest, "scale", "shape", inverse=True),
        "frechet": Paper(True, _largest, "scale", "shape", inverse=True),
        "exponential": Paper(False, _exponential, "", "scale", through_origin=True),
        "lognormal3": Paper(True, _normal, "median", "log_sd"),
        "weibull3": Paper(True, _smallest, "scale", "shape", inverse=True),
    }
)
"""Families with a paper of their own."""


def positions(seen: Observations) -> tuple[Array, Array]:
    """Return the exact values in order and their plotting positions.

    For a complete sample these are Hazen's, (i - 1/2)/n. With right-censored specimens the product-limit estimate S
    takes the place of the ranks: each value stands at 1 - (S before + S after)/2, which is Hazen's position again
    where nothing is censored. Intervals stand at their middle; left-censored specimens raise the rank of those above.

    References
    ----------
    W. Q. Meeker and L. A. Escobar, Statistical Methods for Reliability Data, Wiley 1998, section 6.4 (from memory).
    """
    values, censored = seen.values, seen.right
    order = np.lexsort((censored, values))  # at one load failures come before survivors
    values, censored, left = values[order], censored[order], seen.left[order]
    n = values.size
    at_risk = n - np.arange(n, dtype=np.float64)
    after = np.cumprod(np.where(censored, 1.0, 1.0 - 1.0 / at_risk))
    before = np.concatenate([[1.0], after[:-1]])
    shown = ~censored & ~left
    return np.asarray(values[shown]), np.asarray(1.0 - 0.5 * (before + after)[shown])
