"""Design values of EN 1990 for normal, lognormal and Gumbel variables.

Source: EN 1990:2002, Annex C, Table C3 (formulas from memory; numbers recomputed with the exact Euler constant), with
alpha_R = 0.8, alpha_E = -0.7 and beta = 3.8 for 50 years, 4.7 for one year.
"""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution

ALPHA_R, ALPHA_E = 0.8, -0.7


def design_value(name, cov, alpha, beta, mean=1.0):
    """Return x_d with F(x_d) = Phi(-alpha beta)."""
    return float(distribution(name, mean=mean, cov=cov).x(-alpha * beta))


@pytest.mark.parametrize(
    ("cov", "beta", "expected"), [(0.20, 3.8, 1.774364), (0.35, 3.8, 2.355138), (0.35, 4.7, 2.916142)]
)
def test_gumbel_action(cov, beta, expected):
    assert design_value("gumbel", cov, ALPHA_E, beta) == pytest.approx(expected, abs=1e-5)
    # The usual form with rounded constants.
    probability = 0.5 * math.erfc(ALPHA_E * beta / math.sqrt(2.0))
    handbook = 1.0 - cov * (0.45 + 0.78 * math.log(-math.log(probability)))
    assert handbook == pytest.approx(expected, rel=4e-4)


@pytest.mark.parametrize("cov", [0.05, 0.1, 0.25])
@pytest.mark.parametrize(("alpha", "beta"), [(ALPHA_R, 3.8), (ALPHA_E, 3.8), (ALPHA_E, 4.7), (-0.28, 3.8)])
def test_normal_and_lognormal_variables(cov, alpha, beta):
    assert design_value("normal", cov, alpha, beta, mean=350.0) == pytest.approx(
        350.0 * (1.0 - alpha * beta * cov)
    )
    exact = math.exp(-alpha * beta * math.sqrt(math.log1p(cov**2))) / math.sqrt(1.0 + cov**2)
    assert design_value("lognormal", cov, alpha, beta) == pytest.approx(exact, rel=1e-12)
    if cov < 0.2:  # where the table gives the short form
        assert design_value("lognormal", cov, alpha, beta) == pytest.approx(
            math.exp(-alpha * beta * cov), rel=0.01
        )


@pytest.mark.parametrize(
    ("alpha", "probability"), [(ALPHA_R, 1.18289e-3), (ALPHA_E, 3.90703e-3), (-0.28, 0.143664)]
)
@pytest.mark.parametrize("name", ["normal", "lognormal", "gumbel", "weibull", "gamma"])
def test_fractiles_that_belong_to_the_sensitivity_factors(name, alpha, probability):
    """Phi(-3.04) below a resistance; Phi(-2.66) above a leading, Phi(-1.064) above an accompanying action."""
    d = distribution(name, mean=2.0, cov=0.2)
    x = design_value(name, 0.2, alpha, 3.8, mean=2.0)
    beyond = float(d.cdf(x) if alpha > 0 else d.sf(x))
    assert beyond == pytest.approx(probability, rel=1e-5, abs=1e-6)


def test_the_five_percent_fractile_of_a_strength():
    d = distribution("lognormal", mean=560.0, cov=0.08)
    expected = 560.0 / math.sqrt(1.0064) * math.exp(-1.6448536269514722 * math.sqrt(math.log(1.0064)))
    assert float(d.ppf(0.05)) == pytest.approx(expected, rel=1e-13)
    assert np.exp(d.logcdf(expected)) == pytest.approx(0.05, rel=1e-12)
