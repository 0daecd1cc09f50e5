"""The estimators by name; a new one is one class and one line here."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.methods.base import Method
from calibrate.fitting.methods.bayes import Bayes
from calibrate.fitting.methods.known_cov import KnownCov
from calibrate.fitting.methods.l_moments import LMoments
from calibrate.fitting.methods.likelihood import Likelihood, UnbiasedWeibull
from calibrate.fitting.methods.moments import Moments
from calibrate.fitting.methods.probability_paper import ProbabilityPaper
from calibrate.fitting.methods.tails import LowerTail, UpperTail
from calibrate.registry import registered

METHODS: Mapping[str, Method] = registered(
    (
        Likelihood(),
        Moments(),
        LMoments(),
        ProbabilityPaper(),
        LowerTail(),
        UpperTail(),
        Bayes(),
        KnownCov(),
        UnbiasedWeibull(),
    )
)


def method_of(name: str) -> Method:
    """Return the estimator of this name.

    Raises
    ------
    InputError
        There is none.
    """
    if name not in METHODS:
        raise InputError(Problem(f"There is no method '{name}'.", suggestion=did_you_mean(name, METHODS)))
    return METHODS[name]
