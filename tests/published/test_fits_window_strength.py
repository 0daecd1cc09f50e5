"""Strength of 31 glass airplane windows.

Source of the data: E. R. Fuller, S. W. Freiman, J. B. Quinn, G. D. Quinn, W. C. Carter, Fracture mechanics approach to
the design of glass aircraft windows, Proc. SPIE 2286 (1994) 419-430; from memory. The fits were computed for this
test by another route (separate code, general-purpose optimiser), as were the distances A², which are not modified
for the number of values.
"""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.fitting import anderson_darling, fit_family

STRENGTHS = np.array(
    [
        18.830, 20.800, 21.657, 23.030, 23.230, 24.050, 24.321, 25.500, 25.520, 25.800, 26.690, 26.770, 26.780, 27.050,
        27.670, 29.900, 31.110, 33.200, 33.730, 33.760, 33.890, 34.760, 35.750, 35.910, 36.980, 37.080, 37.090, 39.580,
        44.045, 45.290, 45.381,
    ]
)  # fmt: skip

MEAN, SD = 30.811419, 7.253381  # computed with the data, divisor n - 1

# family, parameters, A² of the fit; half a unit of the last digit is the tolerance.
FITS = [
    ("weibull", {"shape": 4.635383, "scale": 33.674237}, 0.597341),
    ("gamma", {"shape": 18.931534, "scale": 1.627518}, 0.438686),
]


@pytest.mark.parametrize(("family", "parameters", "distance"), FITS, ids=[f[0] for f in FITS])
def test_fit(family, parameters, distance):
    found = fit_family(STRENGTHS, family)
    assert found.parameters == pytest.approx(parameters, rel=0, abs=6e-7)
    assert found.anderson_darling == pytest.approx(distance, abs=6e-7)


def test_lognormal_fit():
    found = fit_family(STRENGTHS, "lognormal").parameters
    assert math.log(found["median"]) == pytest.approx(3.401242, abs=6e-7)
    assert found["log_sd"] == pytest.approx(0.2310828, abs=6e-8)


def test_weibull_log_likelihood():
    assert fit_family(STRENGTHS, "weibull").log_likelihood == pytest.approx(-105.488925, abs=5e-7)


def test_sample_moments_are_those_that_belong_to_the_data():
    found = fit_family(STRENGTHS, "normal", method="moments").parameters
    assert found == pytest.approx({"location": MEAN, "scale": SD}, rel=0, abs=6e-7)


# A² with the standard deviation (of the values, or of their logarithms) that has the divisor n - 1.
@pytest.mark.parametrize(("logarithms", "distance"), [(False, 0.532192), (True, 0.388833)])
def test_distance_from_the_normal_family(logarithms, distance):
    values = np.log(STRENGTHS) if logarithms else STRENGTHS
    normal = distribution("normal", location=np.mean(values), scale=np.std(values, ddof=1))
    assert anderson_darling(values, normal) == pytest.approx(distance, abs=6e-7)
