"""Maximum likelihood, for samples of every kind."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.fitting.censored import censored_likelihood
from calibrate.fitting.likelihood import Estimate, maximum_likelihood
from calibrate.fitting.methods.base import INTERVAL, LEFT, RIGHT, TRUNCATED, Method
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations

EVERY_KIND = frozenset({RIGHT, LEFT, INTERVAL, TRUNCATED})


class Likelihood(Method):
    """Maximum likelihood."""

    name = "likelihood"
    title = "maximum likelihood"
    source = "J. F. Lawless, Statistical Models and Methods for Lifetime Data, 2nd ed., Wiley 2003, chapter 2"
    honours = EVERY_KIND

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the maximum of the likelihood."""
        del options
        if seen.complete:
            return maximum_likelihood(seen.values, model, fixed, free)
        if not model.regular:
            return Estimate.failed(
                free, f"the family '{model.family}' can be estimated from complete samples only"
            )
        return censored_likelihood(seen, model, fixed, free)


class UnbiasedWeibull(Method):
    """Maximum likelihood with the shape corrected for its bias in small samples."""

    name = "likelihood_unbiased"
    title = "maximum likelihood, shape corrected for small samples"
    source = (
        "R. Ross, IEEE Transactions on Dielectrics and Electrical Insulation 3 (1996): shape times (n - 2)/(n - 0.68); "
        "recalled from memory"
    )
    families = ("weibull",)

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the maximum of the likelihood, its shape lowered."""
        del options
        found = maximum_likelihood(seen.values, model, fixed, free)
        if found.reason or "shape" not in free:
            return found
        if seen.n < 3:
            return Estimate.failed(free, "the correction needs at least three values")
        ratio = (seen.n - 2.0) / (seen.n - 0.68)
        parameters = {**found.parameters, "shape": found.parameters["shape"] * ratio}
        covariance = found.covariance.copy()
        i = free.index("shape")
        covariance[i] *= ratio
        covariance[:, i] *= ratio
        law = Distribution.of(family(model.family), tuple(np.asarray(v) for v in parameters.values()))
        density = float(np.sum(law.logpdf(seen.values)))
        return replace(found, parameters=parameters, covariance=covariance, log_likelihood=density)
