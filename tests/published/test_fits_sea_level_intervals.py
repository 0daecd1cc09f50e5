"""What the sea levels of Port Pirie say beyond the estimates: profile-likelihood intervals, and L-moments."""

import numpy as np
import pytest

from calibrate.fitting import fit_family
from calibrate.fitting.intervals import fractile_interval, parameter_intervals
from calibrate.fitting.methods.l_moments import sample_l_moments

from .test_fits_sea_levels import LEVELS


# S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, section 3.4.1: 95 % intervals
# read off the profile log-likelihood, from memory.
def test_profile_interval_of_the_shape():
    found = parameter_intervals(fit_family(LEVELS, "gev"))["shape"]
    np.testing.assert_allclose(found, (-0.21, 0.17), rtol=0, atol=0.01)


def test_profile_interval_of_the_level_exceeded_once_in_a_hundred_years():
    found = fractile_interval(fit_family(LEVELS, "gev"), 0.99)
    np.testing.assert_allclose(found, (4.50, 5.27), rtol=0, atol=0.01)


# Recomputed in rational arithmetic from the levels as printed; half a unit of the last digit.
def test_l_moments():
    first, second, third, fourth = sample_l_moments(LEVELS)
    assert first == pytest.approx(3.980615, abs=5e-7)
    assert second == pytest.approx(0.1346442, abs=5e-8)
    np.testing.assert_allclose([third / second, fourth / second], [0.1374331, 0.1328312], rtol=0, atol=5e-8)


def test_extreme_value_family_by_l_moments():
    found = fit_family(LEVELS, "gev", method="l_moments").parameters
    assert found == pytest.approx(
        {"location": 3.873148, "scale": 0.203222, "shape": -0.051212}, rel=0, abs=6e-7
    )
