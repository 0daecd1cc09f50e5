"""What every registered family must do: there and back, ends, scales, extrapolation; a new family joins by itself."""

import numpy as np
import pytest

from calibrate.distributions import family, family_names
from calibrate.registry import registered

from .cases import CASES, made, sets, spread
from .twins import TWINS

U = np.linspace(-12.0, 12.0, 49)
SCATTERED = sets(without=("constant",))


def test_every_family_is_in_the_battery():
    assert set(CASES) == set(family_names())
    assert all(CASES.values())
    assert set(TWINS) == {n for n in family_names() if not family(n).is_constant}


def test_a_name_cannot_be_registered_twice():
    with pytest.raises(ValueError, match="'normal' is registered twice"):
        registered([family("normal"), family("gumbel"), family("normal")])


@pytest.mark.parametrize(("name", "parameters"), sets())
def test_parameters_are_kept_and_shown(name, parameters):
    d = made(name, parameters)
    assert tuple(float(v) for v in d.parameters.values()) == parameters
    assert repr(d).startswith(f"{name}({family(name).parameter_names[0]}=")
    assert repr(family(name)) == f"<family {name}>"


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
def test_u_to_x_and_back(name, parameters):
    """u comes back as far as x determines it; x comes back always."""
    d = made(name, parameters)
    x, slope = d.x_slope(U)
    lower, upper = d.support
    inside = (x > lower) & (x < upper)
    largest = np.maximum(np.abs(x), max(abs(p) for p in parameters if np.isfinite(p)))
    rounding = 1e-15 * largest / np.maximum(slope, 1e-300)
    clear = inside & (rounding < 1e-3)
    assert np.sum(clear) >= 20
    back = d.u(x)
    assert np.all(np.abs(back - U)[clear] <= 1e-9 + 2.0 * rounding[clear])
    np.testing.assert_allclose(d.x(back[inside]), x[inside], rtol=1e-9, atol=1e-9 * spread(d))


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
@pytest.mark.parametrize(
    ("quantile", "probability", "log"), [("ppf", "cdf", "logcdf"), ("isf", "sf", "logsf")]
)
def test_quantiles_have_their_probability_in_their_own_tail(name, parameters, quantile, probability, log):
    d = made(name, parameters)
    p = np.array([1e-12, 1e-8, 1e-4, 0.01, 0.3, 0.5, 0.9, 0.999])
    x = getattr(d, quantile)(p)
    rounding = 1e-15 * np.maximum(np.abs(x), max(abs(v) for v in parameters if np.isfinite(v))) * d.pdf(x)
    lower, upper = d.support
    inside = (x > lower) & (x < upper) & (rounding < 1e-3 * p)
    assert np.sum(inside) >= 5
    allowed = (1e-9 * p + 2.0 * rounding)[inside]
    p, x = p[inside], x[inside]
    assert np.all(np.abs(getattr(d, probability)(x) - p) <= allowed)
    assert np.all(np.abs(getattr(d, log)(x) - np.log(p)) <= allowed / p)
    np.testing.assert_allclose(d.mass_below(x), d.cdf(x), rtol=0, atol=0)


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
def test_quantiles_at_and_beyond_zero_and_one(name, parameters):
    d = made(name, parameters)
    lower, upper = d.support
    np.testing.assert_array_equal(d.ppf([0.0, 1.0]), [lower, upper])
    np.testing.assert_array_equal(d.isf([0.0, 1.0]), [upper, lower])
    assert np.all(np.isnan(d.ppf([-0.1, 1.1, np.nan])))
    assert np.all(np.isnan(d.isf([-0.1, 1.1, np.nan])))


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
def test_outside_the_support_nothing_happens(name, parameters):
    d = made(name, parameters)
    lower, upper = d.support
    below = np.array([-np.inf, lower - spread(d)]) if np.isfinite(lower) else np.array([-np.inf])
    above = np.array([np.inf, upper + spread(d)]) if np.isfinite(upper) else np.array([np.inf])
    for x, cdf, u in ((below, 0.0, -np.inf), (above, 1.0, np.inf)):
        np.testing.assert_array_equal(d.cdf(x), cdf)
        np.testing.assert_array_equal(d.sf(x), 1.0 - cdf)
        np.testing.assert_array_equal(d.pdf(x), 0.0)
        np.testing.assert_array_equal(d.logpdf(x), -np.inf)
        np.testing.assert_array_equal(d.u(x), u)
    for method in (d.cdf, d.sf, d.logcdf, d.logsf, d.pdf, d.logpdf, d.u):
        assert np.isnan(method(np.nan))


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
def test_ends_of_the_support_belong_to_it(name, parameters):
    d = made(name, parameters)
    for end, cdf in zip(d.support, (0.0, 1.0), strict=True):
        if np.isfinite(end):
            assert d.cdf(end) == pytest.approx(cdf, abs=1e-12)
            assert d.sf(end) == pytest.approx(1.0 - cdf, abs=1e-12)
            assert not np.isnan(d.logpdf(end))


@pytest.mark.parametrize("factor", [1e-6, 1e3, 1e12])
@pytest.mark.parametrize(("name", "parameters"), sets())
def test_a_change_of_unit_changes_nothing_else(name, parameters, factor):
    d = made(name, parameters)
    scaled = d.scaled(factor)
    x, slope, curvature = d.x_curvature(U)
    size = d.sd if np.isfinite(d.sd) and d.sd > 0 else np.abs(d.x(0.0)) + 1.0
    for got, expected in zip(scaled.x_curvature(U), (x, slope, curvature), strict=True):
        np.testing.assert_allclose(got / factor, expected, rtol=1e-9, atol=1e-12 * size)
    np.testing.assert_allclose(scaled.mean / factor, d.mean, rtol=1e-12, atol=1e-12 * size)
    np.testing.assert_allclose(scaled.sd / factor, d.sd, rtol=1e-11)
    for (key, got), expected in zip(
        scaled.parameter_slopes(U).items(), d.parameter_slopes(U).values(), strict=True
    ):
        unit = 1.0 if family(name).carries_unit(key) else factor
        np.testing.assert_allclose(got / unit, expected, rtol=1e-9, atol=1e-12 * size, err_msg=key)


@pytest.mark.parametrize(("name", "parameters"), SCATTERED)
def test_far_beyond_the_data_x_stays_in_the_support_and_grows(name, parameters):
    """A search may wander there; only a quantile that no double holds may be infinite."""
    d = made(name, parameters)
    u = np.linspace(-37.0, 37.0, 75)
    lower, upper = d.support
    rounding = 1e-12 * spread(d)
    with np.errstate(over="ignore"):
        x, slope, curvature = d.x_curvature(u)
        others = (d.x(u), d.x_slope(u)[0])
    held = np.abs(x) < 1e280
    assert np.all(held[np.abs(u) <= 15.0])
    for values in (x, *others):
        assert np.all(np.diff(values[held]) >= -rounding)
        assert np.all((values >= lower - rounding) & (values <= upper + rounding))
    assert np.all(slope[held] >= 0.0)
    assert np.all(np.isfinite(slope[held]))
    assert np.all(np.isfinite(curvature[held]))


@pytest.mark.parametrize(("name", "parameters"), sets())
def test_arrays_without_elements_stay_without(name, parameters):
    d = made(name, parameters)
    nothing = np.zeros((0,))
    for method in (d.x, d.u, d.logpdf, d.cdf, d.sf, d.ppf, d.isf):
        assert method(nothing).shape == (0,)
    assert all(a.shape == (0,) for a in (*d.x_curvature(nothing), *d.x_slope(nothing)))
    assert all(a.shape == (0,) for a in d.parameter_slopes(nothing).values())


def test_a_constant_is_its_value_whatever_u():
    d = made("constant", (7.5,))
    np.testing.assert_array_equal(d.x(U), 7.5)
    for got in (*d.x_curvature(U)[1:], d.u([7.5, 7.5])):
        np.testing.assert_array_equal(got, 0.0)
    np.testing.assert_array_equal(d.parameter_slopes(U)["value"], 1.0)
    assert (float(d.mean), float(d.sd), float(d.cov)) == (7.5, 0.0, 0.0)
    np.testing.assert_array_equal(d.cdf([7.4, 7.5, 7.6]), [0.0, 1.0, 1.0])
    np.testing.assert_array_equal(d.sf([7.4, 7.5, 7.6]), [1.0, 0.0, 0.0])
    assert d.is_constant
    assert not d.is_normal


def test_only_the_normal_family_is_normal():
    assert [n for n in family_names() if made(n, CASES[n][0]).is_normal] == ["normal"]
