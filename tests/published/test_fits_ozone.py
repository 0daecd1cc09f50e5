"""Daily ozone in New York, May to September 1973, parts per billion, 116 days with a value.

Source: data set `airquality` of base R (J. M. Chambers and others, Graphical Methods for Data Analysis, 1983), values
from memory. The L-moments and fits were recomputed for this test by separate code after J. R. M. Hosking and
J. R. Wallis, Regional Frequency Analysis, Cambridge 1997.
"""

import numpy as np
import pytest

from calibrate.fitting import fit_family
from calibrate.fitting.methods.l_moments import sample_l_moments

OZONE = np.array(
    [
        41, 36, 12, 18, 28, 23, 19, 8, 7, 16, 11, 14, 18, 14, 34, 6, 30, 11, 1, 11, 4, 32, 23, 45, 115, 37,
        29, 71, 39, 23, 21, 37, 20, 12, 13,
        135, 49, 32, 64, 40, 77, 97, 97, 85, 10, 27, 7, 48, 35, 61, 79, 63, 16, 80, 108, 20, 52, 82, 50, 64, 59,
        39, 9, 16, 78, 35, 66, 122, 89, 110, 44, 28, 65, 22, 59, 23, 31, 44, 21, 9, 45, 168, 73, 76, 118, 84, 85,
        96, 78, 73, 91, 47, 32, 20, 23, 21, 24, 44, 21, 28, 9, 13, 46, 18, 13, 24, 16, 13, 23, 36, 7, 14, 30, 14, 18,
        20,
    ],
    dtype=float,
)  # fmt: skip


def test_l_moments():
    first, second, third, fourth = sample_l_moments(OZONE)
    found = [first, second, third / second, fourth / second]
    np.testing.assert_allclose(found, [42.1293103, 17.6384558, 0.2839495, 0.1066183], rtol=0, atol=5.1e-8)


@pytest.mark.parametrize(
    ("family", "parameters"),
    [
        ("gev", {"location": 25.665472, "scale": 21.178241, "shape": 0.1699995}),
        ("gumbel", {"location": 27.440954, "scale": 25.446913}),
    ],
)
def test_fits(family, parameters):
    found = fit_family(OZONE, family, method="l_moments").parameters
    assert found == pytest.approx(parameters, rel=0, abs=1e-6)
