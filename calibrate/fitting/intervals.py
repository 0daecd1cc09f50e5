"""Profile-likelihood intervals of parameters and fractiles, for samples of every kind.

The interval of a quantity q holds the values with max{ln L: q given} >= max ln L - chi2/2. Its ends are the extremes
of q over the parameters with ln L at that level, found by sequential quadratic programming on exact gradients.

References
----------
D. J. Venzon and S. H. Moolgavkar, Appl. Statist. 37 (1988) 87-94; A. C. Davison, Statistical Models, Cambridge 2003,
section 4.5 (both from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.distributions import Distribution, family
from calibrate.fitting.censored import Search, search_of
from calibrate.fitting.result import Fit

Array = NDArray[np.float64]
Quantity = Callable[[Array], tuple[float, Array]]
"""Value and gradient of a quantity as a function of the free coordinates."""

FARTHEST = 40.0
"""How far an end is sought, in units of its distance in a large sample."""

Interval = tuple[float, float]
NONE: Interval = (math.nan, math.nan)


def parameter_intervals(fit: Fit, confidence: float = 0.95) -> Mapping[str, Interval]:
    """Return the profile-likelihood interval of every estimated parameter.

    Parameters
    ----------
    fit : Fit
        Converged, by maximum likelihood.
    confidence : float
        Of the two-sided interval.

    Returns
    -------
    mapping of str to (float, float)
        NaN where an end was not found; infinite never.
    """
    search, top = _top(fit)

    def quantity(i: int) -> Quantity:
        rule = search.free[i]

        def of(t: Array) -> tuple[float, Array]:
            value = search.parameters(t)[rule.name]
            gradient = np.zeros(t.size)
            gradient[i] = search.slope(rule, value)
            return value, gradient

        return of

    found = {}
    for i, rule in enumerate(search.free):
        low, high = _ends(search, top, quantity(i), confidence)
        found[rule.name] = (search.data.outward(rule.kind, low), search.data.outward(rule.kind, high))
    return found


def fractile_interval(fit: Fit, fractile: float, confidence: float = 0.95) -> Interval:
    """Return the profile-likelihood interval of one fractile, in the unit of the sample.

    Parameters
    ----------
    fit : Fit
        Converged, by maximum likelihood.
    fractile : float
        Non-exceedance probability.
    confidence : float
        Of the two-sided interval.
    """
    search, top = _top(fit)
    u = float(special.ndtri(fractile))
    member = family(fit.family)

    def quantity(t: Array) -> tuple[float, Array]:
        p = search.parameters(t)
        law = Distribution.of(member, tuple(np.asarray(p[name]) for name in member.parameter_names))
        slopes = law.parameter_slopes(u)
        gradient = np.array([float(slopes[r.name]) * search.slope(r, p[r.name]) for r in search.free])
        return float(law.x(u)), gradient

    low, high = _ends(search, top, quantity, confidence)
    return search.data.shift + search.data.unit * low, search.data.shift + search.data.unit * high


def _top(fit: Fit) -> tuple[Search, Array]:
    search = search_of(fit.observations, fit.family, fit.fixed, fit.free)
    inner = {r.name: search.data.inward(r.kind, fit.parameters[r.name]) for r in search.free}
    return search, search.coordinates(inner)


def _ends(search: Search, top: Array, quantity: Quantity, confidence: float) -> Interval:
    with np.errstate(all="ignore"):
        best, _, hessian = search(top)
        drop = 0.5 * float(special.chdtri(1.0, 1.0 - confidence)) / search.seen.n
        gradient = quantity(top)[1]
        try:
            half = np.linalg.cholesky(np.linalg.inv(-hessian))
        except np.linalg.LinAlgError:
            return NONE
        if not np.any(half.T @ gradient):
            return NONE
        region = _Region(search, top, best, math.sqrt(2.0 * drop) * half, drop)
        low, high = (region.extreme(quantity, sign) for sign in (-1.0, 1.0))
    return low, high


@dataclass(frozen=True, slots=True, eq=False)
class _Region:
    """Parameters whose log-likelihood has not fallen by more than the drop.

    Seen in coordinates s, t = top + root s, in which the region of a large sample is the unit ball.
    """

    search: Search
    top: Array
    best: float
    root: Array
    drop: float

    def extreme(self, quantity: Quantity, sign: float) -> float:
        """Return the largest value of the quantity in the region, the smallest for sign -1; NaN if it is not found."""
        slope = self.root.T @ quantity(self.top)[1]
        first = sign * slope / np.linalg.norm(slope)
        for shares in ((1.0,), (0.05, 0.2, 0.5, 1.0)):  # where the way is bent, in stages
            s = first * math.sqrt(shares[0])
            before = shares[0]
            for share in shares:
                s, found = self._climbed(quantity, sign, s * math.sqrt(share / before), share)
                before = share
            if found:
                return quantity(self.top + self.root @ s)[0]
        return math.nan

    def _climbed(self, quantity: Quantity, sign: float, start: Array, share: float) -> tuple[Array, bool]:
        """Return where the quantity is extreme with a share of the drop, and whether that is on its level."""
        from scipy.optimize import minimize

        size = float(np.linalg.norm(self.root.T @ quantity(self.top)[1]))
        centre = quantity(self.top)[0]

        def cost(s: Array) -> tuple[float, Array]:
            value, slope = quantity(self.top + self.root @ s)
            return -sign * (value - centre) / size, -sign * (self.root.T @ slope) / size

        last: dict[bytes, tuple[float, Array]] = {}

        def level(s: Array) -> tuple[float, Array]:
            key = s.tobytes()
            if key not in last:
                last.clear()
                last[key] = self.search.first(self.top + self.root @ s)
            return last[key]

        def rest(s: Array) -> float:
            value = level(s)[0]
            return (value - self.best) / self.drop + share if math.isfinite(value) else -1e3

        def slopes(s: Array) -> Array:
            return np.nan_to_num(self.root.T @ level(s)[1]) / self.drop

        found = minimize(
            cost, 0.9 * start, jac=True, method="SLSQP", bounds=[(-FARTHEST, FARTHEST)] * start.size,
            constraints={"type": "ineq", "fun": rest, "jac": slopes}, options={"ftol": 1e-12, "maxiter": 100},
        )  # fmt: skip
        return np.asarray(found.x), bool(abs(rest(found.x)) < 1e-4)
