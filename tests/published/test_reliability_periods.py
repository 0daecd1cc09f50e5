"""Reliability indices of other reference periods.

Sources: the formula Phi(beta_n) = Phi(beta_1)**n and the pairs 4.2/3.3, 4.7/3.8, 5.2/4.3 of EN 1990:2002 (C.3 and
Table B2, from memory). The printed pairs agree with the formula only to 0.12; the exact values beside them were
computed for this test with many digits. The values for longer independence intervals were computed likewise.
"""

import pytest

from calibrate.actions.periods import beta_of_one_period, beta_of_period

EXACT = 1e-5
PRINTED = 0.12


@pytest.mark.parametrize(
    ("annual", "exact", "printed"), [(4.2, 3.20853, 3.3), (4.7, 3.82631, 3.8), (5.2, 4.41794, 4.3)]
)
def test_fifty_years_from_one(annual, exact, printed):
    assert float(beta_of_period(annual, 50.0)) == pytest.approx(exact, abs=EXACT)
    assert exact == pytest.approx(printed, abs=PRINTED)


@pytest.mark.parametrize(
    ("fifty", "exact", "printed"), [(3.3, 4.27236, 4.2), (3.8, 4.67820, 4.7), (4.3, 5.09892, 5.2)]
)
def test_one_year_from_fifty(fifty, exact, printed):
    assert float(beta_of_one_period(fifty, 50.0)) == pytest.approx(exact, abs=EXACT)
    assert exact == pytest.approx(printed, abs=PRINTED)


@pytest.mark.parametrize(("interval", "exact"), [(5.0, 4.20580), (10.0, 4.35997), (25.0, 4.55642)])
def test_fifty_years_with_longer_independence_intervals(interval, exact):
    assert float(beta_of_period(4.7, 50.0, interval)) == pytest.approx(exact, abs=EXACT)
