"""What the tests say of b and V_delta, survivors among them or not, as it enters the resistance."""

from __future__ import annotations

import math
from dataclasses import dataclass

from calibrate.errors import Doubt, InputError, did_you_mean
from calibrate.resistance.component_tests import LEAST_TESTS, ComponentTests
from calibrate.resistance.model_factor import (
    CensoredModelFactor,
    ModelFactor,
    censored_model_factor,
    errors_of,
    has_scatter,
    model_factor,
)

LARGE = 100
"""Number of tests above which the uncertainty of the estimates is left out (D.8.2.2.7 and D.8.3)."""

SURVIVORS = ("refuse", "censored", "as_failed", "leave_out")
"""What may become of tests that did not fail."""


@dataclass(frozen=True, slots=True)
class ErrorScatter:
    """Mean correction and scatter of the error as they enter the resistance.

    Attributes
    ----------
    b, v_delta : float
    size : int
        Number of tests behind b.
    freedom : int or None
        Degrees of freedom of the scatter; None is size - 1.
    known : bool
        Whether the scatter is known from elsewhere.
    """

    b: float
    v_delta: float
    size: int
    freedom: int | None = None
    known: bool = False

    @property
    def many(self) -> bool:
        """Whether there are so many tests that the formulas for large samples apply."""
        degrees = self.size if self.known or self.freedom is None else self.freedom + 1
        return min(self.size, degrees) > LARGE


def error_scatter(
    tests: ComponentTests, survivors: str, where: str
) -> tuple[ModelFactor | CensoredModelFactor, ErrorScatter, tuple[Doubt, ...]]:
    """Return the evaluation of the tests, what of it enters the resistance, and what is to be doubted.

    Parameters
    ----------
    tests : ComponentTests
    survivors : str
        One of `SURVIVORS`.
    where : str
        Place of the doubts.
    """
    if survivors not in SURVIVORS:
        raise InputError(f"Survivors are taken as '{survivors}'. {did_you_mean(survivors, SURVIVORS)}")
    if survivors == "censored" and tests.n_failed < tests.n:
        found = censored_model_factor(tests, where)
        failed = found.n_failed
        variance = found.log_sd**2 * failed / (failed - 1.0)
        b = math.exp(found.log_mean + 0.5 * variance)
        message = (
            f"{tests.n - failed} of {tests.n} tests did not fail; b and V_delta are those of largest likelihood, in "
            "which every test weighs the same, and not the slope of D.8."
        )
        error = ErrorScatter(b, math.sqrt(math.expm1(variance)), failed)
        return found, error, (Doubt("survivors-censored", message, where),)
    whole, doubts = complete(tests, survivors, where)
    if whole.n_failed < whole.n:
        model = errors_of(whole.experimental, whole.predicted, where)
        if not has_scatter(model):
            raise InputError("All ratios of measured to predicted resistance are equal.")
    else:
        model = model_factor(whole, where)
    return model, ErrorScatter(model.b, model.cov, model.n), doubts


def complete(tests: ComponentTests, survivors: str, where: str) -> tuple[ComponentTests, tuple[Doubt, ...]]:
    """Return tests without survivors, as ``as_failed`` or ``leave_out`` makes them, and what is to be doubted."""
    count = tests.n - tests.n_failed
    if not count:
        return tests, ()
    if survivors == "refuse":
        raise InputError(
            f"{count} of {tests.n} tests did not fail. Say how they are to be taken: 'censored' (lower bounds), "
            "'as_failed' (the bound is the resistance) or 'leave_out'."
        )
    if survivors == "leave_out":
        if tests.n_failed < LEAST_TESTS:
            raise InputError(
                f"Without the {count} tests that did not fail {tests.n_failed} remain; a resistance model needs at "
                f"least {LEAST_TESTS}."
            )
        message = (
            f"{count} tests that did not fail were left out. These are the stronger specimens more often than not, so "
            "that the level is biased downwards and the scatter too, the latter on the unsafe side."
        )
        return tests.taken(~tests.survived), (Doubt("survivors-left-out", message, where),)
    message = (
        f"{count} tests that did not fail count with the load at which they were stopped. The level is biased "
        "downwards; the scatter may come out too small or too large."
    )
    return tests, (Doubt("survivors-as-failed", message, where),)


def cluster_doubts(tests: ComponentTests, where: str) -> tuple[Doubt, ...]:
    """Return the doubt that tests of one cluster are not independent, if any cluster has several."""
    if tests.cluster is None:
        return ()
    count = len(set(tests.cluster.tolist()))
    if count == tests.n:
        return ()
    message = (
        f"The {tests.n} tests come from {count} clusters and are counted as independent, as D.8 does. If tests of one "
        "cluster resemble each other, the factors k belong to a smaller number."
    )
    return (Doubt("clusters-ignored", message, where),)
