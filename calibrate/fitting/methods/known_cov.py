"""A coefficient of variation known from earlier production: the sample only sets the level."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import ClassVar

import numpy as np

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting.likelihood import Estimate, maximum_likelihood
from calibrate.fitting.methods.base import Method
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations


class KnownCov(Method):
    """The scatter follows from the known cov, the level from the sample.

    For families with a shape (lognormal, weibull, gamma, frechet) the cov fixes the shape and the scale is the
    maximum of the likelihood; for normal and gumbel the mean is that of the sample.
    """

    name = "known_cov"
    title = "known coefficient of variation"
    source = "EN 1990 Annex D.7, case 'V_X known' (from memory)"
    families = ("normal", "lognormal", "gumbel", "weibull", "gamma", "frechet")
    options: ClassVar[Mapping[str, str]] = {"cov": "the known coefficient of variation"}
    required = ("cov",)

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the level, the scatter given."""
        cov = options["cov"]
        if not (math.isfinite(cov) and cov > 0.0):
            raise InputError(f"The known cov must be positive; got {cov:g}.")
        if fixed:
            raise InputError("With a known cov no other parameter can be fixed.")
        x = seen.values
        shape = {"lognormal": "log_sd", "weibull": "shape", "gamma": "shape", "frechet": "shape"}.get(
            model.family
        )
        if shape is not None:
            given = {shape: float(distribution(model.family, mean=1.0, cov=cov).parameters[shape])}
            level = tuple(name for name in free if name != shape)
            found = maximum_likelihood(x, model, given, level)
            return found if found.reason else _widened(found, free)
        mean = float(np.mean(x))
        if not mean > 0.0:
            return Estimate.failed(free, "a cov says something only for a sample with a positive mean")
        law = distribution(model.family, mean=mean, cov=cov)
        parameters = {name: float(v) for name, v in law.parameters.items()}
        slopes = np.array([parameters[name] / mean for name in free])
        covariance = np.outer(slopes, slopes) * (cov * mean) ** 2 / seen.n
        return Estimate(parameters, free, covariance, float(np.sum(law.logpdf(x))), estimated=1)


def _widened(found: Estimate, free: tuple[str, ...]) -> Estimate:
    """Return the estimate over all parameters; what the cov fixes has no variance."""
    covariance = np.zeros((len(free), len(free)))
    rows = [free.index(name) for name in found.free]
    covariance[np.ix_(rows, rows)] = found.covariance
    return Estimate(
        found.parameters, free, covariance, found.log_likelihood, "", found.notes, len(found.free)
    )
