"""Maxima and minima of any number of repetitions: against the twins in both tails, closed forms, published values."""

import math

import mpmath as mp
import numpy as np
import pytest

from calibrate.distributions import Extreme, distribution, family, maximum_of, minimum_of

from . import twins
from .cases import CASES, integrated_moments, made, spread

U = np.array([-5.0, -3.0, -0.6, 0.0, 1.5, 3.8, 5.0])
FAMILIES = [n for n in CASES if n != "constant"]
BASES = [(n, p) for n in FAMILIES for p in CASES[n][:2]]
BOTH = pytest.mark.parametrize("extreme", [maximum_of, minimum_of])


@pytest.fixture(autouse=True)
def _many_digits():
    with mp.workdps(twins.DIGITS):
        yield


def exactly(name, parameters, ratio, of_maxima, u, near):
    """Return x, dx/du and d2x/du2 at u from F**ratio = Phi(u) or (1 - F)**ratio = Phi(-u), in mpmath."""
    exact, n = tuple(mp.mpf(p) for p in parameters), mp.mpf(ratio)
    # G is F for maxima and 1 - F for minima: G**n = Phi(w).
    w = mp.mpf(u) if of_maxima else -mp.mpf(u)
    log_g = mp.log(twins.Phi(w)) / n
    rare = log_g > mp.log(0.5)
    target = -mp.expm1(log_g) if rare else mp.exp(log_g)
    x, pdf = twins.tail_quantile(name, target, rare == of_maxima, exact, near)
    slope = twins.phi(w) / (n * mp.exp((n - 1) * log_g) * pdf)
    by_g = (n - 1) * pdf / mp.exp(log_g) * (1 if of_maxima else -1)
    size = mp.mpf(spread(made(name, parameters)))
    return x, slope, -slope * (u + slope * (by_g + twins.density_slope(name, exact, x, size)))


@BOTH
@pytest.mark.parametrize("ratio", [0.2, 0.7, 50.0])
@pytest.mark.parametrize("name", FAMILIES)
def test_transforms_of_extremes(name, ratio, extreme):
    parameters = CASES[name][0]
    d = extreme(made(name, parameters), ratio)
    x, slope, curvature = d.x_curvature(U)
    size = spread(made(name, parameters))
    for got in (d.x(U), d.x_slope(U)[0]):
        np.testing.assert_allclose(got, x, rtol=1e-12, atol=1e-12 * size)
    np.testing.assert_allclose(d.x_slope(U)[1], slope, rtol=1e-10)
    for u, *got in zip(U, x, slope, curvature, strict=True):
        expected = exactly(name, parameters, ratio, extreme is maximum_of, u, got[0])
        allowed = [1e-9 * max(abs(expected[0]), size)] + [
            max(1e-9 * abs(e), 1e-12 * size) for e in expected[1:]
        ]
        assert all(abs(g - e) <= a for g, e, a in zip(got, expected, allowed, strict=True)), (
            u,
            got,
            expected,
        )


@BOTH
@pytest.mark.parametrize("ratio", [0.3, 20.0])
@pytest.mark.parametrize(("name", "parameters"), BASES)
def test_probabilities_of_extremes_are_powers(name, parameters, ratio, extreme):
    base = made(name, parameters)
    d = extreme(base, ratio)
    x = base.x(np.array([-5.0, -2.0, -0.5, 0.0, 1.0, 3.0, 5.0]))
    kept, other = (base.logcdf, d.logsf) if extreme is maximum_of else (base.logsf, d.logcdf)
    same = d.logcdf if extreme is maximum_of else d.logsf
    np.testing.assert_allclose(same(x), ratio * kept(x), rtol=1e-9)
    np.testing.assert_allclose(other(x), np.log(-np.expm1(ratio * kept(x))), rtol=1e-9, atol=1e-12)
    np.testing.assert_allclose(
        d.logpdf(x), np.log(ratio) + (ratio - 1.0) * kept(x) + base.logpdf(x), rtol=1e-9, atol=1e-9
    )
    np.testing.assert_allclose(d.x(d.u(x)), x, rtol=1e-9, atol=1e-9 * spread(base))
    np.testing.assert_allclose(d.cdf(d.ppf([0.05, 0.3, 0.9])), [0.05, 0.3, 0.9], rtol=1e-9)


@BOTH
@pytest.mark.parametrize(("name", "parameters"), BASES)
def test_an_extreme_keeps_the_support(name, parameters, extreme):
    base = made(name, parameters)
    d = extreme(base, 7.0)
    np.testing.assert_array_equal(d.support, base.support)
    for x, cdf in ((-np.inf, 0.0), (np.inf, 1.0)):
        assert (float(d.cdf(x)), float(d.sf(x)), float(d.pdf(x))) == (cdf, 1.0 - cdf, 0.0)


@BOTH
@pytest.mark.parametrize(("name", "parameters"), BASES)
def test_derivatives_by_the_base_parameters(name, parameters, extreme):
    d = extreme(made(name, parameters), 12.0)
    size = spread(made(name, parameters))
    assert tuple(float(v) for v in d.parameters.values()) == parameters
    for i, (key, slopes) in enumerate(d.parameter_slopes(U).items()):
        if not np.isfinite(parameters[i]):
            np.testing.assert_array_equal(slopes, 0.0)
            continue
        h = 1e-5 * (size if family(name).carries_unit(key) else parameters[i] or 1.0)
        up, down = (
            extreme(made(name, tuple(q + s * h if k == i else q for k, q in enumerate(parameters))), 12.0).x(
                U
            )
            for s in (1.0, -1.0)
        )
        np.testing.assert_allclose(
            slopes, (up - down) / (2.0 * h), rtol=1e-6, atol=1e-7 * np.max(np.abs(slopes))
        )


def test_families_closed_under_extremes_stay_what_they_are():
    n = 50.0
    gumbel = maximum_of(made("gumbel", (1.0, 0.3)), n)
    assert gumbel.equivalent.parameters == {"location": pytest.approx(1.0 + 0.3 * math.log(n)), "scale": 0.3}
    frechet = maximum_of(made("frechet", (2.0, 4.0)), n)
    assert frechet.equivalent.parameters == {"scale": pytest.approx(2.0 * n**0.25), "shape": 4.0}
    gev = maximum_of(made("gev", (1.0, 0.3, -0.2)), n)
    shift = 0.3 * (n**-0.2 - 1.0) / -0.2
    assert gev.equivalent.parameters == {
        "location": pytest.approx(1.0 + shift), "scale": pytest.approx(0.3 * n**-0.2), "shape": -0.2,
    }  # fmt: skip
    weibull = minimum_of(made("weibull3", (5.0, 2.0, 4.0)), n)
    assert weibull.equivalent.parameters == {
        "threshold": 5.0,
        "scale": pytest.approx(2.0 * n**-0.25),
        "shape": 4.0,
    }
    smallest = minimum_of(made("gumbel_min", (1.0, 0.3)), n)
    assert smallest.equivalent.parameters == {
        "location": pytest.approx(1.0 - 0.3 * math.log(n)),
        "scale": 0.3,
    }
    assert minimum_of(made("exponential", (2.0,)), n).equivalent.parameters == {"scale": pytest.approx(0.04)}


@BOTH
@pytest.mark.parametrize(("name", "parameters"), [b for b in BASES if np.isfinite(made(*b).sd)])
def test_moments_of_extremes_are_integrals_over_all_quantiles(name, parameters, extreme):
    d = extreme(made(name, parameters), 30.0)
    mean, sd = integrated_moments(d)
    assert float(d.mean) == pytest.approx(mean, rel=0, abs=1e-9 * sd)
    assert float(d.sd) == pytest.approx(sd, rel=1e-8)


def test_moments_of_extremes_in_closed_form():
    two = maximum_of(made("normal", (0.0, 1.0)), 2.0)
    assert float(two.mean) == pytest.approx(1.0 / math.sqrt(math.pi), rel=1e-12)
    assert float(two.sd) == pytest.approx(math.sqrt(1.0 - 1.0 / math.pi), rel=1e-12)
    largest = maximum_of(made("uniform", (0.0, 1.0)), 5.0)
    assert float(largest.mean) == pytest.approx(5.0 / 6.0, rel=1e-10)
    assert float(largest.sd) == pytest.approx(math.sqrt(5.0 / 7.0) / 6.0, rel=1e-10)
    slowest = maximum_of(made("exponential", (1.0,)), 4.0)
    assert float(slowest.mean) == pytest.approx(1.0 + 1 / 2 + 1 / 3 + 1 / 4, rel=1e-10)
    assert float(slowest.sd) == pytest.approx(math.sqrt(1.0 + 1 / 4 + 1 / 9 + 1 / 16), rel=1e-10)
    assert np.isinf(minimum_of(made("frechet", (2.0, 1.5)), 3.0).sd) == np.isinf(
        made("frechet", (2.0, 1.5)).sd
    )


@BOTH
def test_one_repetition_and_no_scatter_change_nothing(extreme):
    base, constant = made("gumbel", (1.0, 0.3)), made("constant", (3.0,))
    assert extreme(base, 1.0) is base
    assert extreme(base, [1.0, 1.0]) is base
    assert extreme(constant, 50.0) is constant
    some = extreme(made("normal", (0.0, 1.0)), [1.0, 2.0])
    np.testing.assert_allclose(some.x(U[:, None])[:, 0], U, rtol=1e-12, atol=1e-14)


@BOTH
@pytest.mark.parametrize(("name", "parameters"), BASES)
def test_there_and_back_is_where_it_began(name, parameters, extreme):
    base = made(name, parameters)
    back = extreme(extreme(base, 50.0), 0.02)
    assert back.base is base if isinstance(back, Extreme) else back is base
    np.testing.assert_allclose(back.x(U), base.x(U), rtol=1e-12, atol=1e-12 * spread(base))


@BOTH
def test_extremes_of_the_other_kind_do_not_merge(extreme):
    other = minimum_of if extreme is maximum_of else maximum_of
    mixed = extreme(other(made("normal", (0.0, 1.0)), 4.0), 3.0)
    p = other(made("normal", (0.0, 1.0)), 4.0)
    x = np.array([-1.0, 0.0, 1.0])
    expected = p.cdf(x) ** 3 if extreme is maximum_of else 1.0 - p.sf(x) ** 3
    np.testing.assert_allclose(mixed.cdf(x), expected, rtol=1e-12)


@BOTH
@pytest.mark.parametrize("name", ["gumbel", "normal", "weibull"])
def test_columns_and_units_of_extremes(name, extreme):
    d = extreme(made(name, CASES[name][0]), [2.0, 0.5, 50.0])
    assert d.shape == (3,)
    assert np.broadcast_shapes(d.mean.shape, d.sd.shape) == (3,)
    taken = d.take(np.array([2, 0]))
    np.testing.assert_array_equal(taken.x(0.7), d.x(0.7)[[2, 0]])
    np.testing.assert_array_equal(taken.ratio, [50.0, 2.0])
    np.testing.assert_allclose(d.scaled(1e3).x(0.7), 1e3 * d.x(0.7), rtol=1e-12)
    assert repr(d).startswith(f"{extreme.__name__}({name}(")
    assert not d.is_normal
    single = extreme(made(name, CASES[name][0]), 3.0)
    assert single.take(np.array([0])) is single


# Published ------------------------------


@pytest.mark.parametrize(
    ("v1", "x98", "mean50", "v50", "quotient"),
    [
        (0.2, 1.5184551765, 1.6100383647, 0.1242206424, 1.0603133959),
        (0.3, 1.7776827648, 1.9150575471, 0.1566532559, 1.0772774451),
        (0.4, 2.0369103531, 2.2200767295, 0.1801739529, 1.0899236317),
        (0.5, 2.2961379413, 2.5250959118, 0.1980122806, 1.0997143797),
    ],
)
def test_annual_and_fifty_year_maxima_of_a_gumbel_action(v1, x98, mean50, v50, quotient):
    """Computed for this test in closed form: the mean moves by sqrt(6)/pi sd ln 50, the sd stays; annual mean 1."""
    annual = distribution("gumbel", mean=1.0, cov=v1)
    fifty = maximum_of(annual, 50.0)
    assert float(annual.ppf(0.98)) == pytest.approx(x98, abs=1e-8)
    assert float(fifty.mean) == pytest.approx(mean50, abs=1e-8)
    assert float(fifty.cov) == pytest.approx(v50, abs=1e-8)
    assert float(fifty.mean / annual.ppf(0.98)) == pytest.approx(quotient, abs=1e-8)


@pytest.mark.parametrize("name", FAMILIES)
def test_characteristic_values_of_actions_in_any_family(name):
    """The 2 % annual value: 0.98**50 in 50 years; 5 % in 50 years is a return period of 975 years (common practice)."""
    annual = made(name, CASES[name][0])
    fifty = maximum_of(annual, 50.0)
    assert float(fifty.cdf(annual.isf(0.02))) == pytest.approx(0.3641697, abs=1e-7)
    assert 1.0 / float(annual.sf(fifty.isf(0.05))) == pytest.approx(975.2864, abs=1e-3)
