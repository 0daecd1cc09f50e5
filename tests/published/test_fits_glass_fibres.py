"""Strength of 63 glass fibres of 1.5 cm length.

Source: R. L. Smith, J. C. Naylor, A comparison of maximum likelihood and Bayesian estimators for the three-parameter
Weibull distribution, Applied Statistics 36 (1987) 358-369; data and printed figures from memory. The precise figures
were recomputed for this test by another route (separate code, general-purpose optimiser).
"""

import numpy as np
import pytest

from calibrate.fitting import fit_family

STRENGTHS = np.array(
    [
        0.55, 0.74, 0.77, 0.81, 0.84, 0.93, 1.04, 1.11, 1.13, 1.24, 1.25, 1.27, 1.28, 1.29, 1.30, 1.36, 1.39, 1.42,
        1.48, 1.48, 1.49, 1.49, 1.50, 1.50, 1.51, 1.52, 1.53, 1.54, 1.55, 1.55, 1.58, 1.59, 1.60, 1.61, 1.61, 1.61,
        1.61, 1.62, 1.62, 1.63, 1.64, 1.66, 1.66, 1.66, 1.67, 1.68, 1.68, 1.69, 1.70, 1.70, 1.73, 1.76, 1.76, 1.77,
        1.78, 1.81, 1.82, 1.84, 1.84, 1.89, 2.00, 2.01, 2.24,
    ]
)  # fmt: skip


def test_two_parameters():
    found = fit_family(STRENGTHS, "weibull")
    # Printed: shape 5.78, scale 1.628, log-likelihood -15.207; recomputed to the digits below.
    assert found.parameters["shape"] == pytest.approx(5.780701, abs=5e-7)
    assert found.parameters["scale"] == pytest.approx(1.628113, abs=5e-7)
    assert found.log_likelihood == pytest.approx(-15.206840, abs=5e-7)


# Printed: threshold -1.6, scale 3.216, shape 11.9; recomputed: -1.593, 3.235, 11.856. The likelihood is so flat along
# its ridge that the tolerance of every one of them is 1 per cent.
@pytest.mark.parametrize(
    "expected",
    [
        {"threshold": -1.6, "scale": 3.216, "shape": 11.9},
        {"threshold": -1.593, "scale": 3.235, "shape": 11.856},
    ],
    ids=["printed", "recomputed"],
)
def test_three_parameters(expected):
    found = fit_family(STRENGTHS, "weibull3", estimate=["threshold"])
    assert found.parameters == pytest.approx(expected, rel=0.01)


def test_three_parameters_reach_the_same_likelihood():
    found = fit_family(STRENGTHS, "weibull3", estimate=["threshold"])
    assert found.log_likelihood == pytest.approx(-14.3, abs=0.05)  # printed
    assert found.log_likelihood == pytest.approx(-14.28529, abs=1e-5)  # recomputed
    # The threshold may be negative, and its uncertainty says that the sample hardly knows it.
    assert found.standard_errors["threshold"] > abs(found.parameters["threshold"])
