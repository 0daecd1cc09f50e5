"""The exact probability beyond a paraboloid."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate, special

from calibrate.engine import stream
from calibrate.reliability.second_order import paraboloid

BETAS = (-3.0, 0.0, 1.0, 2.5, 5.0, 8.0, 12.0)
PIECES = (0.0, 0.5, 1.0, 2.0, 3.0, 4.0, 6.0, 9.0, 14.0, 38.0)


def density(v):
    return np.exp(-0.5 * v * v) / np.sqrt(2.0 * np.pi)


def quadrature(function):
    parts = pairwise(PIECES)
    return sum(integrate.quad(function, a, b, epsabs=0.0, epsrel=1e-11, limit=200)[0] for a, b in parts)


def one_curvature(beta, kappa):
    return 2.0 * quadrature(lambda v: special.ndtr(-(beta + 0.5 * kappa * v * v)) * density(v))


def tail(beta, *kappa):
    return float(special.ndtr(-paraboloid(np.array([beta]), np.array(kappa)[:, None]))[0])


@pytest.mark.parametrize("beta", BETAS)
@pytest.mark.parametrize("kappa", [-20.0, -1.0, -0.3, -0.08, -0.01, 0.0, 0.02, 0.4, 3.0, 50.0])
def test_one_curvature_agrees_with_quadrature(beta, kappa):
    # With beta * kappa down to -240, far beyond the limit of the asymptotic formulas.
    assert tail(beta, kappa) == pytest.approx(one_curvature(beta, kappa), rel=2e-8)


@pytest.mark.parametrize("beta", BETAS)
@pytest.mark.parametrize("kappa", [-2.0, -0.3, -0.1, 0.05, 0.7, 8.0])
def test_two_equal_curvatures_agree_with_the_closed_form(beta, kappa):
    # q = v_1^2 + v_2^2 is exponential with mean 2, by parts:
    # P(v > beta + kappa q/2) = Phi(-beta) - exp(beta/kappa + 1/(2 kappa^2)) Phi(-beta - 1/kappa), kappa > 0.
    shift = beta / kappa + 0.5 / kappa**2
    if kappa > 0.0:
        exact = special.ndtr(-beta) - np.exp(shift + special.log_ndtr(-beta - 1.0 / kappa))
    else:
        exact = special.ndtr(-beta) + np.exp(shift + special.log_ndtr(beta + 1.0 / kappa))
    # The difference of the closed form loses digits where the curvature is small or the point far.
    loss = 1e-15 * special.ndtr(-beta) / exact * (1.0 + abs(shift) + beta**2)
    assert tail(beta, kappa, kappa) == pytest.approx(exact, rel=1e-7 + 10.0 * loss)


@pytest.mark.parametrize("beta", [0.0, 2.5, 6.0, 12.0])
@pytest.mark.parametrize("kappa", [(-0.3, 0.2), (-0.9, -0.06), (0.4, 3.0), (-3.0, 5.0)])
def test_further_curvatures_agree_with_integration_over_one(beta, kappa):
    # Given v_1, what remains has one curvature: nested quadrature with the closed test above as the inner one.
    nodes, weights = np.polynomial.legendre.leggauss(60)
    v = np.concatenate([0.5 * (b - a) * nodes + 0.5 * (a + b) for a, b in pairwise(PIECES)])
    w = np.concatenate([0.5 * (b - a) * weights for a, b in pairwise(PIECES)])
    inner = [
        [special.ndtr(-(beta + 0.5 * kappa[0] * a * a + 0.5 * kappa[1] * v * v)) @ (w * density(v))]
        for a in v
    ]
    exact = 4.0 * float(np.array(inner)[:, 0] @ (w * density(v)))
    assert tail(beta, *kappa) == pytest.approx(exact, rel=1e-7)


def test_five_curvatures_agree_with_simulation():
    kappa = np.array([-0.4, -0.1, 0.0, 0.3, 1.0])
    v = stream(7, "paraboloid").standard_normal((5, 200_000))
    # The coordinate towards failure is integrated exactly.
    values = special.ndtr(-(2.0 + 0.5 * kappa @ (v * v)))
    error = values.std() / np.sqrt(values.size)
    assert abs(tail(2.0, *kappa) - values.mean()) < 4.0 * error


@given(
    beta=st.floats(-10.0, 12.0),
    kappa=st.lists(st.floats(-3.0, 3.0), min_size=1, max_size=6),
    more=st.floats(0.01, 1.0),
)
def test_a_larger_curvature_is_safer(beta, kappa, more):
    k = np.array(kappa)[:, None]
    greater = k.copy()
    greater[0] += more
    low, high = paraboloid(np.array([beta]), k), paraboloid(np.array([beta]), greater)
    assert high > low - 1e-6
    assert paraboloid(np.array([beta + more]), k) > low


@given(kappa=st.lists(st.floats(-1.0, 1.0), min_size=2, max_size=6), beta=st.floats(-5.0, 8.0))
def test_the_order_of_the_axes_does_not_matter(kappa, beta):
    k, b = np.array(kappa)[:, None], np.array([beta])
    np.testing.assert_allclose(paraboloid(b, k), paraboloid(b, k[::-1].copy()), rtol=1e-6, atol=1e-7)


def test_a_situation_has_the_same_bits_alone_and_in_any_batch():
    rng = stream(3, "batch")
    beta, kappa = rng.uniform(-6.0, 12.0, 1300), rng.normal(0.0, 1.0, (4, 1300))
    kappa[:, ::7] *= 300.0
    beta[5], kappa[2, 9] = np.nan, np.inf
    whole = paraboloid(beta, kappa)
    assert np.isfinite(whole).mean() > 0.99
    for j in range(0, 1300, 13):
        assert paraboloid(beta[j : j + 1], kappa[:, j : j + 1]).tobytes() == whole[j : j + 1].tobytes()
    for size in (2, 3, 5, 8, 601):
        assert (
            paraboloid(beta[3 : 3 + size], kappa[:, 3 : 3 + size]).tobytes() == whole[3 : 3 + size].tobytes()
        )
