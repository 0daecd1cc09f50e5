"""Tests of fit whose p-values hold although parameters were estimated: by parametric bootstrap of the refit.

Every simulated sample is fitted as the sample was, all at once, and its statistic compared with that of the sample
(W. Stute, W. Gonzales Manteiga and M. Presedo Quindimil, Metrika 40 (1993) 243-256). A small p-value says that such a
distance is rare if the family is right; a large one says "not rejected", never "correct".
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.distributions import Distribution
from calibrate.distributions.normal_tails import u_from_log_tails
from calibrate.fitting.paper import PAPERS
from calibrate.fitting.replicates import replicate
from calibrate.fitting.result import Fit

Array = NDArray[np.float64]

REPLICATES = 999
LARGEST = 200
"""Size up to which samples are simulated as large as the sample; beyond, the statistics no longer depend on it."""

STATISTICS = (
    "anderson_darling",
    "cramer_von_mises",
    "kolmogorov_smirnov",
    "lower_tail",
    "upper_tail",
    "plot_correlation",
)
REJECTED = 0.05


@dataclass(frozen=True, slots=True)
class FitTests:
    """Distances between a sample and its fitted distribution, and how rare they are.

    Attributes
    ----------
    statistics : mapping of str to float
        ``anderson_darling`` (A²), ``cramer_von_mises`` (W²), ``kolmogorov_smirnov`` (D), ``lower_tail`` and
        ``upper_tail`` (A² of one tail), ``plot_correlation`` (r of ordered values, on the family's paper or,
        where it has none, turned into standard normal values, with the plotting positions).
    p_values : mapping of str to float
        NaN where the test is not defined: for the tails of a family that ends at the extreme values, for a correlation
        with more than 200 values.
    replicates : int
        Simulated samples with a fit.
    """

    statistics: Mapping[str, float]
    p_values: Mapping[str, float]
    replicates: int

    def rejected(self, name: str) -> bool:
        """Whether a statistic speaks against the family at the level of 5 %."""
        return bool(self.p_values[name] < REJECTED)


def run_fit_tests(fit: Fit, rng: np.random.Generator, replicates: int = REPLICATES) -> FitTests | None:
    """Test a converged fit of a complete sample; None for other samples, for which the statistics are not defined."""
    if fit.distribution is None or not fit.observations.complete:
        return None
    x = np.sort(fit.values)[None, :]
    law = fit.distribution
    column = Distribution.of(law.family, tuple(np.reshape(v, (1, 1)) for v in law.values))
    threshold = fit.parameters.get("threshold", 0.0)
    own = _statistics(x, column, threshold)
    size = min(fit.n, LARGEST)
    simulated = replicate(fit, replicates, size, rng)
    count = simulated.x.shape[0]
    rivals = _statistics(simulated.x, simulated.laws, threshold) if count else {}
    p_values = {}
    for name in STATISTICS:
        beyond_all = np.isinf(own[name][0]) and count > 0 and bool(np.isinf(rivals[name]).all())
        if not count or beyond_all or (name == "plot_correlation" and size < fit.n):
            p_values[name] = float("nan")
            continue
        # A correlation is the worse the smaller it is; Kolmogorov's distance shrinks with the root of n.
        sign = -1.0 if name == "plot_correlation" else 1.0
        scale = np.sqrt(fit.n / size) if name == "kolmogorov_smirnov" else 1.0
        beyond = int(np.count_nonzero(sign * rivals[name] >= sign * own[name][0] * scale))
        p_values[name] = (1.0 + beyond) / (1.0 + count)
    return FitTests({k: float(v[0]) for k, v in own.items()}, p_values, count)


def _statistics(x: Array, law: Distribution, threshold: float) -> dict[str, Array]:
    """Return the statistics of every row of sorted values, shape (B,) each.

    References
    ----------
    R. B. D'Agostino and M. A. Stephens, Goodness-of-Fit Techniques, Dekker 1986, chapter 4; C. D. Sinclair,
    B. D. Spurr and M. I. Ahmad, Comm. Statist. Theory Methods 19 (1990) for the tails (both from memory).
    """
    n = x.shape[1]
    rank = np.arange(1, n + 1, dtype=np.float64)
    odd = (2.0 * rank - 1.0) / n
    with np.errstate(all="ignore"):
        log_cdf, log_sf = law.logcdf(x), law.logsf(x)
        cdf = np.exp(log_cdf)
        total = cdf.sum(axis=1)
        found = {
            "anderson_darling": -n - ((log_cdf + log_sf[:, ::-1]) @ odd),
            "cramer_von_mises": 1.0 / (12.0 * n) + np.sum((cdf - 0.5 * odd) ** 2, axis=1),
            "kolmogorov_smirnov": np.maximum(
                np.max(rank / n - cdf, axis=1), np.max(cdf - (rank - 1.0) / n, axis=1)
            ),
            "lower_tail": -1.5 * n + 2.0 * total - log_cdf @ odd,
            "upper_tail": 0.5 * n - 2.0 * total - log_sf @ (2.0 - odd),
            "plot_correlation": _correlation(x, law, log_cdf, log_sf, threshold),
        }
    return {k: np.where(np.isnan(v), np.inf if k != "plot_correlation" else 0.0, v) for k, v in found.items()}


def _correlation(x: Array, law: Distribution, log_cdf: Array, log_sf: Array, threshold: float) -> Array:
    p = (np.arange(x.shape[1]) + 0.5) / x.shape[1]
    paper = PAPERS.get(law.family.name)
    if paper is None:
        y, q = u_from_log_tails(log_cdf, log_sf), special.ndtri(p)
    else:
        y, q = np.log(x - threshold) if paper.logarithmic else x, paper.variate(p)
    a, b = y - y.mean(axis=1, keepdims=True), q - q.mean()
    return np.asarray((a @ b) / np.sqrt(np.sum(a * a, axis=1) * np.dot(b, b)))
