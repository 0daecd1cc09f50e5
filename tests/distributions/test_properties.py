"""Properties that hold for any parameters: growth, inverses, reflections, powers, changes of location and unit."""

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from calibrate.distributions import family_names, maximum_of, minimum_of

from .cases import made, spread

us = st.floats(-9.0, 9.0)
locations = st.floats(-100.0, 100.0)
scales = st.floats(0.05, 50.0)
shapes = st.floats(0.6, 30.0)

# Strategies for own parameters in the family's order.
ANY = {
    "normal": st.tuples(locations, scales),
    "lognormal": st.tuples(scales, st.floats(0.02, 2.0)),
    "gumbel": st.tuples(locations, scales),
    "gumbel_min": st.tuples(locations, scales),
    "weibull": st.tuples(scales, shapes),
    "frechet": st.tuples(scales, st.floats(2.1, 60.0)),
    "gamma": st.tuples(shapes, scales),
    "uniform": st.tuples(locations, scales).map(lambda t: (t[0], t[0] + t[1])),
    "exponential": st.tuples(scales),
    "weibull3": st.tuples(locations, scales, shapes),
    "lognormal3": st.tuples(locations, scales, st.floats(0.02, 2.0)),
    "gev": st.tuples(locations, scales, st.floats(-0.8, 0.45)),
    "beta": st.tuples(shapes, shapes, locations, scales).map(lambda t: (*t[:3], t[2] + t[3])),
    "student_t": st.tuples(locations, scales, st.floats(2.1, 400.0)),
    "log_student_t": st.tuples(scales, st.floats(0.02, 0.2), st.floats(12.0, 400.0)),
    "truncated_normal": st.tuples(locations, scales, st.floats(-3.0, 0.5), st.floats(1.0, 4.0)).map(
        lambda t: (*t[:2], t[0] + t[1] * t[2], t[0] + t[1] * t[3])
    ),
    "constant": st.tuples(locations),
}
SCATTERED = [n for n in ANY if n != "constant"]
SYMMETRIC = {  # own parameters -> centre
    "normal": lambda p: p[0],
    "student_t": lambda p: p[0],
    "uniform": lambda p: p[0] + 0.5 * (p[1] - p[0]),
}


@st.composite
def variables(draw, names=tuple(SCATTERED)):
    """Draw a distribution of any of the families."""
    name = draw(st.sampled_from(names))
    return made(name, draw(ANY[name]))


def size(d):
    """Return what rounding errors of x are measured by."""
    return spread(d) + max(abs(float(v)) for v in d.parameters.values())


def test_every_family_is_drawn():
    assert set(ANY) == set(family_names())


@given(variables(), us, us)
def test_x_grows_with_u(d, u, v):
    low, high = sorted((u, v))
    assert d.x(low) <= d.x(high) + 1e-14 * size(d)
    assert d.cdf(d.x(low)) <= d.cdf(d.x(high)) * (1.0 + 1e-12)
    assert d.x_slope(u)[1] >= 0.0


@given(variables(), us)
def test_u_is_the_inverse_of_x(d, u):
    x, slope = d.x_slope(u)
    lower, upper = d.support
    assume(lower < x < upper)
    rounding = 4e-15 * size(d) / max(float(slope), 1e-300)
    assume(rounding < 1e-3)
    assert abs(float(d.u(x)) - u) <= 1e-9 + rounding


@given(variables(), us)
def test_the_two_tails_sum_to_one_and_the_density_is_their_slope(d, u):
    x = float(d.x(u))
    assert float(d.cdf(x) + d.sf(x)) == pytest.approx(1.0, abs=1e-12)
    slope = float(d.x_slope(u)[1])
    lower, upper = d.support
    assume(min(x - lower, upper - x) > 1e-6 * size(d))
    phi = math.exp(-0.5 * u * u) / math.sqrt(2.0 * math.pi)
    assert float(d.pdf(x)) * slope == pytest.approx(phi, rel=1e-7)


@given(variables(), st.floats(-6.0, 6.0))
def test_slopes_are_those_of_x(d, u):
    """Central differences of sixth order; their own error is below the tolerance for these families."""
    h = 0.02

    def difference(f):
        weights = ((3, 1 / 60), (2, -3 / 20), (1, 3 / 4))
        return sum(c * (f(u + k * h) - f(u - k * h)) for k, c in weights) / h

    _, slope, curvature = d.x_curvature(u)
    rounding = 1e-12 * size(d)
    assert float(slope) == pytest.approx(difference(lambda v: float(d.x(v))), rel=1e-6, abs=rounding)
    assert float(curvature) == pytest.approx(
        difference(lambda v: float(d.x_slope(v)[1])), rel=1e-6, abs=rounding
    )


@pytest.mark.parametrize("name", SYMMETRIC)
@given(st.data(), us)
def test_symmetric_families_mirror(name, data, u):
    parameters = data.draw(ANY[name])
    d = made(name, parameters)
    centre = SYMMETRIC[name](parameters)
    assert float(d.x(-u)) - centre == pytest.approx(centre - float(d.x(u)), rel=1e-13, abs=1e-14 * size(d))
    assert float(d.mean) == pytest.approx(centre, rel=1e-13, abs=1e-14 * size(d))


@given(ANY["beta"], us)
def test_a_beta_variable_with_shapes_exchanged_is_mirrored(p, u):
    d, mirrored = made("beta", p), made("beta", (p[1], p[0], p[2], p[3]))
    assert float(d.x(u)) - p[2] == pytest.approx(p[3] - float(mirrored.x(-u)), rel=1e-12, abs=1e-14 * size(d))


@given(locations, scales, us)
def test_the_smallest_is_minus_the_largest_of_the_negative(location, scale, u):
    smallest, largest = made("gumbel_min", (location, scale)), made("gumbel", (-location, scale))
    assert float(smallest.x(u)) == -float(largest.x(-u))
    x = float(smallest.x(u))
    assert float(smallest.cdf(x)) == float(largest.sf(-x))
    assert float(smallest.sd) == float(largest.sd)


@given(variables(), st.floats(0.05, 200.0), st.floats(-4.0, 4.0))
def test_a_minimum_is_the_mirror_of_a_maximum_in_u(d, ratio, u):
    """max: F(x)**n = Phi(u); min: the same with both tails exchanged, so that base u mirror."""
    assume(abs(ratio - 1.0) > 1e-6)
    largest, smallest = maximum_of(d, ratio), minimum_of(d, ratio)
    assert float(largest.base_u(np.float64(u))) == -float(smallest.base_u(np.float64(-u)))


@given(variables(), st.floats(0.05, 100.0), st.floats(0.05, 100.0), st.floats(-3.0, 3.0))
def test_repeating_twice_is_repeating_by_the_product(d, n, m, u):
    twice, once = maximum_of(maximum_of(d, n), m), maximum_of(d, n * m)
    assert float(twice.x(u)) == pytest.approx(float(once.x(u)), rel=1e-11, abs=1e-12 * size(d))


@given(variables(), st.floats(1.0, 500.0), us)
def test_more_repetitions_never_make_the_maximum_smaller(d, ratio, u):
    assert float(maximum_of(d, ratio).x(u)) >= float(d.x(u)) - 1e-12 * size(d)
    assert float(minimum_of(d, ratio).x(u)) <= float(d.x(u)) + 1e-12 * size(d)


@given(variables(), st.floats(1e-6, 1e12), us)
def test_a_change_of_unit_commutes_with_the_transform(d, factor, u):
    scaled = d.scaled(factor)
    assert float(scaled.x(u)) / factor == pytest.approx(float(d.x(u)), rel=1e-10, abs=1e-12 * size(d))
    assert float(scaled.sd) / factor == pytest.approx(float(d.sd), rel=1e-9)


@pytest.mark.parametrize(
    "name", ["normal", "gumbel", "gumbel_min", "gev", "student_t", "weibull3", "lognormal3"]
)
@given(st.data(), locations, us)
def test_a_change_of_location_moves_x_and_nothing_else(name, data, shift, u):
    parameters = data.draw(ANY[name])
    d, moved = made(name, parameters), made(name, (parameters[0] + shift, *parameters[1:]))
    rounding = 1e-13 * (size(d) + size(moved))
    assert float(moved.x(u)) == pytest.approx(float(d.x(u)) + shift, rel=1e-12, abs=rounding)
    assert float(moved.mean) == pytest.approx(float(d.mean) + shift, rel=1e-12, abs=rounding)
    assert float(moved.sd) == float(d.sd)


@given(st.floats(0.1, 50.0), st.floats(1e-3, 2.0), us)
def test_relatives_agree(mean, cov, u):
    """A gamma variable of shape 1, a Weibull one of shape 1 and an exponential one are the same, and so on."""
    pairs = [
        (made("exponential", (mean,)), made("weibull", (mean, 1.0))),
        (made("exponential", (mean,)), made("gamma", (1.0, mean))),
        (made("gumbel", (mean, cov)), made("gev", (mean, cov, 0.0))),
        (made("frechet", (mean, 2.0 / cov)), made("gev", (mean, mean * cov / 2.0, cov / 2.0))),
        (made("uniform", (mean, mean + cov)), made("beta", (1.0, 1.0, mean, mean + cov))),
        (made("normal", (mean, cov)), made("truncated_normal", (mean, cov, -math.inf, math.inf))),
        (made("lognormal", (mean, cov)), made("lognormal3", (0.0, mean, cov))),
    ]
    for a, b in pairs:
        assert float(a.x(u)) == pytest.approx(float(b.x(u)), rel=1e-10, abs=1e-10 * size(a))
