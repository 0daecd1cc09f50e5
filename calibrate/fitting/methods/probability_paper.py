"""Least squares on probability paper: the line of the committee's figure, computed."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.fitting.jets import Array
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import INTERVAL, LEFT, RIGHT, Method
from calibrate.fitting.methods.order_scatter import combination_covariance
from calibrate.fitting.model import Model
from calibrate.fitting.paper import PAPERS, Paper, positions
from calibrate.records.observations import Observations


class ProbabilityPaper(Method):
    """Ordered values against the reduced variate of their plotting positions, by least squares.

    Standard errors carry the scatter and the dependence of order statistics at the fitted distribution; they are not
    given for censored samples.
    """

    name = "probability_paper"
    title = "least squares on probability paper"
    source = "plotting positions of Hazen, product-limit positions for censored samples; common practice"
    honours = frozenset({RIGHT, LEFT, INTERVAL})
    families = tuple(PAPERS)

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the parameters of the line."""
        del options
        paper = PAPERS[model.family]
        if set(fixed) - {"threshold"} or "threshold" in free:
            return Estimate.failed(free, "on probability paper only the threshold can be, and must be, fixed")
        threshold = fixed.get("threshold", 0.0)
        values, p = positions(seen)
        if np.unique(values).size < 2:
            return Estimate.failed(free, "fewer than two different values were observed exactly")
        y = np.log(values - threshold) if paper.logarithmic else values
        q = paper.variate(p)
        weights = _line_weights(q, through_origin=paper.through_origin)
        a, b = (float(v) for v in weights @ y)
        if not b > 0.0:
            return Estimate.failed(free, "the line on the paper does not rise")
        parameters = {**fixed, **paper.parameters(a, b)}
        ordered = {name: float(parameters[name]) for name in family(model.family).parameter_names}
        law = Distribution.of(family(model.family), tuple(np.asarray(v) for v in ordered.values()))
        covariance, notes = self._covariance(seen, law, paper, free, (a, b), weights, threshold)
        from calibrate.fitting.censored import log_likelihood

        return Estimate(ordered, free, covariance, log_likelihood(law, seen), "", notes)

    @staticmethod
    def _covariance(
        seen: Observations,
        law: Distribution,
        paper: Paper,
        free: tuple[str, ...],
        line: tuple[float, float],
        weights: Array,
        threshold: float,
    ) -> tuple[Array, tuple[tuple[str, str], ...]]:
        if not seen.complete:
            message = (
                "Standard errors of a line through a censored sample are not known; use method 'likelihood'."
            )
            return np.full((len(free), len(free)), np.nan), (("no-standard-errors", message),)
        scatter = combination_covariance(weights, law, log_above=threshold if paper.logarithmic else None)
        slopes = paper.slopes(*line)
        jacobian = np.array([slopes[name] for name in free])
        return np.asarray(jacobian @ scatter @ jacobian.T), ()


def _line_weights(q: Array, *, through_origin: bool) -> Array:
    """Return the weights, shape (2, n), with which least squares makes a and b from y."""
    if through_origin:
        return np.vstack([np.zeros_like(q), q / np.dot(q, q)])
    centred = q - q.mean()
    slope = centred / np.dot(centred, centred)
    return np.vstack([1.0 / q.size - q.mean() * slope, slope])
