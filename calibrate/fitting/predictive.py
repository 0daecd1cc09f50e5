"""The distribution of a further specimen, which carries the uncertainty of the estimated parameters.

Normal and lognormal variables from a complete sample: Student's t, exactly (the prediction of EN 1990 Annex D.7). All
others: the fitted family, mixed over the parameters by Gauss-Hermite quadrature in the coordinates of the search. Nodes
weigh by the likelihood, which for location and scale, and for what is that after taking logarithms, is the exact
prediction (flat priors of location and logarithm of scale: J. F. Lawless, Statistical Models
and Methods for Lifetime Data, 2nd ed., Wiley 2003, chapter 4, from memory). Where the fit is not one of largest
likelihood they weigh as a normal distribution with its covariance.
"""

from __future__ import annotations

import itertools
import math

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution, distribution, family, mixture
from calibrate.fitting.censored import Search, search_of
from calibrate.fitting.result import Fit

Array = NDArray[np.float64]

NODES = {1: 15, 2: 9, 3: 7, 4: 5}
"""Quadrature points per parameter, by the number of parameters."""


def predictive(fit: Fit) -> Distribution | None:
    """Return the predictive distribution of a converged fit, in the unit of the sample.

    Parameters
    ----------
    fit : Fit
        By any method with a covariance.

    Returns
    -------
    Distribution or None
        Of shape (); None where the covariance is not known.
    """
    if fit.own_predictive is not None:
        return fit.own_predictive
    plain = fit.method in ("likelihood", "moments") and not fit.fixed and fit.observations.complete
    if plain and fit.family in ("normal", "lognormal") and fit.n > 1:
        return _student(fit)
    return _mixed(fit)


def _student(fit: Fit) -> Distribution:
    x = np.log(fit.values) if fit.family == "lognormal" else fit.values
    n = fit.n
    level, wide = float(np.mean(x)), float(np.std(x, ddof=1)) * math.sqrt(1.0 + 1.0 / n)
    if fit.family == "lognormal":
        return distribution("log_student_t", median=math.exp(level), log_scale=wide, freedom=n - 1.0)
    return distribution("student_t", location=level, scale=wide, freedom=n - 1.0)


def _mixed(fit: Fit) -> Distribution | None:
    assert fit.distribution is not None
    scatter = np.asarray(fit.covariance, dtype=np.float64)
    if not np.isfinite(scatter).all():
        return None
    search = search_of(fit.observations, fit.family, fit.fixed, fit.free)
    data = search.data
    inner = {r.name: data.inward(r.kind, fit.parameters[r.name]) for r in search.free}
    centre = search.coordinates(inner)
    stretch = np.array([data.stretch(r.kind) * search.slope(r, inner[r.name]) for r in search.free])
    covariance = scatter / np.outer(stretch, stretch)
    values, vectors = np.linalg.eigh(covariance)
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    count = NODES.get(len(search.free), 5)
    nodes, weights = np.polynomial.hermite_e.hermegauss(count)
    grid = np.array(list(itertools.product(nodes, repeat=centre.size)))
    weight = np.prod(np.array(list(itertools.product(weights, repeat=centre.size))), axis=1)
    points = centre + grid @ root.T
    if fit.method == "likelihood":
        weight = weight * _likelihood_ratio(search, centre, points, grid)
    rows = [search.parameters(t) for t in points]
    member = family(fit.family)
    kinds = {r.name: r.kind for r in search.model.rules}
    parameters = tuple(
        np.array([fit.fixed.get(p, data.outward(kinds[p], row[p])) for row in rows])
        for p in member.parameter_names
    )
    return mixture(Distribution.of(member, parameters), weight)


def _likelihood_ratio(search: Search, centre: Array, points: Array, grid: Array) -> Array:
    """Return the likelihood at the points over that of the normal approximation, both one at the centre."""
    with np.errstate(all="ignore"):
        best = search.first(centre)[0]
        logs = np.array([search.first(t)[0] for t in points]) - best
        return np.where(np.isfinite(logs), np.exp(search.seen.n * logs + 0.5 * np.sum(grid**2, axis=1)), 0.0)
