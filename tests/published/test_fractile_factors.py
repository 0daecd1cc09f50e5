"""Fractile factors k of standards and handbooks: limit = mean - k s.

Sources, from memory, all digits recomputed by another route (non-central t by numerical integration):
EN 1990:2002 Tables D1 and D2; EN 14358:2016 Table 1 (5 % at 75 %); ISO 16269-6 and ASTM D2915 (5 % at 75, 90, 95 %);
CMH-17 Volume 1, section 8.5 (A and B basis, 95 %); NIST/SEMATECH e-Handbook 7.2.6.3.
"""

import math

import numpy as np
import pytest

from calibrate.fitting.characteristic import (
    EN_1990_TABLE_D1,
    EN_1990_TABLE_D2,
    prediction_factor,
    prediction_factor_known,
    smallest_sample,
    tolerance_factor,
)

D1_KNOWN = [2.3262, 2.0145, 1.8993, 1.8390, 1.8018, 1.7766, 1.7446, 1.7251, 1.6855, 1.6720]
D1_UNKNOWN = [3.3717, 2.6311, 2.3353, 2.1765, 2.0095, 1.9226, 1.7718, 1.7272]
D2_UNKNOWN = [11.4202, 7.8578, 6.3656, 5.0756, 4.5065, 3.6678, 3.4524]
D2_UNKNOWN_309 = [11.4198, 7.8576, 6.3655, 5.0755, 4.5065, 3.6677, 3.4523]
D2_UNKNOWN_304 = [10.7837, 7.5135, 6.1293, 4.9229, 4.3871, 3.5920, 3.3866]
D2_KNOWN_304 = [4.2992, 3.7232, 3.5103, 3.3988, 3.3302, 3.2836, 3.2244, 3.1884, 3.1151, 3.0903]
TAIL_OF_304, TAIL_OF_309 = (0.5 * math.erfc(z / math.sqrt(2.0)) for z in (3.04, 3.0902))

TOLERANCE_5_PERCENT = {  # n: 50, 75, 90, 95 % confidence
    3: (1.9384, 3.1518, 5.3115, 7.6559),
    4: (1.8295, 2.6806, 3.9566, 5.1439),
    5: (1.7793, 2.4634, 3.3998, 4.2027),
    6: (1.7505, 2.3356, 3.0919, 3.7077),
    8: (1.7187, 2.1883, 2.7543, 3.1873),
    10: (1.7016, 2.1037, 2.5684, 2.9110),
    15: (1.6808, 1.9908, 2.3290, 2.5660),
    20: (1.6712, 1.9320, 2.2078, 2.3960),
    30: (1.6620, 1.8686, 2.0798, 2.2198),
    50: (1.6549, 1.8109, 1.9653, 2.0650),
    100: (1.6498, 1.7576, 1.8613, 1.9265),
    500: (1.6458, 1.6929, 1.7364, 1.7630),
}

PRINTED = [  # fractile, confidence, factors by n, tolerance: half a unit of the last digit, or as noted
    pytest.param(
        0.05,
        0.75,
        {3: 3.15, 5: 2.46, 10: 2.10, 15: 1.99, 20: 1.93, 30: 1.87, 50: 1.81, 100: 1.76, 500: 1.69},
        0.005,
        id="EN 14358 Table 1",
    ),
    pytest.param(0.05, 0.75, {3: 3.152, 4: 2.681, 10: 2.104}, 0.0005, id="ISO 16269-6, 75 %"),
    pytest.param(0.05, 0.75, {5: 2.463}, 0.001, id="ISO 16269-6, printed 2.463 and 2.464"),
    pytest.param(0.05, 0.90, {10: 2.568}, 0.0005, id="ISO 16269-6, 90 %"),
    pytest.param(0.05, 0.95, {10: 2.911}, 0.0005, id="ISO 16269-6, 95 %"),
    pytest.param(
        0.10, 0.95, {5: 3.407, 6: 3.007, 10: 2.355, 20: 1.926, 30: 1.777}, 0.002, id="CMH-17, B basis"
    ),
    pytest.param(0.01, 0.95, {5: 5.741, 10: 3.981, 30: 3.064}, 0.002, id="CMH-17, A basis"),
    pytest.param(0.10, 0.99, {43: 1.8740}, 1e-4, id="NIST 7.2.6.3"),
]


def numbers(table, row):
    return np.array([n for n in table[row] if math.isfinite(n)])


def printed(table, row):
    return np.array([k for n, k in table[row].items() if math.isfinite(n)])


@pytest.mark.parametrize(
    ("table", "row", "factor", "tail", "expected"),
    [
        (EN_1990_TABLE_D1, "known", prediction_factor_known, 0.05, D1_KNOWN),
        (EN_1990_TABLE_D1, "unknown", prediction_factor, 0.05, D1_UNKNOWN),
        (EN_1990_TABLE_D2, "known", prediction_factor_known, TAIL_OF_304, D2_KNOWN_304),
        (EN_1990_TABLE_D2, "unknown", prediction_factor, 0.001, D2_UNKNOWN),
        (EN_1990_TABLE_D2, "unknown", prediction_factor, TAIL_OF_309, D2_UNKNOWN_309),
        (EN_1990_TABLE_D2, "unknown", prediction_factor, TAIL_OF_304, D2_UNKNOWN_304),
    ],
)
def test_prediction_formulas(table, row, factor, tail, expected):
    np.testing.assert_allclose(factor(numbers(table, row), tail), expected, atol=1e-4, rtol=0)


@pytest.mark.parametrize(
    ("row", "factor", "tolerance"),
    [("known", prediction_factor_known, 0.017), ("unknown", prediction_factor, 0.012)],
)
def test_table_d1_as_printed(row, factor, tolerance):
    computed = factor(numbers(EN_1990_TABLE_D1, row), 0.05)
    np.testing.assert_allclose(printed(EN_1990_TABLE_D1, row), computed, atol=tolerance, rtol=0)
    assert EN_1990_TABLE_D1[row][math.inf] == 1.64


def test_table_d1_known_row_is_printed_for_1_64():
    n = numbers(EN_1990_TABLE_D1, "known")
    expected = 1.64 * np.sqrt(1.0 + 1.0 / n)
    np.testing.assert_allclose(printed(EN_1990_TABLE_D1, "known"), expected, atol=0.01, rtol=0)


def test_table_d2_as_printed_corresponds_to_one_in_a_thousand():
    unknown = printed(EN_1990_TABLE_D2, "unknown")
    computed = prediction_factor(numbers(EN_1990_TABLE_D2, "unknown"), 0.001)
    np.testing.assert_allclose(unknown, computed, atol=0.03, rtol=0)
    n = numbers(EN_1990_TABLE_D2, "known")
    np.testing.assert_allclose(
        printed(EN_1990_TABLE_D2, "known"), 3.08 * np.sqrt(1.0 + 1.0 / n), atol=0.01, rtol=0
    )
    assert EN_1990_TABLE_D2["unknown"][math.inf] == EN_1990_TABLE_D2["known"][math.inf] == 3.04


def test_table_d2_is_not_the_prediction_for_3_04():
    computed = prediction_factor(numbers(EN_1990_TABLE_D2, "unknown"), TAIL_OF_304)
    excess = printed(EN_1990_TABLE_D2, "unknown") / computed - 1.0
    assert np.all(excess > 0.01)
    assert excess[0] == pytest.approx(0.057, abs=0.001)  # n = 4: the table lies 6 % higher


def test_tolerance_factors_of_the_5_percent_fractile():
    n = np.array(list(TOLERANCE_5_PERCENT))[:, None]
    computed = tolerance_factor(n, 0.05, np.array([0.50, 0.75, 0.90, 0.95]))
    # Half a unit of the last digit shown.
    np.testing.assert_allclose(computed, list(TOLERANCE_5_PERCENT.values()), atol=5.1e-5, rtol=0)


@pytest.mark.parametrize(
    ("n", "confidence", "expected"), [(5, 0.75, 2.46338), (10, 0.75, 2.10367), (10, 0.95, 2.91096)]
)
def test_tolerance_factors_reintegrated_with_thirty_digits(n, confidence, expected):
    assert tolerance_factor(n, 0.05, confidence) == pytest.approx(expected, abs=5.1e-6)


@pytest.mark.parametrize(("fractile", "confidence", "factors", "tolerance"), PRINTED)
def test_printed_tolerance_factors(fractile, confidence, factors, tolerance):
    computed = tolerance_factor(list(factors), fractile, confidence)
    np.testing.assert_allclose(computed, list(factors.values()), atol=tolerance, rtol=0)


def test_nist_example_to_its_exact_value():
    assert tolerance_factor(43, 0.10, 0.99) == pytest.approx(1.87395, abs=5.1e-6)


# Distribution-free limits of the 5 % fractile, ASTM D2915 and common tables of Wilks' formula (from memory,
# 1 - 0.95**n).
@pytest.mark.parametrize(("confidence", "n"), [(0.75, 28), (0.90, 45), (0.95, 59)])
def test_smallest_samples_of_distribution_free_limits(confidence, n):
    assert smallest_sample(0.05, confidence) == smallest_sample(0.95, confidence) == n
    assert 1.0 - 0.95**n >= confidence > 1.0 - 0.95 ** (n - 1)
