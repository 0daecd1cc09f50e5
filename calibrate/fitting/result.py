"""What fitting yields: one family's fit, and several families side by side."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution
from calibrate.errors import Doubt
from calibrate.records.observations import Observations

Array = NDArray[np.float64]
Status = Literal["converged", "failed"]


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Fit:
    """A family fitted to a sample, in the unit of the sample.

    Attributes
    ----------
    family : str
    method : str
        Name of the estimator.
    distribution : Distribution or None
        Of shape (); None if the fit failed.
    parameters : mapping of str to float
        All own parameters, in the family's order; empty if the fit failed.
    standard_errors : mapping of str to float
        Same keys: 0 for a parameter that was fixed, NaN where the theory
        gives none (a doubt says so).
    covariance : array, shape (p, p)
        Of the estimated parameters, in the order of ``free``.
    free : tuple of str
        Names of the estimated parameters.
    fixed, options : mapping
        Parameters that were held, and what the method was told.
    log_likelihood : float
        At the estimates.
    aicc : float
        Corrected Akaike criterion with p = ``len(free)``; infinite for n <= p + 1.
    bic : float
        Bayesian information criterion.
    anderson_darling : float
        Distance A² between sample and distribution; NaN where the sample is not complete.
    status : {"converged", "failed"}
    reason : str
        Why it failed, or why AICc is infinite; otherwise empty.
    observations : Observations
        The sample.
    own_predictive : Distribution or None
        Distribution of a further specimen that carries the uncertainty of the parameters, where the method gives it.
    doubts : tuple of Doubt
    comparison : Comparison or None
        The rivals, where this fit was chosen among several.
    """

    family: str
    method: str
    distribution: Distribution | None
    parameters: Mapping[str, float]
    standard_errors: Mapping[str, float]
    covariance: Array
    free: tuple[str, ...]
    log_likelihood: float
    aicc: float
    bic: float
    anderson_darling: float
    status: Status
    reason: str
    observations: Observations
    options: Mapping[str, float]
    fixed: Mapping[str, float]
    doubts: tuple[Doubt, ...] = ()
    own_predictive: Distribution | None = None
    comparison: Comparison | None = None

    @property
    def n(self) -> int:
        """Number of values."""
        return self.observations.n

    @property
    def values(self) -> Array:
        """One number for each specimen, shape (n,)."""
        return self.observations.values

    @property
    def converged(self) -> bool:
        """Whether there is a fitted distribution."""
        return self.status == "converged"

    def __repr__(self) -> str:
        if not self.converged:
            return f"<Fit of {self.family} failed: {self.reason}>"
        p = ", ".join(f"{name}={value:.6g}" for name, value in self.parameters.items())
        return f"<Fit of {self.family}({p}) to {self.n} values>"


@dataclass(frozen=True, slots=True, eq=False)
class Comparison:
    """Several families fitted to one sample.

    Attributes
    ----------
    candidates : tuple of Fit
        Converged ones by rising AICc, then failed ones in the order in which
        they were named.
    recommended : str or None
        Family of the smallest AICc among converged fits: the best supported
        of these candidates, which does not make it right. None if all failed.
    """

    candidates: tuple[Fit, ...]
    recommended: str | None

    @property
    def best(self) -> Fit | None:
        """The fit of the recommended family."""
        return next((c for c in self.candidates if c.family == self.recommended and c.converged), None)
