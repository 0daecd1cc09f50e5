"""Mixtures against a plain root of the mixed probability, sums of component moments and differences."""

import mpmath
import numpy as np
import pytest
from scipy import optimize, special

from calibrate.distributions import distribution, mixture
from calibrate.errors import InputError

from .cases import spread
from .test_batches import assert_same_bits

U = np.array([-12.0, -8.0, -4.0, -1.3, -0.2, 0.0, 0.6, 2.0, 5.0, 9.0, 12.0])

# family, parameters of the components, weights
MIXTURES = {
    "like": ("normal", {"location": [29.5, 30.0, 30.6], "scale": [3.8, 4.0, 4.3]}, [0.2, 0.5, 0.3]),
    "apart": ("normal", {"location": [0.0, 50.0], "scale": [1.0, 3.0]}, [0.7, 0.3]),
    "rare": ("lognormal", {"median": [1.0, 4.0], "log_sd": [0.1, 0.6]}, [1.0 - 1e-6, 1e-6]),
    "shapes": ("gev", {"location": [4.0, 4.1, 4.0], "scale": [0.5, 0.6, 0.4], "shape": [-0.2, 0.0, 0.2]}, [1, 2, 1]),
    "bounded": ("uniform", {"lower": [0.0, 1.0], "upper": [2.0, 4.0]}, [0.5, 0.5]),
    "touching": ("weibull3", {"threshold": [0.0, 5.0], "scale": [2.0, 2.0], "shape": [3.0, 1.5]}, [0.4, 0.6]),
    "tails": ("student_t", {"location": [1.0, 2.0], "scale": [1.0, 1.0], "freedom": [4.0, 9.0]}, [0.5, 0.5]),
    "one": ("gumbel", {"location": [21.0], "scale": [5.0]}, [3.0]),
}  # fmt: skip


def made(name):
    family, parameters, weights = MIXTURES[name]
    components = distribution(family, **{k: np.array(v) for k, v in parameters.items()})
    return mixture(components, weights), components, np.array(weights) / np.sum(weights)


@pytest.fixture(params=MIXTURES)
def mixed(request):
    """A mixture, its components and its weights."""
    return made(request.param)


def test_probabilities_are_weighted_sums(mixed):
    m, components, weights = mixed
    x = m.x(np.linspace(-5.0, 5.0, 11))
    np.testing.assert_allclose(m.pdf(x), components.pdf(x[:, None]) @ weights, rtol=1e-12)
    np.testing.assert_allclose(m.cdf(x), components.cdf(x[:, None]) @ weights, rtol=1e-12)
    np.testing.assert_allclose(m.sf(x), components.sf(x[:, None]) @ weights, rtol=1e-12)


def test_x_is_the_root_of_the_mixed_probability(mixed):
    m, components, weights = mixed
    size = spread(m)
    for u in U:
        upper = u > 0.0
        wanted = special.log_ndtr(-abs(u))

        def excess(x, upper=upper, wanted=wanted):
            logs = components.logsf(x) if upper else components.logcdf(x)
            value = special.logsumexp(logs, b=weights) - wanted
            return max(value, -1e6)

        ends = components.x(u)
        low, high = ends.min() - 1e-9 * size, ends.max() + 1e-9 * size
        root = optimize.brentq(excess, low, high, xtol=1e-14 * size, rtol=1e-15)
        assert float(m.x(u)) == pytest.approx(root, abs=1e-9 * max(abs(root), size)), u


def test_normal_components_against_many_digits():
    m, components, weights = made("apart")
    with mpmath.workdps(60):
        for u in U:

            def excess(x, u=u):
                each = zip(weights, *components.values, strict=True)
                side = -1 if u > 0 else 1  # from the tail in which it lies
                mixed = sum(mpmath.mpf(w) * mpmath.ncdf(side * (x - a) / b) for w, a, b in each)
                return mpmath.log(mixed / mpmath.ncdf(side * u))

            start = float(m.x(u))
            root = mpmath.findroot(excess, (start, start + 1e-6))
            assert start == pytest.approx(float(root), rel=1e-12), u


def test_x_and_u_are_inverse(mixed):
    m = mixed[0]
    np.testing.assert_allclose(m.u(m.x(U[1:-2])), U[1:-2], rtol=0, atol=1e-6)
    np.testing.assert_allclose(m.ppf(m.cdf(m.x(U[2:7]))), m.x(U[2:7]), rtol=1e-10)


# The density of the bounded and touching ones jumps or has a kink where a component begins.
@pytest.mark.parametrize("name", [n for n in MIXTURES if n not in {"bounded", "touching"}])
def test_slopes_by_differences(name):
    m = made(name)[0]
    h = 1e-4
    x, slope, curvature = m.x_curvature(U)
    before, after = m.x(U - h), m.x(U + h)
    np.testing.assert_allclose(x, m.x(U), rtol=0)
    np.testing.assert_allclose(slope, (after - before) / (2 * h), rtol=1e-5, atol=1e-9 * spread(m))
    steps = (m.x_slope(U + h)[1] - m.x_slope(U - h)[1]) / (2 * h)
    np.testing.assert_allclose(curvature, steps, rtol=1e-4, atol=1e-6 * spread(m))
    np.testing.assert_array_equal(m.x_slope(U)[1], slope)
    assert m.parameter_slopes(U) == {}


def test_moments_are_those_of_the_density(mixed):
    m, components, _ = mixed
    ends = components.x(np.linspace(-12.0, 12.0, 4001)[:, None])
    grid = np.unique(ends)
    knots, weights = np.polynomial.legendre.leggauss(4)
    half = 0.5 * np.diff(grid)[:, None]
    x = grid[:-1, None] + half * (1.0 + knots)
    mass = half * weights * m.pdf(x)
    mean = np.sum(mass * x)
    assert float(np.sum(mass)) == pytest.approx(1.0, rel=1e-9)
    assert float(m.mean) == pytest.approx(mean, rel=1e-9)
    assert float(m.sd) == pytest.approx(np.sqrt(np.sum(mass * (x - mean) ** 2)), rel=1e-7)


def test_two_normals_have_the_textbook_moments():
    m = made("apart")[0]
    assert float(m.mean) == pytest.approx(0.3 * 50.0)
    assert float(m.sd) == pytest.approx(np.sqrt(0.7 * 1.0 + 0.3 * 9.0 + 0.7 * 0.3 * 50.0**2))


def test_one_component_is_that_component():
    m, components, _ = made("one")
    np.testing.assert_allclose(m.x(U), components.x(U), rtol=1e-14)
    np.testing.assert_allclose(m.x_curvature(U), components.x_curvature(U), rtol=1e-9)


def test_it_does_not_vary_with_the_situation_and_follows_the_unit(mixed):
    m = mixed[0]
    assert m.shape == ()
    assert m.take(np.array([0, 0])) is m
    assert not m.is_normal
    np.testing.assert_allclose(m.scaled(1000.0).x(U), 1000.0 * m.x(U), rtol=1e-11, atol=1e-9 * spread(m))
    assert float(m.scaled(1000.0).sd) == pytest.approx(1000.0 * float(m.sd))


@pytest.mark.parametrize("name", ["like", "shapes", "apart"])
def test_a_batch_gives_the_bits_of_one_at_a_time(name):
    m = made(name)[0]
    with np.errstate(all="ignore"):
        assert_same_bits(m, U[::2], m.x(U[::2]))


def test_support_spans_all_components():
    assert [float(e) for e in made("bounded")[0].support] == [0.0, 4.0]
    assert float(made("bounded")[0].ppf(1.0)) == 4.0


def test_draws_follow_the_mixture():
    m = made("apart")[0]
    x = m.sample(np.random.default_rng(3), 4000)
    assert np.mean(x > 25.0) == pytest.approx(0.3, abs=4 * np.sqrt(0.21 / 4000))


def test_components_without_weight_are_left_out():
    components = distribution("normal", location=np.array([0.0, 1e6, 2.0]), scale=np.array([1.0, 1.0, 1.0]))
    m = mixture(components, [2.0, 0.0, 2.0])
    assert repr(mixture(components, [2e200, 1e-200, 2e200])) == repr(m)
    assert repr(m) == "<mixture of 2 normal distributions>"
    assert float(m.mean) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("weights", "words"),
    [
        ([1.0], "as many weights"),
        ([[0.5, 0.5]], "as many weights"),
        ([1.0, -0.1], "zero or positive"),
        ([0.0, 0.0], "not all zero"),
        ([1.0, np.nan], "zero or positive"),
        ([1.0, np.inf], "zero or positive"),
    ],
)
def test_weights_that_do_not_fit(weights, words):
    components = distribution("normal", location=np.array([0.0, 1.0]), scale=1.0)
    with pytest.raises(InputError, match=words):
        mixture(components, weights)


def test_components_must_be_a_row():
    one = distribution("normal", location=0.0, scale=1.0)
    with pytest.raises(InputError, match="as many weights"):
        mixture(one, 1.0)


def test_the_maximum_of_a_mixture_is_not_that_of_a_member():
    from calibrate.distributions import distribution, maximum_of, mixture

    components = distribution("gumbel", location=np.array([1.0, 2.0]), scale=np.array([0.2, 0.5]))
    mixed = mixture(components, [0.7, 0.3])
    largest = maximum_of(mixed, 50.0)
    x = np.array([1.5, 2.5, 4.0, 6.0])
    exact = (0.7 * components.take(np.array([0])).cdf(x) + 0.3 * components.take(np.array([1])).cdf(x)) ** 50
    np.testing.assert_allclose(largest.cdf(x), exact, rtol=1e-10)
    u = np.array([-2.0, 0.0, 3.0])
    np.testing.assert_allclose(largest.u(largest.x(u)), u, atol=1e-9)
