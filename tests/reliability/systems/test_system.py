"""First-order system reliability against quadrature, closed forms and differences."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special

from calibrate.errors import InputError
from calibrate.reliability.systems import failure_logic, parallel, series, system_probability

NAMES = tuple("abcdefghij")


def equicorrelated(k, rho):
    return np.where(np.eye(k) > 0.0, 1.0, rho)


def unit_rows(rng, k, m, n):
    alpha = rng.normal(size=(k, m, n))
    return alpha / np.sqrt(np.sum(alpha**2, axis=1, keepdims=True))


def by_quadrature(beta, rho, fails):
    """Return the probability of a system with equal correlation: given the common factor all is independent."""

    def integrand(t):
        p = special.ndtr((-np.asarray(beta) - np.sqrt(rho) * t) / np.sqrt(1.0 - rho))
        return np.exp(-0.5 * t * t) / np.sqrt(2.0 * np.pi) * fails(p)

    return sum(
        integrate.quad(integrand, a, a + 1.0, epsabs=0.0, epsrel=1e-12)[0] for a in np.arange(-12.0, 12.0)
    )


def any_fails(p):
    return -np.expm1(np.sum(np.log1p(-np.minimum(p, 1.0 - 1e-16))))


def test_two_components():
    beta, matrix = [[3.0], [3.2]], equicorrelated(2, 0.6)
    union = system_probability(beta, failure_logic("a or b"), correlation=matrix)
    both = system_probability(beta, failure_logic("a and b"), correlation=matrix)
    # Eight digits of the values are given, by one-dimensional quadrature.
    assert union.probability[0] == pytest.approx(1.9478576e-3, rel=4e-8)
    assert union.beta[0] == pytest.approx(2.886485, abs=6e-7)
    assert both.probability[0] == pytest.approx(8.9178385e-5, rel=1e-8)
    assert both.beta[0] == pytest.approx(3.747850, abs=6e-7)
    assert union.probability[0] == pytest.approx(by_quadrature([3.0, 3.2], 0.6, any_fails), rel=1e-10)
    for bound in (union.lower, union.upper):
        assert bound[0] == pytest.approx(union.probability[0], rel=1e-12)
    assert both.lower[0] == both.upper[0] == both.probability[0]


@pytest.mark.parametrize(
    ("k", "beta", "union", "both"),
    [
        (5, 3.0, 6.0605846e-3, 1.8991682e-6),
        (10, 3.0, 1.09866837e-2, 1.3613004e-7),
        (3, 2.0, 5.74665485e-2, 1.37499137e-3),
    ],
)
def test_equal_correlation(k, beta, union, both):
    whole = np.full((k, 1), beta)
    found = system_probability(whole, series(NAMES[:k]), correlation=equicorrelated(k, 0.5), slopes=False)
    assert found.probability[0] == pytest.approx(union, rel=4e-8)
    assert found.probability[0] == pytest.approx(by_quadrature([beta] * k, 0.5, any_fails), rel=1e-9)
    assert found.lower[0] < union < found.upper[0]
    together = system_probability(
        whole, parallel(NAMES[:k]), correlation=equicorrelated(k, 0.5), slopes=False
    )
    assert together.probability[0] == pytest.approx(both, rel=4e-8)
    assert together.lower[0] < both < together.upper[0]


def test_simple_bounds_of_five():
    found = system_probability(
        np.full((5, 1), 3.0), series(NAMES[:5]), correlation=equicorrelated(5, 0.5), slopes=False
    )
    assert found.beta[0] == pytest.approx(2.508597, abs=6e-7)
    assert found.simple_lower[0] == pytest.approx(1.349898e-3, rel=1e-6)
    assert found.simple_upper[0] == pytest.approx(6.731292e-3, rel=1e-6)


def test_independent_and_fully_dependent_modes():
    p = special.ndtr(-3.0)
    beta = np.full((2, 1), 3.0)
    for rho, expected in ((0.0, 2.0 * p - p * p), (1.0, p), (-1.0, 2.0 * p)):
        found = system_probability(beta, series("ab"), correlation=equicorrelated(2, rho))
        assert found.probability[0] == pytest.approx(expected, rel=1e-13)
    # Of two equal modes each has half of the slope, from the mean of both sides.
    same = system_probability(beta, series("ab"), correlation=equicorrelated(2, 1.0))
    np.testing.assert_allclose(same.by_beta, 0.5, rtol=1e-12)


@pytest.mark.parametrize(
    ("text", "fails"),
    [
        ("a or (b and c)", lambda p: p[0] + p[1] * p[2] - p[0] * p[1] * p[2]),
        ("a and (b or c)", lambda p: p[0] * (p[1] + p[2] - p[1] * p[2])),
        ("(a and b) or (c and d)", lambda p: p[0] * p[1] + p[2] * p[3] - np.prod(p)),
        ("a and b or b and c or a and c", lambda p: p[0] * p[1] + (p[0] + p[1] - 2 * p[0] * p[1]) * p[2]),
    ],
)
def test_mixed_systems_of_equal_correlation(text, fails):
    logic = failure_logic(text)
    beta = np.array([2.5, 2.0, 3.0, 1.5])[: len(logic.names)]
    found = system_probability(beta[:, None], logic, correlation=equicorrelated(len(beta), 0.4))
    expected = by_quadrature(beta, 0.4, fails)
    assert found.probability[0] == pytest.approx(expected, rel=1e-10)
    assert found.lower[0] - 1e-15 <= expected <= found.upper[0] + 1e-15


def test_likely_failure_keeps_its_index():
    beta = np.array([[-6.0], [1.0]])
    found = system_probability(beta, series("ab"), correlation=np.eye(2))
    safe = special.ndtr(-6.0) * special.ndtr(1.0)
    assert found.beta[0] == pytest.approx(special.ndtri(safe), rel=1e-12)
    assert found.probability[0] == pytest.approx(1.0 - safe, rel=1e-15)


TEXTS = [
    "a or b", "a and b", "a or b or c", "a and b and c", "a or (b and c)", "a and (b or c)",
    "(a or b) and (c or d)", "a and b or b and c or a and c",
]  # fmt: skip


@pytest.mark.parametrize("text", TEXTS)
def test_slopes_against_differences(text):
    logic = failure_logic(text)
    k = len(logic.names)
    rng = np.random.default_rng(len(text))
    n = 4 if k < 4 else 1
    alpha = unit_rows(rng, k, k + 1, n)
    beta = rng.uniform(-0.5, 3.0, (k, n))
    found = system_probability(beta, logic, alpha=alpha)
    matrix = found.correlation

    def index(b, r):
        return system_probability(b, logic, correlation=r, slopes=False).beta

    step = 1e-4
    # With four components the lattice has an error, about 1e-5 of the probability.
    tolerance = {"rtol": 1e-5, "atol": 1e-6} if k < 4 else {"rtol": 2e-3, "atol": 1e-4}
    for i in range(k):
        change = np.zeros((k, n))
        change[i] = step
        slope = (index(beta + change, matrix) - index(beta - change, matrix)) / (2.0 * step)
        np.testing.assert_allclose(found.by_beta[i], slope, **tolerance)
        for j in range(i):
            turn = np.zeros((k, k, n))
            turn[i, j] = turn[j, i] = step
            slope = (index(beta, matrix + turn) - index(beta, matrix - turn)) / (2.0 * step)
            np.testing.assert_allclose(found.by_correlation[i, j], slope, **tolerance)
            np.testing.assert_array_equal(found.by_correlation[i, j], found.by_correlation[j, i])


def test_equivalent_alpha_is_the_slope_by_a_shift():
    rng = np.random.default_rng(11)
    logic = failure_logic("a or (b and c)")
    alpha = unit_rows(rng, 3, 4, 2)
    beta = rng.uniform(1.0, 3.0, (3, 2))
    found = system_probability(beta, logic, alpha=alpha)
    step = 1e-4
    slope = np.empty((4, 2))
    for i in range(4):
        ends = [
            system_probability(beta + s * alpha[:, i], logic, alpha=alpha, slopes=False).beta
            for s in (step, -step)
        ]
        slope[i] = (ends[0] - ends[1]) / (2.0 * step)
    np.testing.assert_allclose(
        found.equivalent_alpha, slope / np.sqrt(np.sum(slope**2, axis=0)), rtol=1e-5, atol=1e-7
    )


def test_equivalent_alpha_of_one_component_is_its_own():
    alpha = np.array([[[0.6], [-0.8]]])
    found = system_probability([[3.0]], failure_logic("a"), alpha=alpha)
    np.testing.assert_allclose(found.equivalent_alpha, alpha[0], rtol=1e-14)
    np.testing.assert_allclose(found.by_beta, 1.0, rtol=1e-14)
    assert found.lower[0] == found.upper[0] == found.probability[0]


@settings(max_examples=25)
@given(st.integers(0, 100_000), st.sampled_from(TEXTS))
def test_bounds_contain_the_probability(seed, text):
    rng = np.random.default_rng(seed)
    logic = failure_logic(text)
    k = len(logic.names)
    found = system_probability(
        rng.uniform(-1.0, 4.0, (k, 3)), logic, alpha=unit_rows(rng, k, 3, 3), slopes=False, points=256
    )
    allowed = 5.0 * found.error + 1e-12
    assert np.all(found.simple_lower <= found.lower + allowed)
    assert np.all(found.lower <= found.probability + allowed)
    assert np.all(found.probability <= found.upper + allowed)
    assert np.all(found.upper <= found.simple_upper + allowed)


def test_more_correlation_helps_a_series_and_harms_redundancy():
    rho = np.linspace(-0.95, 0.95, 21)
    beta = np.full((2, 21), 2.5)
    matrix = np.where(np.eye(2)[:, :, None] > 0.0, 1.0, rho)
    union = system_probability(beta, series("ab"), correlation=matrix).probability
    # The last digits of a union whose parts hardly meet are rounding.
    assert np.all(np.diff(union) < 1e-16)
    assert np.all(np.diff(union[8:]) < 0.0)
    found = system_probability(beta, parallel("ab"), correlation=matrix)
    assert np.all(np.diff(found.probability) > 0.0)
    assert np.all(found.by_correlation[0, 1] < 0.0)


@settings(max_examples=15)
@given(st.integers(0, 100_000))
def test_order_of_components_changes_nothing(seed):
    rng = np.random.default_rng(seed)
    alpha, beta = unit_rows(rng, 3, 4, 2), rng.uniform(0.0, 4.0, (3, 2))
    first = system_probability(beta, failure_logic("a or (b and c)"), alpha=alpha)
    order = [2, 0, 1]
    second = system_probability(beta[order], failure_logic("(c or a) and (a or b)"), alpha=alpha[order])
    np.testing.assert_allclose(second.probability, first.probability, rtol=1e-8)
    np.testing.assert_allclose(second.by_beta, first.by_beta[order], rtol=1e-6, atol=1e-9)


def test_trouble_stays_in_its_situation():
    beta = np.full((3, 3), 2.0)
    beta[1, 1] = np.nan
    alpha = unit_rows(np.random.default_rng(1), 3, 3, 3)
    alpha[0, 0, 2] = np.nan
    found = system_probability(beta, failure_logic("a or b or c"), alpha=alpha)
    for values in (found.probability, found.beta, found.lower, found.upper, found.error):
        assert np.isnan(values).tolist() == [False, True, True]
    for values in (found.by_beta, found.by_correlation, found.equivalent_alpha):
        assert not np.isnan(values[..., 0]).any()
        assert np.isnan(values[..., 1:]).all()


@pytest.mark.parametrize(
    ("text", "m"), [("a or b or c", 2), ("(a or b) and (c or d)", 3), ("a or (b and c)", 5)]
)
def test_a_situation_has_the_same_bits_in_any_batch(text, m):
    logic = failure_logic(text)
    k = len(logic.names)
    rng = np.random.default_rng(m)
    n = 8
    alpha, beta = unit_rows(rng, k, m, n), rng.uniform(-1.0, 5.0, (k, n))
    beta[0, 5] = np.nan
    whole = system_probability(beta, logic, alpha=alpha, points=64)
    for j in range(n):
        at = slice(j, j + 1)
        alone = system_probability(beta[:, at], logic, alpha=np.ascontiguousarray(alpha[:, :, at]), points=64)
        for name in type(whole).__slots__:
            part = np.ascontiguousarray(getattr(whole, name)[..., at])
            assert part.tobytes() == getattr(alone, name).tobytes(), name


def test_no_situations():
    found = system_probability(np.zeros((2, 0)), series("ab"), correlation=np.eye(2))
    assert found.beta.shape == (0,)
    assert found.by_beta.shape == (2, 0)


def test_wrong_calls():
    logic = series("ab")
    with pytest.raises(InputError, match="either alpha or correlation"):
        system_probability([[1.0], [1.0]], logic)
    with pytest.raises(InputError, match="The logic has 2 components, beta 1"):
        system_probability([[1.0]], logic, correlation=[[1.0]])
    with pytest.raises(InputError, match=r"alpha has shape \(2, 3\)"):
        system_probability([[1.0], [1.0]], logic, alpha=np.zeros((2, 3)))
    with pytest.raises(InputError, match="power of 2"):
        system_probability([[1.0], [1.0]], logic, correlation=np.eye(2), points=100)
