"""Systems of rules: index and exact derivatives by factor, with correlated and conditional variables."""

import dataclasses

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from calibrate.factors import Response, SystemModel
from calibrate.reliability import CorrelatedPair
from calibrate.reliability.systems import failure_logic

CHI = np.linspace(0.1, 0.9, 5)
ORDER = ("R", "G", "Q", "S", "T")


def rules(kit, correlated=True):
    """Three modes of one size, two with a strength of their own; the third is curved and uses a factor itself."""
    strength = kit.variable("S", "lognormal", mean="1.25", cov="0.15")
    other = kit.variable("T", "weibull", mean="1.1", cov="0.18")
    own = [
        kit.rule(CHI, name="yielding", share=0.0),
        kit.rule(CHI, name="slip", limit_state="z * S * R**0.2 >= G + Q", more=(strength,), share=0.0),
        kit.rule(
            CHI, name="rupture", limit_state="z * T * gamma_M**0.5 >= G + Q**1.1", more=(other,), share=0.0
        ),
    ]
    pairs = (CorrelatedPair("R", "S", 0.4), CorrelatedPair("G", "Q", 0.2), CorrelatedPair("S", "T", 0.5))
    return [dataclasses.replace(r, correlations=pairs if correlated else ()) for r in own]


def response(kit, text="yielding or (slip and rupture)", **more):
    system = SystemModel("joint", failure_logic(text), ORDER, np.full(CHI.size, 1.0 / CHI.size), 1.0)
    return Response(rules(kit, **more), kit.factors, systems=[system])


@pytest.mark.parametrize("text", ["yielding or slip", "slip and rupture", "yielding or (slip and rupture)"])
@pytest.mark.parametrize("correlated", [True, False])
def test_derivatives_agree_with_central_differences(kit, text, correlated):
    """Of the system's beta by each factor, the turning of the sensitivity factors included."""
    whole = response(kit, text, correlated=correlated)
    gamma = np.array([1.2, 1.6])
    here = whole(gamma)
    assert here.valid.all()
    rows = slice(3 * CHI.size, None)
    h = 2e-4
    for k in range(2):
        step = h * np.eye(2)[k]
        near = [whole(gamma + d * step).beta[rows] for d in (-1, 1)]
        far = [whole(gamma + d * step).beta[rows] for d in (-2, 2)]
        difference = (8.0 * (near[1] - near[0]) - (far[1] - far[0])) / (12.0 * h)
        np.testing.assert_allclose(here.jacobian[k, rows], difference, rtol=2e-6, atol=1e-7)


def test_two_modes_are_the_union_of_their_planes(kit):
    """Against scipy's bivariate normal probability, with the correlation of the linearised margins by differences."""
    from scipy.stats import multivariate_normal

    whole = response(kit, "yielding or slip")(np.array([1.2, 1.6]))
    (system,) = whole.systems
    betas = whole.beta.reshape(4, CHI.size)
    for j in range(CHI.size):
        rho = system.result.correlation[0, 1, j]
        both = multivariate_normal.cdf(-betas[:2, j], mean=[0, 0], cov=[[1, rho], [rho, 1]])
        exact = -ndtri(ndtr(-betas[0, j]) + ndtr(-betas[1, j]) - both)
        assert betas[3, j] == pytest.approx(exact, abs=1e-6)
    # The points of the components lie on their limit states in the common space.
    for k, point in enumerate(system.points):
        values = system.problem.limit_state.component_values(system.problem.x(point))
        np.testing.assert_allclose(values[k], 0.0, atol=1e-9)


def test_each_row_may_have_its_own_factors(kit):
    whole = response(kit)
    sets = [np.array([1.1, 1.4]), np.array([1.3, 1.7])]
    rows = np.arange(4 * CHI.size) % 2
    mixed = whole(np.array(sets)[rows].T)
    for k, gamma in enumerate(sets):
        alone = whole(gamma)
        np.testing.assert_allclose(mixed.beta[rows == k], alone.beta[rows == k], atol=1e-10)
        np.testing.assert_allclose(
            mixed.jacobian[:, rows == k], alone.jacobian[:, rows == k], rtol=1e-7, atol=1e-9
        )
