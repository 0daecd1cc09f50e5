"""What a simulation found, as arrays over situations."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import special

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]
Flags = npt.NDArray[np.bool_]
Codes = npt.NDArray[np.int8]

REACHED = 0
SPENT = 1
NONE_SEEN = 2
NOT_FINITE = 3
NO_POINT = 4

TEXTS: tuple[str, ...] = (
    "reached the wanted cov",
    "sample budget spent",
    "no failure seen in {samples} samples",
    "limit state not finite in samples",
    "no design point to sample around",
)
NO_SAFETY = "no safe state seen in {samples} samples"


@dataclass(frozen=True, slots=True, eq=False)
class Tail:
    """What is known of the probability that was sampled: of failure, or of survival where the medians fail.

    Attributes
    ----------
    probability, cov, lower, upper : array (n,)
        Estimate, its coefficient of variation, and the ends of the confidence interval.
    samples : int array (n,)
        Evaluations of the limit state.
    code : int8 array (n,)
        How each situation ended.
    """

    probability: Array
    cov: Array
    lower: Array
    upper: Array
    samples: Counts
    code: Codes


@dataclass(frozen=True, slots=True, eq=False)
class Simulation:
    """Failure probabilities of n situations by simulation.

    NaN stands for what is not known.

    Attributes
    ----------
    method : str
        Name of the method.
    confidence : float
        Confidence of the two-sided intervals.
    probability : array (n,)
        Estimated failure probability; 0 where no failure was seen.
    cov : array (n,)
        Coefficient of variation of the estimate. Where ``complement`` is set it is that of the estimated probability
        of survival, because a relative error of a failure probability near 1 says nothing of beta.
    lower, upper : array (n,)
        Confidence interval of the failure probability.
    beta, beta_lower, beta_upper : array (n,)
        The reliability index -Phi^-1 of the probability, from whichever tail was sampled, and its confidence
        interval; inf where no failure was seen.
    samples : int array (n,)
        Evaluations of the limit state.
    complement : bool array (n,)
        Whether the medians fail, so that the probability of survival was sampled.
    code : int8 array (n,)
        How each situation ended; see ``status``.
    """

    method: str
    confidence: float
    probability: Array
    cov: Array
    lower: Array
    upper: Array
    beta: Array
    beta_lower: Array
    beta_upper: Array
    samples: Counts
    complement: Flags
    code: Codes

    @classmethod
    def of(cls, method: str, confidence: float, tail: Tail, complement: Flags) -> Simulation:
        """Return the result for sampled tails."""

        def turned(probability: Array, other: Array) -> Array:
            return np.where(complement, 1.0 - other, probability)

        sign = np.where(complement, -1.0, 1.0)
        beta, near, far = (-sign * special.ndtri(p) for p in (tail.probability, tail.upper, tail.lower))
        return cls(
            method,
            confidence,
            turned(tail.probability, tail.probability),
            tail.cov,
            turned(tail.lower, tail.upper),
            turned(tail.upper, tail.lower),
            beta,
            np.where(complement, far, near),
            np.where(complement, near, far),
            tail.samples,
            complement,
            tail.code,
        )

    @property
    def n(self) -> int:
        """Number of situations."""
        return self.probability.size

    @property
    def reached(self) -> Flags:
        """Whether the wanted coefficient of variation was reached."""
        return np.asarray(self.code == REACHED)

    @property
    def status(self) -> npt.NDArray[Any]:
        """How each situation ended, in words."""
        words = [
            (NO_SAFETY if code == NONE_SEEN and other else TEXTS[code]).format(samples=samples)
            for code, other, samples in zip(self.code, self.complement, self.samples, strict=True)
        ]
        return np.asarray(words, dtype=np.str_)
