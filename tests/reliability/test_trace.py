"""The way of the iteration, against steps computed by hand and against FORM itself."""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem, design_points
from calibrate.reliability.trace import trace

STANDARD = distribution("normal", mean=0.0, sd=1.0)


def problem(text, n=1, **laws):
    state = ExpressionLimitState(parse(text), tuple(laws), {})
    return Problem(state, tuple(laws.values()), n)


def test_a_plane_takes_one_step_and_one_look():
    way = trace(problem("3 - u - v", u=STANDARD, v=STANDARD))
    assert way.what == ("step", "step", "design point")
    np.testing.assert_allclose(way.u, [[0.0, 0.0], [1.5, 1.5], [1.5, 1.5]], atol=1e-14)
    np.testing.assert_allclose(way.g, [3.0, 0.0, 0.0], atol=1e-14)
    np.testing.assert_allclose(way.beta, 3.0 / math.sqrt(2.0), rtol=1e-14)
    np.testing.assert_allclose(way.distance, [0.0, 3.0 / math.sqrt(2.0), 3.0 / math.sqrt(2.0)], atol=1e-14)
    assert way.status == "converged"


def test_the_first_step_and_the_end_of_a_curved_limit_state():
    """R lognormal, S normal: g = exp(l + s u) - m - d v; at the medians the gradient is (s exp(l), -d)."""
    r = distribution("lognormal", mean=3.0, cov=0.2)
    asked = problem("R - S", R=r, S=distribution("normal", mean=1.0, sd=0.3))
    way = trace(asked)
    s = math.sqrt(math.log(1.04))
    median = 3.0 / math.sqrt(1.04)
    a = np.array([s * median, -0.3])
    np.testing.assert_allclose(way.u[1], -(median - 1.0) * a / (a @ a), rtol=1e-12)
    np.testing.assert_allclose(way.x[0], [median, 1.0], rtol=1e-12)
    np.testing.assert_allclose(way.x[:, 0], median * np.exp(s * way.u[:, 0]), rtol=1e-12)
    np.testing.assert_allclose(way.g, way.x[:, 0] - way.x[:, 1], atol=1e-12)
    found = design_points(asked)
    assert len(way.g) == found.iterations[0] + 1
    assert way.what == ("step",) * found.iterations[0] + ("design point",)
    np.testing.assert_array_equal(way.u[-1], found.u[:, 0])
    assert way.beta[-1] == found.beta[0]
    np.testing.assert_array_equal(way.variables, ("R", "S"))
    # Steps settle: the linearised distance is of second order in the error of the point.
    assert abs(way.beta[-2] - way.beta[-1]) < 1e-9


def test_a_start_is_the_first_row():
    begin = np.array([[1.0], [-0.5]])
    way = trace(problem("3 - u - v", u=STANDARD, v=STANDARD), start=begin)
    np.testing.assert_array_equal(way.u[0], [1.0, -0.5])


def test_what_the_search_found_instead_is_said():
    """The steps lead to the saddle point (4, 0, 0); the nearest points are at sqrt 7."""
    way = trace(problem("4 - u - v * w", u=STANDARD, v=STANDARD, w=STANDARD))
    assert way.what[-1] == "found by search"
    np.testing.assert_allclose(way.u[-2], [4.0, 0.0, 0.0], atol=1e-12)
    assert way.beta[-1] == pytest.approx(math.sqrt(7.0), abs=1e-9)
    assert way.status == "several design points"


def test_a_point_on_a_kink_has_its_beta():
    way = trace(problem("max(3 - u, 3.5 - v)", u=STANDARD, v=STANDARD))
    assert way.what[-1] == "found by search"
    assert way.beta[-1] == pytest.approx(math.hypot(3.0, 3.5), abs=1e-6)


def test_without_a_design_point_all_rows_are_steps():
    way = trace(problem("5 + u**2 + v", u=STANDARD, v=distribution("uniform", lower=0.0, upper=1.0)))
    assert set(way.what) == {"step"}
    assert way.status == "no failure region within reach"


def test_what_does_not_fit_is_refused():
    with pytest.raises(InputError, match="2 situations"):
        trace(problem("3 - u", n=2, u=STANDARD))
    with pytest.raises(InputError, match="shape"):
        trace(problem("3 - u", u=STANDARD), start=np.zeros(1))
    for far in (20.0, math.nan):
        with pytest.raises(InputError, match="within 15"):
            trace(problem("3 - u", u=STANDARD), start=np.full((1, 1), far))
