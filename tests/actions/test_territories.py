"""Actions over classes of sites: total probability, one site, the worst class, and periods."""

import numpy as np
import pytest
from scipy import special

from calibrate.actions.territories import over_sites, reliability_over_sites, territory
from calibrate.distributions import distribution, maximum_of
from calibrate.errors import InputError
from calibrate.reliability import CallableLimitState, form

WEIGHTS = np.array([0.6, 0.3, 0.1])


def wind():
    return distribution("gumbel", mean=[1.0, 1.1, 1.05], cov=[0.22, 0.25, 0.33])


def test_the_average_site_has_the_weighted_probability():
    sites = territory(wind(), 10.0 * WEIGHTS, 50.0)
    annual = wind()
    x = np.array([0.8, 1.5, 3.0, 6.0])
    each = annual.cdf(x[:, None]) ** 50
    np.testing.assert_allclose(sites.average.cdf(x), each @ WEIGHTS, rtol=1e-12)
    np.testing.assert_allclose(over_sites(wind(), WEIGHTS, 50.0).sf(x), sites.average.sf(x), rtol=1e-14)


def test_one_class_is_the_plain_action():
    plain = distribution("gumbel", mean=1.0, cov=0.22)
    alone = over_sites(distribution("gumbel", mean=[1.0], cov=[0.22]), [3.0])
    u = np.linspace(-5.0, 8.0, 9)
    np.testing.assert_allclose(alone.x(u), plain.x(u), rtol=1e-12)
    np.testing.assert_allclose(territory(wind(), WEIGHTS).site(1).x(u), wind().take(1).x(u), rtol=0)


def test_a_site_keeps_its_class_over_the_years():
    """Mixing first would let the structure move to another site every year, and raise the typical maximum."""
    moved = maximum_of(over_sites(wind(), WEIGHTS), 50.0)
    stays = over_sites(wind(), WEIGHTS, 50.0)
    assert float(moved.ppf(0.2)) > float(stays.ppf(0.2)) + 0.05
    assert float(moved.cdf(2.5)) < float(stays.cdf(2.5))


def test_the_worst_class_depends_on_the_level():
    sites = territory(wind(), WEIGHTS)
    assert sites.worst(0.5) == 1
    assert sites.worst(1e-4) == 2
    assert territory(wind(), [0.6, 0.4, 0.0]).worst(1e-4) == 1
    assert float(sites.site(sites.worst(1e-4)).isf(1e-4)) == float(np.max(wind().isf(1e-4)))


# Reliability ------------------------------


def beta_against(action, n):
    """Return beta of a constant resistance of 3.2, for which FORM is exact."""
    limit = CallableLimitState(lambda Q: 3.2 - Q, ("Q",), derivatives=lambda Q: {"Q": -np.ones_like(Q)})
    return form(limit, [action], n).beta


def test_mixture_and_mean_failure_probability_agree():
    by_site = beta_against(wind(), 3)
    on_average = beta_against(over_sites(wind(), WEIGHTS), 1)[0]
    found = reliability_over_sites(by_site, WEIGHTS)
    assert float(found.average) == pytest.approx(float(on_average), abs=1e-9)
    assert float(found.average) < float(WEIGHTS @ by_site)
    assert (float(found.worst), int(found.worst_site)) == (float(by_site[2]), 2)


def test_far_tails_and_situations():
    beta = np.array([[12.0, -12.0, 2.0, np.nan], [14.0, -13.0, 3.0, 4.0], [30.0, -11.0, 1.0, 4.0]])
    found = reliability_over_sites(beta, WEIGHTS)
    expected = -special.ndtri(WEIGHTS @ special.ndtr(-beta[:, 2]))
    assert float(found.average[2]) == pytest.approx(float(expected), rel=1e-12)
    log_fail = special.log_ndtr(-12.0) + np.log(0.6)
    assert float(special.log_ndtr(-found.average[0])) == pytest.approx(float(log_fail), rel=1e-6)
    assert -12.0 < float(found.average[1]) < -11.0
    assert np.isnan(found.average[3])
    assert np.isnan(found.worst[3])
    np.testing.assert_array_equal(found.worst_site[:3], [0, 1, 2])


def test_fractiles_over_the_sites():
    found = reliability_over_sites([4.4, 3.9, 3.6], WEIGHTS)
    assert [float(found.fractile(s)) for s in (0.0, 0.05, 0.1, 0.11, 0.4, 0.5, 1.0)] == [
        3.6, 3.6, 3.6, 3.9, 3.9, 4.4, 4.4,
    ]  # fmt: skip
    unused = reliability_over_sites([4.4, 3.9, 3.6], [0.9, 0.1, 0.0])
    assert float(unused.fractile(0.0)) == float(unused.worst) == 3.9
    columns = reliability_over_sites([[4.4, 3.0], [3.9, 3.1]], [0.9, 0.1])
    np.testing.assert_array_equal(columns.fractile(0.05), [3.9, 3.0])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: over_sites(wind(), [0.5, 0.5]), "3 classes of sites, which need as many weights; got 2"),
        (lambda: over_sites(wind(), 1.0), "got no list"),
        (lambda: over_sites(wind(), [0.0, 0.0, 0.0]), "not all zero"),
        (lambda: over_sites(wind(), [1.0, -1.0, 1.0]), "zero or positive"),
        (
            lambda: over_sites(distribution("gumbel", mean=1.0, cov=0.2), [1.0]),
            "one set of parameters for each",
        ),
        (lambda: over_sites(wind(), WEIGHTS, 0.0), "positive"),
        (lambda: territory(wind(), WEIGHTS).worst(1.0), "between 0 and 1"),
        (lambda: reliability_over_sites(3.0, [1.0]), "one row for each class"),
        (lambda: reliability_over_sites([3.0, 4.0], [1.0, 1.0]).fractile(5.0), "between 0 and 1"),
    ],
)
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()
