"""The estimators by name; a new one is one class and one line here."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.methods.base import Method
from calibrate.fitting.methods.bayes import Bayes
from calibrate.fitting.methods.known_cov import KnownCov
from calibrate.fitting.methods.l_moments import LMoments
from calibrate.fitting.methods.likelihood import Likelihood, UnbiasedWeibull
from calibrate.fitting.methods.moments import Moments
from calibrate.fitting.methods.probability_paper import ProbabilityPaper
from calibrate.fitting.methods.tails import LowerTail, UpperTail


def registered(methods: Iterable[Method]) -> Mapping[str, Method]:
    """Return the methods by name, in order; a name that comes twice is a mistake of ours."""
    by_name: dict[str, Method] = {}
    for method in methods:
        if method.name in by_name:
            raise ValueError(f"the method '{method.name}' is registered twice")
        by_name[method.name] = method
    return MappingProxyType(by_name)


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
