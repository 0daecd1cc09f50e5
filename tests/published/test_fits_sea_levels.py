"""Annual maximum sea levels at Port Pirie, 1923-1987, in metres.

Source: S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, section 3.4.1; data and
printed figures from memory. The precise figures were recomputed for this test by another route (separate code,
general-purpose optimiser) and agree with the printed ones to their digits.
"""

import numpy as np
import pytest

from calibrate.fitting import fit_family

LEVELS = np.array(
    [
        4.03, 3.83, 3.65, 3.88, 4.01, 4.08, 4.18, 3.80, 4.36, 3.96, 3.98, 4.69, 3.85, 3.96, 3.85, 3.93, 3.75, 3.63,
        3.57, 4.25, 3.97, 4.05, 4.24, 4.22, 3.73, 4.37, 4.06, 3.71, 3.96, 4.06, 4.55, 3.79, 3.89, 4.11, 3.85, 3.86,
        3.86, 4.21, 4.01, 4.11, 4.24, 3.96, 4.21, 3.74, 3.85, 3.88, 3.66, 4.11, 3.71, 4.18, 3.90, 3.78, 3.91, 3.72,
        4.00, 3.66, 3.62, 4.33, 4.55, 3.75, 4.08, 3.90, 3.88, 3.94, 4.33,
    ]
)  # fmt: skip

# family, name: value, printed value, half a unit of the last printed digit
PRINTED = [
    ("gev", "parameters", {"location": 3.87, "scale": 0.198, "shape": -0.050}, (0.005, 0.0005, 0.0005)),
    ("gev", "standard_errors", {"location": 0.028, "scale": 0.020, "shape": 0.098}, (0.0005, 0.0005, 0.0005)),
    ("gumbel", "parameters", {"location": 3.87, "scale": 0.195}, (0.005, 0.0005)),
    ("gumbel", "standard_errors", {"location": 0.03, "scale": 0.019}, (0.005, 0.0005)),
]

# Recomputed; every digit that is written is held, half a unit of the last one is the tolerance.
RECOMPUTED = [
    ("gev", "parameters", {"location": 3.874750, "scale": 0.198044, "shape": -0.050110}, (5e-7, 5e-7, 5e-7)),
    ("gev", "standard_errors", {"location": 0.02793, "scale": 0.02025, "shape": 0.09826}, (5e-6, 5e-6, 5e-6)),
    ("gumbel", "parameters", {"location": 3.869444, "scale": 0.194889}, (5e-7, 5e-7)),
]


@pytest.mark.parametrize(("family", "kind", "expected", "tolerances"), PRINTED + RECOMPUTED)
def test_estimates_and_standard_errors(family, kind, expected, tolerances):
    found = getattr(fit_family(LEVELS, family), kind)
    assert list(found) == list(expected)
    for name, tolerance in zip(expected, tolerances, strict=True):
        assert found[name] == pytest.approx(expected[name], abs=tolerance), name


@pytest.mark.parametrize(
    ("family", "printed", "recomputed"), [("gev", 4.34, 4.339058), ("gumbel", 4.22, 4.217682)]
)
def test_log_likelihood(family, printed, recomputed):
    found = fit_family(LEVELS, family).log_likelihood
    assert found == pytest.approx(printed, abs=0.005)
    assert found == pytest.approx(recomputed, abs=5e-7)


def test_covariance_of_the_extreme_value_family():
    # Recomputed, in units of 1e-4, four digits (order: location, scale, shape).
    expected = [[7.802, 1.970, -10.74], [1.970, 4.100, -7.775], [-10.74, -7.775, 96.54]]
    found = 1e4 * fit_family(LEVELS, "gev").covariance
    np.testing.assert_allclose(found, expected, rtol=0, atol=0.006)


def test_levels_exceeded_once_in_ten_and_in_a_hundred_years():
    levels = fit_family(LEVELS, "gev").distribution.isf([1 / 10, 1 / 100])
    np.testing.assert_allclose(levels, [4.30, 4.69], atol=0.005)  # printed
    np.testing.assert_allclose(levels, [4.29621, 4.68840], atol=5e-6)  # recomputed
