"""Random problems: second order and importance sampling against quadrature, and against long plain Monte Carlo."""

import numpy as np
import pytest
from scipy.special import ndtr

from calibrate.distributions import distribution
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem, design_points
from calibrate.reliability.further_points import further_points
from calibrate.reliability.second_order import second_order
from calibrate.reliability.simulation import simulate

STRENGTHS = ("normal", "lognormal", "weibull", "gamma", "gumbel_min")
EFFECTS = ("normal", "lognormal", "gumbel", "gamma", "frechet")
N = 40


def pair(strength, effect):
    """N random ratios of a strength to an effect of two families, and the exact failure probability of each."""
    rng = np.random.default_rng([STRENGTHS.index(strength), EFFECTS.index(effect)])
    ratio = rng.uniform(1.8, 3.5, N)
    laws = (
        distribution(strength, mean=ratio, cov=rng.uniform(0.05, 0.2, N)),
        distribution(effect, mean=1.0, cov=rng.uniform(0.1, 0.35, N)),
    )
    # Gauss-Legendre over the standard normal value of the strength; the effect by its own tail.
    z, w = np.polynomial.legendre.leggauss(400)
    u, w = 9.0 * z[:, None], 9.0 * w[:, None]
    exact = np.sum(w * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi) * laws[1].sf(laws[0].x(u)), axis=0)
    state = ExpressionLimitState(parse("R - E"), ("R", "E"), {})
    return Problem(state, laws, N), exact


@pytest.mark.parametrize("effect", EFFECTS)
@pytest.mark.parametrize("strength", STRENGTHS)
def test_against_quadrature(strength, effect):
    problem, exact = pair(strength, effect)
    reliability = design_points(problem)
    there = reliability.converged & (exact > 1e-12) & (exact < 0.2)
    assert np.count_nonzero(there) > N // 2
    # Where both tails are heavy the limit state bends around the origin and has two design points.
    points = further_points(problem, reliability).u
    found = simulate(problem, "importance sampling", seed=5, cov=0.03, reliability=reliability, points=points)
    inside = (found.lower <= exact) & (exact <= found.upper)
    # 95 % intervals of independent streams: the 0.1 % fractile of a binomial number of at least 20 is 0.8.
    assert inside[there].mean() > 0.8
    # Five standard deviations at a cov of 3 %.
    np.testing.assert_allclose(found.probability[there], exact[there], rtol=0.16)
    curved = second_order(problem, reliability)
    sound = there & curved.sound
    assert np.count_nonzero(sound) > N // 3
    # The misfit that is let through is a factor of 1.1; what lies beyond its points can be more, most of all between a
    # Gumbel minimum and a Frechet effect, both of which bend the limit state around the origin.
    ratio = curved.failure_probability[sound] / exact[sound]
    assert np.mean(np.abs(ratio - 1.0) < 0.1) > 0.75
    np.testing.assert_allclose(ratio, 1.0, atol=0.35)


def test_against_long_plain_monte_carlo():
    """Twelve random problems of three variables with a product; a million samples each."""
    rng = np.random.default_rng(17)
    n = 12
    laws = (
        distribution("lognormal", mean=rng.uniform(1.7, 2.2, n), cov=rng.uniform(0.08, 0.18, n)),
        distribution("weibull", mean=1.0, cov=rng.uniform(0.08, 0.15, n)),
        distribution("gumbel", mean=1.0, cov=rng.uniform(0.15, 0.3, n)),
    )
    state = ExpressionLimitState(parse("R * T**1.5 - E"), ("R", "T", "E"), {})
    problem = Problem(state, laws, n)
    samples = 1_000_000
    p = np.empty(n)
    for i in range(n):
        r, t, e = (law.take(np.array([i])).x(rng.standard_normal(samples)) for law in laws)
        p[i] = np.mean(r * t**1.5 <= e)
    assert np.all(p > 1e-4)
    found = simulate(problem, "importance sampling", seed=2, cov=0.01, reliability=design_points(problem))
    error = np.sqrt(0.01**2 + (1.0 - p) / (samples * p))
    # Four standard deviations of the difference, in each of twelve.
    assert np.all(np.abs(found.probability / p - 1.0) < 4.0 * error)
    assert np.any(np.abs(ndtr(-design_points(problem).beta) / p - 1.0) > 4.0 * error)
