"""Multivariate normal probabilities against mpmath, one-dimensional quadrature, closed forms and scipy."""

import itertools

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special, stats

from calibrate.errors import InputError
from calibrate.reliability.systems import orthant
from calibrate.reliability.systems.bivariate import bivariate
from calibrate.reliability.systems.multinormal import below
from calibrate.reliability.systems.one_factor import loadings
from calibrate.reliability.systems.separation import separation
from calibrate.reliability.systems.trivariate import trivariate


def equicorrelated(k, rho):
    return np.where(np.eye(k) > 0.0, 1.0, rho)


def random_correlation(rng, k, m):
    a = rng.normal(size=(k, m))
    a /= np.linalg.norm(a, axis=1)[:, None]
    return a @ a.T


def exact_bivariate(b1, b2, rho):
    """Integrate the conditional distribution with mpmath, cut where it passes through its transition."""
    with mp.workdps(30):
        b1, b2, rho = mp.mpf(b1), mp.mpf(b2), mp.mpf(rho)
        s = mp.sqrt((1 - rho) * (1 + rho))
        cuts = [b1 - d for d in (0, 0.02, 0.1, 0.3, 0.8, 2, 5, 14)]
        if abs(rho) > 1e-3:
            edges = [b2 / rho + q * s / abs(rho) for q in (-8, -3, 0, 3, 8)]
            cuts += [e for e in edges if b1 - 14 < e < b1]
        return float(mp.quad(lambda x: mp.npdf(x) * mp.ncdf((b2 - rho * x) / s), sorted(cuts)))


BIVARIATE = [
    (-3.0, -3.2, 0.6), (-8.0, -8.0, 0.9), (-8.0, -3.0, -0.3), (-5.0, -5.0, -0.7), (-3.0, -3.0001, 0.99999),
    (-1e-3, -2e-4, -0.999), (0.0, 0.0, 0.3), (0.0, -4.0, 0.5), (-6.0, 1.0, 0.8), (-6.0, 1.0, -0.8),
    (-4.0, 3.5, -0.95), (2.0, 3.0, -0.4), (8.0, -8.0, 0.2), (0.3, 0.1, -0.99), (-7.0, -1.0, 0.0),
    (-0.5, -0.5, 0.999), (-2.0, 0.0, -0.999), (-3.0, -6.0, 0.5),
]  # fmt: skip


@pytest.mark.parametrize(("b1", "b2", "rho"), BIVARIATE)
def test_bivariate_against_mpmath(b1, b2, rho):
    expected = exact_bivariate(b1, b2, rho)
    found = bivariate(np.array([b1]), np.array([b2]), np.array([rho]))[0]
    assert found == pytest.approx(expected, rel=1e-11)


def test_bivariate_at_the_origin_is_the_arc_of_the_sine():
    rho = np.linspace(-1.0, 1.0, 41)
    zero = np.zeros(rho.size)
    # Sheppard's formula; near rho = -1 the difference is one of rounding.
    expected = 0.25 + np.arcsin(rho) / (2.0 * np.pi)
    np.testing.assert_allclose(bivariate(zero, zero, rho), expected, rtol=1e-14, atol=1e-16)


@given(st.floats(-8, 5), st.floats(-8, 5), st.floats(-1, 1))
def test_bivariate_against_the_difference_of_its_marginal(b1, b2, rho):
    b1, b2, rho = np.array([b1]), np.array([b2]), np.array([rho])
    both, mirrored = bivariate(b1, b2, rho), bivariate(b1, -b2, -rho)
    np.testing.assert_allclose(both + mirrored, special.ndtr(b1), rtol=2e-11)
    assert bivariate(b2, b1, rho)[0] == pytest.approx(both[0], rel=1e-12)


def test_bivariate_of_variables_that_coincide_or_oppose():
    b1, b2 = np.array([-3.0, -3.0, 2.0, -2.0, 1.0]), np.array([-4.0, 1.0, -2.5, 2.5, 3.0])
    same = bivariate(b1, b2, np.ones(5))
    np.testing.assert_allclose(same, special.ndtr(np.minimum(b1, b2)), rtol=1e-15)
    opposed = bivariate(b1, b2, -np.ones(5))
    expected = [
        0.0,
        0.0,
        0.0,
        special.ndtr(-2.0) - special.ndtr(-2.5),
        special.ndtr(1.0) - special.ndtr(-3.0),
    ]
    np.testing.assert_allclose(opposed, expected, rtol=1e-14)


def one_factor_quadrature(beta, loading):
    def integrand(t):
        z = [(-b - g * t) / np.sqrt(1.0 - g * g) for b, g in zip(beta, loading, strict=True)]
        return np.exp(-0.5 * t * t) / np.sqrt(2.0 * np.pi) * np.prod(special.ndtr(z))

    pieces = np.linspace(-12.0, 12.0, 25)
    return sum(
        integrate.quad(integrand, a, b, epsabs=0.0, epsrel=1e-11)[0] for a, b in itertools.pairwise(pieces)
    )


@pytest.mark.parametrize(
    ("k", "beta", "expected"), [(5, 3.0, 1.8991682e-6), (10, 3.0, 1.3613004e-7), (3, 2.0, 1.37499137e-3)]
)
def test_equal_correlation_of_one_half(k, beta, expected):
    found = orthant(np.full((k, 1), beta), equicorrelated(k, 0.5))
    # Nine digits of the value are given, by one-dimensional quadrature.
    assert found.value[0] == pytest.approx(expected, rel=4e-8)
    exact = one_factor_quadrature([beta] * k, [np.sqrt(0.5)] * k)
    assert found.value[0] == pytest.approx(exact, rel=1e-10)
    assert found.error[0] < 1e-10 * exact


def test_unequal_loadings_of_both_signs():
    loading = np.array([0.9, -0.4, 0.2, 0.0, 0.97])
    beta = np.array([3.0, -1.0, 0.5, 1.0, 3.5])
    matrix = np.where(np.eye(5) > 0.0, 1.0, np.outer(loading, loading))
    assert loadings(matrix[:, :, None])[1].all()
    found = orthant(beta[:, None], matrix).value[0]
    assert found == pytest.approx(one_factor_quadrature(beta, loading), rel=1e-10)


def test_a_matrix_of_full_rank_has_no_single_factor():
    rng = np.random.default_rng(1)
    assert not loadings(random_correlation(rng, 4, 6)[:, :, None])[1].any()


@pytest.mark.parametrize("most", [0.9, 0.97, 0.984, 0.99])
def test_one_factor_against_trivariate(most):
    """Also with little scatter of one variable's own, where the factor's integrand turns quickly."""
    rng = np.random.default_rng(12)
    loading = rng.uniform(-0.9, 0.9, (3, 30))
    loading[0] = most
    matrix = loading[:, None] * loading[None]
    matrix[range(3), range(3)] = 1.0
    beta = rng.uniform(-2.0, 4.0, (3, 30))
    assert loadings(matrix)[1].all() == (most < 0.985)
    found, witness = orthant(beta, matrix), trivariate(-beta, matrix)
    allowed = found.error + witness[1] + 1e-12 * witness[0]
    assert np.all(np.abs(found.value - witness[0]) <= allowed)
    np.testing.assert_allclose(found.value, witness[0], rtol=2e-8)


@pytest.mark.parametrize("beta", [0.0, 1.5, 4.0])
def test_trivariate_against_one_factor(beta):
    """The two ways know nothing of each other."""
    matrix = equicorrelated(3, 0.5)[:, :, None]
    value, _ = trivariate(np.full((3, 1), -beta), matrix)
    assert value[0] == pytest.approx(one_factor_quadrature([beta] * 3, [np.sqrt(0.5)] * 3), rel=1e-10)


def test_trivariate_at_the_origin():
    rng = np.random.default_rng(4)
    matrix = np.stack([random_correlation(rng, 3, 4) for _ in range(30)], axis=-1)
    angles = np.arcsin(matrix[0, 1]) + np.arcsin(matrix[0, 2]) + np.arcsin(matrix[1, 2])
    value, error = trivariate(np.zeros((3, 30)), np.clip(matrix, -1.0, 1.0))
    np.testing.assert_allclose(value, 0.125 + angles / (4.0 * np.pi), rtol=1e-6)
    assert np.all(np.abs(value - 0.125 - angles / (4.0 * np.pi)) <= 2.0 * error + 1e-15)


def in_a_plane(alpha, b):
    """Return the probability of half planes: over the first axis, what they leave of the second one."""

    def left(x):
        low, high = -np.inf, np.inf
        for row, limit in zip(alpha, b, strict=True):
            edge = (limit - row[0] * x) / row[1]
            low, high = (low, min(high, edge)) if row[1] > 0 else (max(low, edge), high)
        width = special.ndtr(high) - special.ndtr(low) if high > low else 0.0
        return np.exp(-0.5 * x * x) / np.sqrt(2.0 * np.pi) * width

    # Where two edges meet, the width has a bend.
    cuts = set(np.arange(-10.0, 10.1, 1.0))
    for p, q in itertools.combinations(range(len(alpha)), 2):
        cuts.add(float(np.linalg.solve(alpha[[p, q]], b[[p, q]])[0]))
    inside = sorted(c for c in cuts if abs(c) <= 10.0)
    return sum(
        integrate.quad(left, p, q, epsabs=1e-300, epsrel=1e-11)[0] for p, q in itertools.pairwise(inside)
    )


@pytest.mark.parametrize("third", [0.9, 2.5, 4.0, 5.8, 1.2001])
def test_trivariate_in_a_plane(third):
    angle = np.array([0.4, 1.2, third])
    alpha = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    b = np.array([-1.0, -0.5, 0.7])
    found = orthant(-b[:, None], alpha @ alpha.T)
    assert found.value[0] == pytest.approx(in_a_plane(alpha, b), rel=1e-8)


@pytest.mark.parametrize("seed", range(4))
def test_separation_in_a_plane(seed):
    """The matrix has rank 2: all but two variables are determined by those."""
    rng = np.random.default_rng(seed)
    angle = rng.uniform(0.0, 2.0 * np.pi, 4 + seed % 2)
    alpha, b = np.stack([np.cos(angle), np.sin(angle)], axis=1), rng.uniform(0.0, 3.0, len(angle))
    value, error = separation(b[:, None], (alpha @ alpha.T)[:, :, None])
    assert value[0] == pytest.approx(in_a_plane(alpha, b), rel=1e-4)
    assert error[0] < 1e-4 * value[0]


@pytest.mark.parametrize("gap", [1e-1, 1e-3, 1e-6, 1e-9, 1e-13])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_trivariate_parts_add_up_however_near_two_variables_are(gap, sign):
    rng = np.random.default_rng(8)
    for _ in range(5):
        a = rng.normal(size=(3, 3))
        a[1] = sign * (a[0] + gap * a[1])
        a /= np.linalg.norm(a, axis=1)[:, None]
        b, flip = rng.uniform(-3.0, 1.0, 3), np.array([1.0, 1.0, -1.0])
        matrix = a @ a.T
        parts = [orthant(-(s * b)[:, None], np.outer(s, s) * matrix) for s in (np.ones(3), flip)]
        whole = bivariate(b[:1], b[1:2], np.clip(matrix[0, 1:2], -1.0, 1.0))
        # Both parts come from other integrals than the whole does.
        assert abs(parts[0].value + parts[1].value - whole)[0] <= 1e-4 * whole[0] + 1e-300


@pytest.mark.parametrize("k", [4, 5, 7])
def test_separation_against_scipy(k):
    rng = np.random.default_rng(k)
    for _ in range(2):
        matrix = random_correlation(rng, k, k + 2)
        b = rng.uniform(-0.5, 2.0, k)
        expected = stats.multivariate_normal(cov=matrix, abseps=1e-9, releps=2e-5, maxpts=50_000 * k).cdf(
            b, rng=rng
        )
        value, error = separation(b[:, None], matrix[:, :, None])
        # The witness has a relative error of some 1e-5 itself.
        assert value[0] == pytest.approx(expected, rel=3e-4)
        assert error[0] < 1e-3 * value[0]


@pytest.mark.parametrize(("k", "beta", "rho"), [(4, 3.0, 0.5), (5, 5.0, 0.3), (8, 4.0, 0.5), (6, 3.0, 0.9)])
def test_separation_in_the_tail_against_quadrature(k, beta, rho):
    exact = one_factor_quadrature([beta] * k, [np.sqrt(rho)] * k)
    value, error = separation(np.full((k, 1), -beta), equicorrelated(k, rho)[:, :, None])
    # Five standard errors, as there are eight shifts only.
    assert abs(value[0] - exact) < 5.0 * error[0]
    assert error[0] < 1e-3 * exact


def test_more_points_are_more_accurate():
    beta, matrix = np.full((5, 1), 3.0), equicorrelated(5, 0.5)[:, :, None]
    exact = one_factor_quadrature([3.0] * 5, [np.sqrt(0.5)] * 5)
    few, many = (separation(-beta, matrix, count) for count in (64, 4096))
    assert many[1][0] < 0.1 * few[1][0]
    assert many[0][0] == pytest.approx(exact, rel=1e-5)


def test_singular_matrices():
    beta = np.array([[2.0], [2.5], [2.0], [3.0]])
    same = orthant(beta, np.ones((4, 4))).value[0]
    assert same == pytest.approx(special.ndtr(-3.0), rel=1e-12)
    twice = np.array([[1.0, 0.3, 1.0, 0.3], [0.3, 1.0, 0.3, 1.0], [1.0, 0.3, 1.0, 0.3], [0.3, 1.0, 0.3, 1.0]])
    pair = bivariate(np.array([-2.0]), np.array([-3.0]), np.array([0.3]))[0]
    assert orthant(beta, twice).value[0] == pytest.approx(pair, rel=1e-4)
    opposed = np.array([[1.0, -1.0, 0.2], [-1.0, 1.0, -0.2], [0.2, -0.2, 1.0]])
    assert orthant(beta[:3], opposed).value[0] < 1e-300


def test_independent_variables_of_any_number():
    rng = np.random.default_rng(9)
    for k in range(1, 9):
        beta = rng.uniform(-1.0, 4.0, (k, 3))
        found = orthant(beta, np.eye(k)).value
        np.testing.assert_allclose(found, np.prod(special.ndtr(-beta), axis=0), rtol=1e-10)


def test_infinite_bounds():
    beta = np.array([[np.inf, -np.inf], [1.0, 1.0]])
    found = orthant(beta, equicorrelated(2, 0.5)).value
    assert found[0] < 1e-300
    assert found[1] == pytest.approx(special.ndtr(-1.0), rel=1e-12)


@settings(max_examples=15)
@given(st.integers(0, 10_000), st.integers(3, 5))
def test_permutations_change_nothing(seed, k):
    rng = np.random.default_rng(seed)
    matrix = random_correlation(rng, k, 6)
    beta = rng.uniform(0.0, 3.0, (k, 1))
    order = rng.permutation(k)
    first = orthant(beta, matrix, points=256)
    second = orthant(beta[order], matrix[np.ix_(order, order)], points=256)
    allowed = 5.0 * (first.error + second.error) + 1e-9 * first.value
    assert abs(first.value - second.value) <= allowed


def test_trouble_stays_in_its_situation():
    beta = np.full((3, 4), 2.0)
    matrix = np.repeat(equicorrelated(3, 0.5)[:, :, None], 4, axis=2)
    beta[1, 1] = np.nan
    matrix[0, 2, 2] = np.nan
    matrix[0, 1, 3] = 1.2
    found = orthant(beta, matrix).value
    assert np.isnan(found).tolist() == [False, True, True, True]
    assert found[0] == orthant(beta[:, :1], matrix[:, :, :1]).value[0]


def test_wrong_calls():
    with pytest.raises(InputError, match=r"beta has shape \(2,\)"):
        orthant(np.zeros(2), np.eye(2))
    with pytest.raises(InputError, match=r"correlation has shape \(3, 3\)"):
        orthant(np.zeros((2, 1)), np.eye(3))
    with pytest.raises(InputError, match="power of 2"):
        orthant(np.zeros((2, 1)), np.eye(2), points=1000)


@pytest.mark.parametrize(("k", "m"), [(2, 3), (3, 2), (3, 4), (4, 1), (4, 3), (5, 6)])
def test_a_situation_has_the_same_bits_in_any_batch(k, m):
    rng = np.random.default_rng(k + m)
    n = 37
    b = rng.uniform(-4.0, 2.0, (k, n))
    matrix = np.stack([random_correlation(rng, k, m) for _ in range(n)], axis=-1)
    matrix = np.where(np.eye(k)[:, :, None] > 0.0, 1.0, np.clip(matrix, -1.0, 1.0))
    # One common factor in every third.
    matrix[:, :, ::3] = equicorrelated(k, 0.4)[:, :, None]
    value, error = below(b, matrix, 64)
    for j in range(n):
        alone = below(b[:, j : j + 1], matrix[:, :, j : j + 1], 64)
        assert alone[0].tobytes() == value[j : j + 1].tobytes()
        assert alone[1].tobytes() == error[j : j + 1].tobytes()
