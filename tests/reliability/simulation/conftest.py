import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem

STANDARD = distribution("normal", mean=0.0, sd=1.0)


@pytest.fixture(scope="session")
def standard():
    """Return a function that makes problems of standard normal variables."""

    def make(text, names, n=1, **values):
        state = ExpressionLimitState(parse(text), tuple(names), values)
        return Problem(state, (STANDARD,) * len(names), n)

    return make


@pytest.fixture(scope="session")
def steel():
    """Return a function that makes the steel member of tests/published/test_steel_member_chi.py at given chi."""

    def make(chi):
        chi = np.asarray(chi, dtype=np.float64)
        design = 1.35 * (1.0 - chi) + 1.5 * chi
        names = ("theta_R", "f_y", "theta_E", "G", "Q")
        laws = (
            distribution("lognormal", mean=1.0, cov=0.05),
            distribution("lognormal", mean=design / (1.0 - 2.0 * 0.08), cov=0.08),
            distribution("lognormal", mean=1.0, cov=0.10),
            distribution("normal", mean=1.0 - chi, cov=0.10),
            distribution("gumbel", mean=0.6 * chi, cov=0.35),
        )
        state = ExpressionLimitState(parse("theta_R * f_y - theta_E * (G + Q)"), names)
        return Problem(state, laws, chi.size)

    return make
