"""Confidence intervals of probabilities.

References
----------
.. [1] C. J. Clopper and E. S. Pearson, "The use of confidence or fiducial limits illustrated in the case of the
   binomial", Biometrika 26 (1934).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

Array = npt.NDArray[np.float64]


def binomial(hits: Array, trials: Array, confidence: float) -> tuple[Array, Array]:
    """Return the ends of the interval of Clopper and Pearson [1]_.

    Parameters
    ----------
    hits, trials : array (n,)
        How often the event occurred, and in how many independent trials.
    confidence : float
        Two-sided; each end errs with at most half of the rest.
    """
    half = 0.5 * (1.0 - confidence)
    few, many = hits > 0.0, hits < trials
    lower = special.betaincinv(np.where(few, hits, 1.0), trials - hits + 1.0, half)
    # By the upper tail, so that no digits are lost where the confidence is near 1.
    upper = special.betainccinv(hits + 1.0, np.where(many, trials - hits, 1.0), half)
    return np.where(few, lower, 0.0), np.where(many, upper, 1.0)


def of_mean(mean: Array, cov: Array, freedom: Array, confidence: float) -> tuple[Array, Array]:
    """Return the ends of an interval that is symmetric on the logarithmic scale.

    A probability is positive and its estimates are skewed to the right when their scatter is large; for a small one
    the interval is the usual one.

    Parameters
    ----------
    mean, cov : array (n,)
        Estimate and its coefficient of variation.
    freedom : array (n,)
        Degrees of freedom of Student's t distribution.
    confidence : float
        Two-sided.
    """
    with np.errstate(over="ignore", invalid="ignore"):
        width = special.stdtrit(freedom, 0.5 + 0.5 * confidence) * np.sqrt(np.log1p(cov * cov))
        factor = np.exp(width)
        return mean / factor, np.minimum(mean * factor, 1.0)
