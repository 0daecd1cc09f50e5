"""The nearest design point of a mixture of classes, against a search along the limit state."""

import dataclasses

import numpy as np
import pytest

from calibrate.actions.territories import over_sites
from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.factors.classes import nearest_over_classes
from calibrate.reliability import ExpressionLimitState, form


def search_of(n):
    limit_state = ExpressionLimitState(parse("R - c * q"), ("R", "q"), {"c": np.linspace(0.4, 1.0, n)})
    return lambda laws, start: form(limit_state, laws, n, start=start)


@pytest.mark.parametrize(
    ("means", "covs", "weights"),
    [
        ([0.30, 0.60], [0.1, 0.1], [95, 5]),
        ([0.30, 0.60], [0.1, 0.2], [98, 2]),
        ([0.30, 0.35, 0.90], [0.1, 0.1, 0.05], [90, 9, 1]),
        ([0.30, 0.38, 0.47], [0.2, 0.22, 0.25], [5, 3, 1]),
    ],
)
def test_against_the_limit_state_scanned_point_by_point(means, covs, weights):
    """g = R - c q: for each u of the action there is one u of the resistance on g = 0, so a fine scan finds all."""
    n = 5
    law = over_sites(distribution("gumbel", mean=np.array(means), cov=np.array(covs)), weights, 50.0)
    resistance = distribution("normal", mean=1.4, cov=0.1)
    search = search_of(n)
    laws = (resistance, law)
    plain = search(laws, None)
    found = nearest_over_classes(search, laws, 1, plain)
    u = np.linspace(-8.0, 8.0, 16_001)
    x = law.x(u)
    nearest = [np.sqrt(np.min(u**2 + ((c * x - 1.4) / 0.14) ** 2)) for c in np.linspace(0.4, 1.0, n)]
    sign = np.sign(found.beta)
    np.testing.assert_allclose(found.beta, sign * nearest, atol=2e-5)
    assert (found.beta <= plain.beta + 1e-9).all()
    np.testing.assert_allclose(found.u, -found.beta * found.alpha, atol=1e-6)
    np.testing.assert_allclose(found.x[0], np.linspace(0.4, 1.0, n) * found.x[1], atol=1e-6)


def test_what_was_not_found_from_the_medians_is_taken_from_a_class():
    """As if the first search had failed in one situation."""
    n = 3
    law = over_sites(distribution("gumbel", mean=np.array([0.3, 0.38]), cov=0.2), [3, 1], 50.0)
    laws = (distribution("normal", mean=1.4, cov=0.1), law)
    search = search_of(n)
    plain = search(laws, None)
    lost = np.array([False, True, False])

    failed = dataclasses.replace(
        plain,
        beta=np.where(lost, np.nan, plain.beta),
        u=np.where(lost, np.nan, plain.u),
        code=np.where(lost, 2, plain.code).astype(np.int8),
    )
    found = nearest_over_classes(search, laws, 1, failed)
    np.testing.assert_allclose(found.beta, plain.beta, atol=1e-9)
    np.testing.assert_array_equal(found.code, plain.code)
