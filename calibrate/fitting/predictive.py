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
from calibrate.fitting.censored import log_likelihoods, search_of
from calibrate.fitting.result import Fit

Array = NDArray[np.float64]

NODES = {1: 15, 2: 9, 3: 7, 4: 5}
"""Quadrature points per parameter, by the number of parameters."""

BLOCK = 1_000_000
"""Densities held at a time."""


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
    nodes, weight = _nodes(covariance)
    points = [search.parameters(centre + step) for step in nodes]
    member = family(fit.family)
    kinds = {r.name: r.kind for r in search.model.rules}
    parameters = tuple(
        np.array([fit.fixed.get(p, data.outward(kinds[p], point[p])) for point in points])
        for p in member.parameter_names
    )
    laws = Distribution.of(member, parameters)
    if fit.method == "likelihood":
        allowed = np.array([search.model.allowed(search.exact, p) for p in points])
        weight = np.where(allowed, weight * _likelihood_ratios(fit, laws, nodes, covariance), 0.0)
    return mixture(laws, weight)


def _nodes(covariance: Array) -> tuple[Array, Array]:
    """Return points around zero, shape (K, f), and weights of Gauss-Hermite quadrature over a normal distribution.

    The axes are those of the correlation, so that they do not turn with the unit of a coordinate.
    """
    spread = np.sqrt(np.diag(covariance))
    scale = np.where(spread > 0.0, spread, 1.0)
    values, vectors = np.linalg.eigh(covariance / np.outer(scale, scale))
    root = scale[:, None] * vectors * np.sqrt(np.maximum(values, 0.0))
    one, weights = np.polynomial.hermite_e.hermegauss(NODES.get(spread.size, 5))
    grid = np.array(list(itertools.product(one, repeat=spread.size)))
    return grid @ root.T, np.prod(np.array(list(itertools.product(weights, repeat=spread.size))), axis=1)


def _likelihood_ratios(fit: Fit, laws: Distribution, nodes: Array, covariance: Array) -> Array:
    """Return the likelihood of each distribution over that of the normal approximation, both one at the estimate."""
    block = max(1, BLOCK // fit.n)
    found = []
    for at in range(0, len(nodes), block):
        rows = tuple(np.reshape(v[at : at + block], (-1, 1)) if v.ndim else v for v in laws.values)
        found.append(log_likelihoods(Distribution.of(laws.family, rows), fit.observations))
    squares = np.sum(nodes * np.linalg.solve(covariance, nodes.T).T, axis=1)
    return np.asarray(np.exp(np.concatenate(found) - fit.log_likelihood + 0.5 * squares))
