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

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.distributions import Distribution, family
from calibrate.fitting.censored import Search, search_of
from calibrate.fitting.result import Fit

Array = NDArray[np.float64]
Quantity = Callable[[Array], tuple[float, Array]]
"""Value and gradient of a quantity as a function of the free coordinates."""

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
    from scipy.optimize import minimize

    with np.errstate(all="ignore"):
        best, _, hessian = search(top)
        drop = 0.5 * float(special.chdtri(1.0, 1.0 - confidence)) / search.seen.n
        gradient = quantity(top)[1]
        try:
            along = np.linalg.solve(-hessian, gradient)
        except np.linalg.LinAlgError:
            return NONE
        reach = float(gradient @ along)
        if not reach > 0.0:
            return NONE
        first = along * math.sqrt(2.0 * drop / reach)
        level = best - drop
        ends = []
        for sign in (-1.0, 1.0):
            size = max(abs(sign * float(gradient @ first)), 1e-300)

            def cost(t: Array, sign: float = sign, size: float = size) -> tuple[float, Array]:
                value, slope = quantity(t)
                return -sign * value / size, -sign * slope / size

            def rest(t: Array) -> float:
                value = search.first(t)[0]
                return (value - level) / drop if math.isfinite(value) else -1e6

            def slopes(t: Array) -> Array:
                return np.nan_to_num(search.first(t)[1]) / drop

            found = minimize(
                cost, top + 0.9 * sign * first, jac=True, method="SLSQP",
                constraints={"type": "ineq", "fun": rest, "jac": slopes}, options={"ftol": 1e-12, "maxiter": 200},
            )  # fmt: skip
            on_level = abs(rest(found.x)) < 1e-4
            ends.append(quantity(found.x)[0] if on_level else math.nan)
    return ends[0], ends[1]
