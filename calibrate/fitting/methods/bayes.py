"""Normal and lognormal variables with prior knowledge of mean and scatter, updated by the sample."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import ClassVar

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.errors import InputError
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import Method
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations


class Bayes(Method):
    """Conjugate prior: equivalent samples of sizes n' for the mean and nu' for the scatter.

    n'' = n' + n;  m'' = (n' m' + n m)/n'';  nu'' = nu' + nu + 1 (nu' + nu where n' = 0), nu = n - 1;
    s''^2 = [nu' s'^2 + n' m'^2 + nu s^2 + n m^2 - n'' m''^2]/nu''. A further specimen is m'' + t s'' sqrt(1 + 1/n'')
    with Student's t of nu'' degrees of freedom. Lognormal: the same of the logarithms.
    """

    name = "bayes"
    title = "Bayesian updating with a conjugate prior"
    source = "ISO 12491:1997 and EN 1990 Annex D (from memory)"
    families = ("normal", "lognormal")
    options: ClassVar[Mapping[str, str]] = {
        "prior_mean": "prior mean of the variable",
        "prior_cov": "prior coefficient of variation",
        "prior_n": "number of tests that the prior knowledge of the mean is worth; 0 for none",
        "prior_nu": "degrees of freedom that the prior knowledge of the scatter is worth; 0 for none",
    }
    required = ("prior_mean", "prior_cov", "prior_n", "prior_nu")

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the posterior means of level and scatter, and the predictive distribution."""
        if fixed:
            raise InputError("With prior knowledge no parameter can be fixed.")
        logarithmic = model.family == "lognormal"
        prior_mean, prior_sd, prior_n, prior_nu = _prior(options, logarithmic=logarithmic)
        x = np.log(seen.values) if logarithmic else seen.values
        n, mean = seen.n, float(np.mean(x))
        nu = n - 1
        total = prior_n + n
        centre = (prior_n * prior_mean + n * mean) / total
        freedom = prior_nu + nu + (1.0 if prior_n > 0.0 else 0.0)
        # Sums of squares about the common centre lose nothing where the mean is large.
        squares = (
            prior_nu * prior_sd**2
            + float(np.sum((x - mean) ** 2))
            + prior_n * (prior_mean - centre) ** 2
            + n * (mean - centre) ** 2
        )
        scale = math.sqrt(squares / freedom)
        wide = scale * math.sqrt(1.0 + 1.0 / total)
        log_covariance = np.diag([scale**2 / total, scale**2 / (2.0 * freedom)])
        if logarithmic:
            values = {"median": math.exp(centre), "log_sd": scale}
            stretch = np.diag([values["median"], 1.0])
            predictive = (
                "log_student_t",
                {"median": math.exp(centre), "log_scale": wide, "freedom": freedom},
            )
        else:
            values = {"location": centre, "scale": scale}
            stretch = np.eye(2)
            predictive = ("student_t", {"location": centre, "scale": wide, "freedom": freedom})
        law = Distribution.of(family(model.family), tuple(np.asarray(v) for v in values.values()))
        notes = [("prior-knowledge", _words(options, n))]
        if prior_n > 0.0:
            within = prior_sd if prior_nu > 0.0 else float(np.std(x, ddof=1))
            distance = abs(mean - prior_mean) / (within * math.sqrt(1.0 / n + 1.0 / prior_n))
            if distance > 2.0:
                message = (
                    f"The mean of the sample lies {distance:.1f} standard errors from the prior mean; the prior and "
                    "the sample may not be of one population."
                )
                notes.append(("prior-contradicted", message))
        return Estimate(
            values, free, stretch @ log_covariance @ stretch, float(np.sum(law.logpdf(seen.values))), "",
            tuple(notes), None, predictive,
        )  # fmt: skip


def _prior(options: Mapping[str, float], *, logarithmic: bool) -> tuple[float, float, float, float]:
    mean, cov, n, nu = (options[k] for k in ("prior_mean", "prior_cov", "prior_n", "prior_nu"))
    if not (math.isfinite(cov) and cov > 0.0):
        raise InputError(f"prior_cov must be positive; got {cov:g}.")
    for name, value in (("prior_n", n), ("prior_nu", nu)):
        if not (math.isfinite(value) and value >= 0.0):
            raise InputError(f"{name} must be zero or positive; got {value:g}.")
    if not math.isfinite(mean) or (logarithmic and mean <= 0.0):
        raise InputError(
            f"prior_mean must be {'positive' if logarithmic else 'a finite number'}; got {mean:g}."
        )
    if mean == 0.0 and nu > 0.0:
        raise InputError(
            "prior_mean must not be zero where prior_nu counts: a cov says nothing of its scatter."
        )
    if not logarithmic:
        return mean, cov * abs(mean), n, nu
    log_sd = math.sqrt(math.log1p(cov * cov))
    return math.log(mean) - 0.5 * log_sd**2, log_sd, n, nu


def _words(options: Mapping[str, float], n: int) -> str:
    return (
        f"Prior knowledge (mean {options['prior_mean']:g}, cov {options['prior_cov']:g}) counts as "
        f"{options['prior_n']:g} tests for the mean and {options['prior_nu']:g} degrees of freedom for the scatter, "
        f"beside {n} tests of this sample."
    )
