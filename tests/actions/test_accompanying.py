"""Accompanying parts by the design-value method: closed forms for normal and Gumbel, printed design values, limits."""

import numpy as np
import pytest
from scipy.stats import gumbel_r, norm

from calibrate.actions import accompanying_part
from calibrate.actions.accompanying import interval_beta
from calibrate.distributions import distribution, maximum_of
from calibrate.errors import InputError


@pytest.mark.parametrize("cov", [0.2, 0.35])
@pytest.mark.parametrize("beta", [3.8, 4.7])
def test_one_interval_is_the_ratio_of_two_fractiles(cov, beta):
    """Normal: (1 + 0.28 beta V)/(1 + 0.7 beta V), by algebra; Gumbel by scipy's quantiles."""
    normal = accompanying_part(distribution("normal", mean=2.0, cov=cov), beta)
    assert float(normal) == pytest.approx((1 + 0.28 * beta * cov) / (1 + 0.7 * beta * cov), rel=1e-12)
    scale = np.sqrt(6.0) / np.pi * cov
    law = gumbel_r(loc=1.0 - np.euler_gamma * scale, scale=scale)
    gumbel = accompanying_part(distribution("gumbel", mean=1.0, cov=cov), beta)
    assert float(gumbel) == pytest.approx(
        law.isf(norm.sf(0.28 * beta)) / law.isf(norm.sf(0.7 * beta)), rel=1e-9
    )


def test_leading_value_is_the_printed_design_value():
    """Gumbel, V = 0.35, beta 3.8: 2.355138 means, EN 1990:2002, Table C3 with exact constants (from memory)."""
    law = distribution("gumbel", mean=1.0, cov=0.35)
    beside = float(law.x(0.28 * 3.8))
    assert beside / float(accompanying_part(law, 3.8)) == pytest.approx(2.355138, abs=1e-6)


def test_several_intervals_by_hand():
    """In one of n intervals the leading value is exceeded with 1/n of the probability; its maximum has F**(1/n)."""
    n, beta = 50, 3.8
    law = gumbel_r(loc=1.0, scale=0.3)
    one = gumbel_r(loc=1.0 - 0.3 * np.log(n), scale=0.3)
    index = norm.isf(norm.sf(0.7 * beta) / n)
    assert interval_beta(beta, n) == pytest.approx(index, rel=1e-12)
    expected = one.ppf(norm.cdf(0.4 * index)) / law.isf(norm.sf(0.7 * beta))
    found = accompanying_part(distribution("gumbel", location=1.0, scale=0.3), beta, n)
    assert float(found) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("family", ["lognormal", "gamma", "weibull"])
def test_more_intervals_leave_less_beside_another(family):
    law = distribution(family, mean=np.array([1.0, 3.0]), cov=0.3)
    found = np.array([accompanying_part(maximum_of(law, 100), 4.0, n) for n in (1, 2, 10, 100)])
    assert (np.diff(found, axis=0) < 0.0).all()
    assert ((found > 0.0) & (found < 1.0)).all()
    np.testing.assert_allclose(found[:, 0], found[:, 1], rtol=1e-9)  # scale does not matter


def test_less_than_one_interval_is_refused():
    with pytest.raises(InputError, match=r"at least 1; got 0\.5"):
        accompanying_part(distribution("gumbel", mean=1.0, cov=0.3), 3.8, 0.5)
