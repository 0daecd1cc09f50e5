"""The coefficient of the Nataf transformation: published tables, closed forms, two-dimensional quadrature."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special, stats

from calibrate.distributions import Distribution, distribution, maximum_of, minimum_of, mixture
from calibrate.errors import InputError
from calibrate.reliability.dependence import equivalent_correlation

NORMAL = distribution("normal", mean=3.0, cov=0.2)
UNIFORM = distribution("uniform", lower=-1.0, upper=4.0)
EXPONENTIAL = distribution("exponential", mean=2.0)
GUMBEL = distribution("gumbel", mean=1.0, cov=0.3)


def with_cov(name, cov):
    return distribution(name, mean=1.0, cov=cov)


def coefficient(first, second, rho, **kind):
    return equivalent_correlation(first, second, rho, **kind).coefficient


# Published ------------------------------

TABLES = [
    (UNIFORM, NORMAL, 0.5, 1.0233),
    (EXPONENTIAL, NORMAL, 0.5, 1.1072),
    (GUMBEL, NORMAL, 0.5, 1.0315),
    (NORMAL, with_cov("weibull", 0.2), 0.5, 1.0039),
    (NORMAL, with_cov("frechet", 0.2), 0.5, 1.0904),
    (UNIFORM, UNIFORM, 0.5, 1.03528),
    (EXPONENTIAL, EXPONENTIAL, 0.5, 1.0932),
    (EXPONENTIAL, EXPONENTIAL, -0.5, 1.4475),
    (GUMBEL, GUMBEL, 0.5, 1.0309),
    (GUMBEL, GUMBEL, -0.5, 1.0996),
    (EXPONENTIAL, GUMBEL, 0.5, 1.0742),
    (EXPONENTIAL, GUMBEL, -0.5, 1.2259),
    (UNIFORM, GUMBEL, 0.5, 1.0591),
    (UNIFORM, EXPONENTIAL, 0.5, 1.1399),
    (with_cov("lognormal", 0.3), GUMBEL, 0.5, 1.0266),
    (with_cov("lognormal", 0.3), GUMBEL, -0.5, 1.0835),
    (with_cov("weibull", 0.1), GUMBEL, 0.5, 1.0690),
    (with_cov("weibull", 0.1), GUMBEL, -0.5, 1.0241),
    (with_cov("weibull", 0.1), with_cov("weibull", 0.2), 0.5, 1.0106),
    (with_cov("weibull", 0.1), with_cov("weibull", 0.2), -0.5, 1.0255),
    (with_cov("lognormal", 0.3), with_cov("weibull", 0.2), 0.5, 1.0356),
    (with_cov("lognormal", 0.3), with_cov("weibull", 0.2), -0.5, 1.0168),
]


@pytest.mark.parametrize(("first", "second", "rho", "ratio"), TABLES)
def test_ratios_of_the_tabulated_pairs(first, second, rho, ratio):
    """Pairs of Liu & Der Kiureghian (1986), Tables 2 to 6; the ratios to four digits by quadrature."""
    assert coefficient(first, second, rho) / rho == pytest.approx(ratio, abs=2e-4)


def lognormal_gumbel(v, r):
    return 1.029 + 0.001 * r + 0.014 * v + 0.004 * r**2 + 0.233 * v**2 - 0.197 * r * v


def weibull_gumbel(v, r):
    return 1.064 + 0.065 * r - 0.210 * v + 0.003 * r**2 + 0.356 * v**2 - 0.211 * r * v


FORMULAS = {
    "normal-weibull": (lambda v: (NORMAL, with_cov("weibull", v)), lambda v, r: 1.031 - 0.195 * v + 0.328 * v**2),
    "gumbel-gumbel": (lambda v: (GUMBEL, GUMBEL), lambda v, r: 1.064 - 0.069 * r + 0.005 * r**2),
    "exponential-gumbel": (lambda v: (EXPONENTIAL, GUMBEL), lambda v, r: 1.142 - 0.154 * r + 0.031 * r**2),
    "uniform-exponential": (lambda v: (UNIFORM, EXPONENTIAL), lambda v, r: 1.133 + 0.029 * r**2),
    "lognormal-gumbel": (lambda v: (with_cov("lognormal", v), GUMBEL), lognormal_gumbel),
    "weibull-gumbel": (lambda v: (with_cov("weibull", v), GUMBEL), weibull_gumbel),
}  # fmt: skip


@pytest.mark.parametrize("pair", FORMULAS)
@pytest.mark.parametrize("rho", [-0.4, 0.2, 0.7])
@pytest.mark.parametrize("cov", [0.1, 0.3, 0.5])
def test_formulas_fitted_by_liu_and_der_kiureghian(pair, rho, cov):
    """The largest error that the authors give for these formulas is 1.2 % (from memory)."""
    make, formula = FORMULAS[pair]
    assert coefficient(*make(cov), rho) / rho == pytest.approx(formula(cov, rho), rel=0.012)


def test_moment_and_load_of_a_column():
    """A ratio that was computed by two-dimensional quadrature elsewhere, to seven digits."""
    moment, load = distribution("normal", mean=250.0, cov=0.3), distribution("gumbel", mean=2500.0, cov=0.2)
    assert coefficient(moment, load, 0.3) == pytest.approx(0.3094492, abs=5e-8)


# Closed forms ------------------------------

# Shapes are rounded to 40 bits, so that situations share them.
SHARED = 1e-11


def test_normal_variables_keep_their_coefficient():
    found = equivalent_correlation(NORMAL, distribution("normal", mean=0.0, sd=9.0), 0.37)
    assert (found.coefficient, found.lowest, found.highest) == (0.37, -1.0, 1.0)


@pytest.mark.parametrize("cov", [0.1, 0.2, 0.3, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("rho", [-0.2, 0.5])
def test_lognormal_with_normal(cov, rho):
    expected = cov / math.sqrt(math.log1p(cov**2)) * rho
    assert coefficient(with_cov("lognormal", cov), NORMAL, rho) == pytest.approx(expected, abs=SHARED)


@pytest.mark.parametrize(("v", "w"), [(0.1, 0.2), (0.3, 0.2), (1.0, 0.4), (1.0, 1.0), (2.5, 3.0)])
@pytest.mark.parametrize("share", [-1.0, -0.9, 0.01, 0.5, 0.999999])
def test_two_lognormal_variables(v, w, share):
    """rho = (exp(rho0 s t) - 1)/(v w), also at the ends of the reach."""
    s, t = math.sqrt(math.log1p(v**2)), math.sqrt(math.log1p(w**2))
    first = distribution("lognormal", mean=2.0, cov=v)
    second = distribution("lognormal3", threshold=-7.0, mean=w - 7.0, sd=w**2)
    found = equivalent_correlation(first, second, math.expm1(share * s * t) / (v * w))
    # Near -1 the coefficient moves up to 30 times as fast as the correlation.
    assert found.coefficient == pytest.approx(share, abs=30 * SHARED)
    assert found.lowest == pytest.approx(math.expm1(-s * t) / (v * w), abs=SHARED)
    assert found.highest == pytest.approx(math.expm1(s * t) / (v * w), abs=SHARED)


@pytest.mark.parametrize("rho", [-1.0, -0.99, -0.3, 0.5, 0.9999, 1.0])
def test_uniform_variables(rho):
    """Their product-moment coefficient is that of their ranks."""
    expected = 2.0 * math.sin(math.pi * rho / 6.0)
    other = distribution("beta", shape_1=1.0, shape_2=1.0, lower=0.0, upper=5.0)
    assert coefficient(UNIFORM, other, rho) == pytest.approx(expected, abs=1e-13)
    assert coefficient(GUMBEL, EXPONENTIAL, rho, kind="rank") == expected


def test_reach_of_exponential_and_gumbel_variables():
    """Opposite exponentials: E[ln U ln(1-U)] - 1 = 1 - pi^2/6. Equal shapes reach 1."""
    found = equivalent_correlation(EXPONENTIAL, distribution("exponential", mean=7.0), 0.2)
    assert found.lowest == pytest.approx(1.0 - math.pi**2 / 6.0, abs=1e-13)
    assert found.highest == pytest.approx(1.0, abs=1e-13)
    mirrored = equivalent_correlation(GUMBEL, distribution("gumbel_min", mean=5.0, cov=0.4), -0.3)
    assert mirrored.lowest == pytest.approx(-1.0, abs=1e-13)


# Two-dimensional quadrature ------------------------------

PAIRS = {
    "frechet": distribution("frechet", scale=2.0, shape=3.0),
    "frechet, hardly a variance": distribution("frechet", scale=2.0, shape=2.1),
    "lognormal": with_cov("lognormal", 0.8),
    "gamma": with_cov("gamma", 1.5),
    "weibull": with_cov("weibull", 0.1),
    "beta, two peaks": distribution("beta", shape_1=0.4, shape_2=0.6, lower=0.0, upper=1.0),
    "truncated normal": distribution("truncated_normal", location=0.0, scale=1.0, lower=-0.5, upper=3.0),
    "student": distribution("student_t", location=1.0, scale=2.0, freedom=4.0),
    "gev": distribution("gev", location=1.0, scale=0.2, shape=-0.3),
    "maximum": maximum_of(with_cov("normal", 0.3), 50.0),
    "minimum": minimum_of(with_cov("gamma", 0.4), 0.1),
    "mixture": mixture(distribution("normal", mean=np.array([1.0, 1.3]), cov=0.2), [0.6, 0.4]),
}
NAMES = list(PAIRS)


def by_quadrature(first, second, r, reach=10.0, panels=10):
    """Return the correlation at r: Gauss's rule along and across the ridge of the bivariate normal density."""
    t, w = np.polynomial.legendre.leggauss(12)
    ends = np.linspace(-reach, reach, panels + 1)
    half = 0.5 * np.diff(ends)[:, None]
    p = (0.5 * (ends[1:] + ends[:-1])[:, None] + half * t).ravel()
    w = (half * w).ravel() * np.exp(-0.5 * p**2) / math.sqrt(2.0 * math.pi)
    along, across = math.sqrt(0.5 * (1.0 + r)) * p[:, None], math.sqrt(0.5 * (1.0 - r)) * p
    one = (first.x(along + across) - first.mean) / first.sd
    two = (second.x(along - across) - second.mean) / second.sd
    return w @ (one * two) @ w


@pytest.mark.parametrize("k", range(len(NAMES)))
@pytest.mark.parametrize(("step", "rho"), [(1, 0.5), (3, -0.25), (5, 0.75)])
def test_families_by_quadrature(k, step, rho):
    first, second = PAIRS[NAMES[k]], PAIRS[NAMES[(k + step) % len(NAMES)]]
    found = equivalent_correlation(first, second, rho)
    if not found.lowest <= rho <= found.highest:
        assert np.isnan(found.coefficient)
        rho = 0.9 * float(found.highest if rho > 0 else found.lowest)
        found = equivalent_correlation(first, second, rho)
    wide = "hardly" in NAMES[k] + NAMES[(k + step) % len(NAMES)]
    value = by_quadrature(first, second, found.coefficient, *((26.0, 30) if wide else ()))
    assert value == pytest.approx(rho, abs=1e-8)


@pytest.mark.parametrize("rho", [0.5, 0.9])
def test_two_tails_with_hardly_a_variance(rho):
    heavy = PAIRS["frechet, hardly a variance"]
    found = coefficient(heavy, heavy, rho)
    assert by_quadrature(heavy, heavy, found, reach=26.0, panels=40) == pytest.approx(rho, abs=1e-7)


def test_by_general_library():
    """scipy's quantiles of both, and its adaptive quadrature over the plane."""
    found = float(coefficient(with_cov("gamma", 0.5), with_cov("weibull", 0.3), -0.6))
    shape = distribution("weibull", mean=1.0, cov=0.3).parameters["shape"]
    first = stats.gamma(4.0)
    second = stats.weibull_min(float(shape))
    m1, s1, m2, s2 = first.mean(), first.std(), second.mean(), second.std()

    def inner(z, y):
        one = special.gammaincinv(4.0, special.ndtr(z))
        other = found * z + math.sqrt(1.0 - found**2) * y
        two = (-special.log_ndtr(-other)) ** (1.0 / float(shape))
        return (one - m1) * (two - m2) * math.exp(-0.5 * (z * z + y * y)) / (2.0 * math.pi * s1 * s2)

    rho, _ = integrate.dblquad(inner, -8.0, 8.0, -8.0, 8.0, epsabs=1e-8, epsrel=0.0)
    assert rho == pytest.approx(-0.6, abs=1e-7)


# Gaps ------------------------------


class TwoValues(Distribution):
    """0 or 1; 1 where u exceeds the one parameter."""

    __slots__ = ()
    is_normal = False

    def x(self, u):
        return np.where(np.asarray(u) > self.values[0], 1.0, 0.0)

    def _moments(self):
        share = special.ndtr(-self.values[0])
        return share, np.sqrt(share * (1.0 - share))


def two_values(share):
    return TwoValues.of(NORMAL.family, (-special.ndtri(np.asarray(share)),))


def test_mixture_with_a_gap():
    """Nearly 0 or 1 with equal probabilities: rho = 2/pi arcsin rho0 (W. F. Sheppard 1899)."""
    lower = np.array([0.0, 1.0])
    coin = mixture(distribution("uniform", lower=lower, upper=lower + 1e-8), [0.5, 0.5])
    assert coefficient(coin, coin, 0.9) == pytest.approx(math.sin(0.45 * math.pi), abs=1e-6)


@pytest.mark.parametrize("rho", [-0.995, 0.3, 0.98, 0.9999])
def test_two_equal_values(rho):
    """rho = 2/pi arcsin rho0 again, up to where the series alone is too short."""
    coin = two_values(0.5)
    assert coefficient(coin, coin, rho) == pytest.approx(math.sin(0.5 * math.pi * rho), abs=1e-6)


def test_two_unequal_values():
    """The bivariate normal probability of both, by scipy."""
    first, second = two_values(0.2), two_values(0.3)
    found = equivalent_correlation(first, second, 0.7)
    scatter = math.sqrt(0.2 * 0.8 * 0.3 * 0.7)
    assert found.highest == pytest.approx((0.2 - 0.2 * 0.3) / scatter, abs=1e-7)
    assert found.lowest == pytest.approx(-0.2 * 0.3 / scatter, abs=1e-8)
    r = float(found.coefficient)
    both = stats.multivariate_normal.cdf(special.ndtri([0.2, 0.3]), cov=[[1.0, r], [r, 1.0]], abseps=1e-9)
    assert (both - 0.06) / scatter == pytest.approx(0.7, abs=1e-7)


def test_two_values_with_a_smooth_variable():
    """E[1(z > c) h(w)] = E[h(w) Phi((r w - c)/sqrt(1 - r^2))], one integral."""
    share, r = 0.25, float(coefficient(two_values(0.25), GUMBEL, 0.6))
    c, rest = -special.ndtri(share), math.sqrt(1.0 - r * r)

    def integrand(w):
        h = (float(GUMBEL.x(w)) - float(GUMBEL.mean)) / float(GUMBEL.sd)
        return h * special.ndtr((r * w - c) / rest) * math.exp(-0.5 * w * w) / math.sqrt(2.0 * math.pi)

    value, _ = integrate.quad(integrand, -9.0, 9.0, epsabs=1e-11, limit=200)
    assert value / math.sqrt(share * (1.0 - share)) == pytest.approx(0.6, abs=1e-8)


# Batches ------------------------------


def test_a_situation_is_the_same_alone_and_in_any_batch():
    rng = np.random.default_rng(4)
    n = 60
    first = distribution("weibull", mean=rng.uniform(1.0, 9.0, n), cov=rng.choice([0.1, 0.2, 0.45], n))
    second = distribution("frechet", mean=rng.uniform(1.0, 9.0, n), sd=rng.uniform(0.2, 0.9, n))
    whole = equivalent_correlation(first, second, 0.4)
    assert whole.coefficient.shape == whole.lowest.shape == whole.highest.shape == (n,)
    backwards = np.arange(n)[::-1]
    part = equivalent_correlation(first.take(backwards), second.take(backwards), 0.4)
    np.testing.assert_array_equal(part.coefficient[::-1], whole.coefficient)
    for i in (0, 17, 59):
        alone = equivalent_correlation(first.take([i]), second.take([i]), 0.4)
        for name in ("coefficient", "lowest", "highest"):
            assert getattr(alone, name)[0] == getattr(whole, name)[i]


@pytest.mark.parametrize("repeated", [maximum_of, minimum_of])
def test_location_and_scale_do_not_matter(repeated):
    """From mean and sd or mean and cov, with bounds and thresholds moved along: the same bits."""
    mean, lift = np.array([1.0, 30.0, 7e5]), np.array([0.0, -4.0, 1e3])
    families = (
        distribution("gamma", mean=mean, sd=0.3 * mean),
        distribution("weibull3", threshold=lift, scale=mean, shape=2.5),
        distribution(
            "truncated_normal", location=lift, scale=mean, lower=lift - mean, upper=lift + 2.0 * mean
        ),
        distribution("beta", shape_1=2.0, shape_2=3.0, lower=lift, upper=lift + mean),
        repeated(distribution("lognormal", mean=mean, cov=0.2), 8.0),
    )
    for first in families:
        found = equivalent_correlation(first, distribution("uniform", lower=lift, upper=lift + mean), -0.4)
        assert np.ptp(found.coefficient) == 0.0
        assert found.coefficient[0] == coefficient(first.take([0]), UNIFORM, -0.4)[0]


FAMILIES = st.sampled_from(("normal", "lognormal", "gumbel", "weibull", "frechet", "gamma", "uniform"))


@settings(max_examples=25)
@given(FAMILIES, FAMILIES, st.floats(0.05, 0.5), st.floats(0.05, 0.5), st.floats(-0.8, 0.8))
def test_order_sign_and_size(one, two, v, w, rho):
    first, second = with_cov(one, v), with_cov(two, w)
    found, swapped = equivalent_correlation(first, second, rho), equivalent_correlation(second, first, rho)
    assert swapped.coefficient == pytest.approx(float(found.coefficient), abs=1e-13, nan_ok=True)
    if np.isnan(found.coefficient):
        assert not found.lowest <= rho <= found.highest
        return
    # Correlation of values is never stronger than that of the normal variables (H. O. Lancaster 1957).
    assert abs(rho) - 1e-13 <= abs(found.coefficient) <= 1.0
    more = coefficient(first, second, min(rho + 0.05, float(found.highest)))
    assert more > found.coefficient


# Without a coefficient ------------------------------


def test_out_of_reach():
    first = distribution("lognormal", mean=1.0, cov=np.array([0.1, 1.0]))
    found = equivalent_correlation(first, with_cov("lognormal", 1.0), -0.9)
    assert np.isfinite(found.coefficient[0]) == (found.lowest[0] <= -0.9)
    assert np.isnan(found.coefficient[1])
    assert found.lowest[1] == pytest.approx(-0.5, abs=SHARED)


def test_without_scatter_and_without_variance():
    fixed = equivalent_correlation(distribution("constant", value=np.ones(3)), GUMBEL, 0.5)
    assert np.isnan(fixed.coefficient).all()
    assert not fixed.lowest.any()
    assert not fixed.highest.any()
    heavy = distribution("frechet", scale=1.0, shape=np.array([1.5, 4.0]))
    found = equivalent_correlation(heavy, GUMBEL, 0.5)
    np.testing.assert_array_equal(np.isnan(found.coefficient), [True, False])
    np.testing.assert_array_equal(np.isnan(found.highest), [True, False])
    assert coefficient(heavy, GUMBEL, 0.5, kind="rank")[0] == 2.0 * math.sin(math.pi / 12.0)
    wild = distribution("log_student_t", median=1.0, log_scale=0.2, freedom=5.0)
    assert np.isnan(coefficient(wild, NORMAL, 0.5))


@pytest.mark.parametrize("rho", [1.2, -1.01, math.nan])
def test_refused_coefficient(rho):
    with pytest.raises(InputError, match=f"between -1 and 1; got {rho:g}"):
        equivalent_correlation(NORMAL, GUMBEL, rho)


def test_refused_kind_and_shapes():
    with pytest.raises(InputError, match=r"'ranks'.*Did you mean 'rank'"):
        equivalent_correlation(NORMAL, GUMBEL, 0.5, kind="ranks")
    first = distribution("normal", mean=np.ones(3), sd=1.0)
    second = distribution("normal", mean=np.ones(2), sd=1.0)
    with pytest.raises(InputError, match=r"\(3,\) and \(2,\)"):
        equivalent_correlation(first, second, 0.5)
