"""Every situation ends with a β that is right or with words that say why there is none; never with a silent number."""

import math
import warnings

import numpy as np
import pytest

import calibrate
from calibrate.reliability import REACH
from calibrate.reliability.status import TEXTS

STANDARD = calibrate.distribution("normal", mean=0.0, sd=1.0)
PAIR = {"u": STANDARD, "v": STANDARD}

CONVERGED = "converged"
SEVERAL = "several design points"
NO_FAILURE = "no failure region within reach"
NO_SAFETY = "not converged: no safe region within reach"
NOT_FINITE = "not converged: the limit state is not finite where it was needed"
KINK = "not converged: the nearest point found lies on a kink or jump of the limit state"


def solve(limit_state, variables=PAIR, **quantities):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        result = calibrate.form(limit_state, variables, quantities=quantities)
    assert_consistent(result)
    return result


def assert_consistent(result):
    """Check that numbers are there exactly where the status promises them, and that the status is a known one."""
    status = result.status
    assert np.isin(status, TEXTS).all()
    np.testing.assert_array_equal(result.converged, np.isin(status, [CONVERGED, SEVERAL]))
    rest = np.char.startswith(status, "not converged: ") | (status == NO_FAILURE)
    np.testing.assert_array_equal(rest, ~result.converged)
    points = [*result.design_point.values(), *result.sensitivity.values(), *result.standard_point.values()]
    for values in (result.beta, result.failure_probability, result.gradient_norm, *points):
        np.testing.assert_array_equal(np.isfinite(values), result.converged)
        np.testing.assert_array_equal(np.isnan(values), ~result.converged)
    assert (result.iterations >= 1).all()


# Far, near and negative ------------------------------


@pytest.mark.parametrize("beta", [8.0, 12.0, 14.5, REACH, 1e-3, 1e-9, 0.0, -1e-9, -1e-3, -3.0, -12.0, -REACH])
def test_any_beta_within_reach(beta):
    result = solve("b + 0.6 * u - 0.8 * v", b=beta)
    assert result.beta == pytest.approx(beta, rel=1e-14, abs=1e-15)
    assert result.status == CONVERGED
    assert result.sensitivity["u"] == pytest.approx(0.6, abs=1e-12)
    assert result.sensitivity["v"] == pytest.approx(-0.8, abs=1e-12)
    expected = 0.5 * math.erfc(beta / math.sqrt(2.0))
    assert result.failure_probability == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize(("beta", "status"), [(15.01, NO_FAILURE), (30.0, NO_FAILURE), (-15.01, NO_SAFETY)])
def test_beyond_reach_there_is_no_beta(beta, status):
    assert solve("b + 0.6 * u - 0.8 * v", b=beta).status == status


@pytest.mark.parametrize("beta", [-12.5, -6.0, -1e-4, 0.0, 1e-4, 2.0, 8.0, 12.5, 14.9])
@pytest.mark.parametrize("form", ["R - S", "R / S - 1", "1 - (S / R)**3", "R**0.5 - S**0.5"])
def test_tails_of_a_lognormal_closed_form(form, beta):
    variables = {
        "R": calibrate.distribution("lognormal", median=math.exp(0.5 * beta), log_sd=0.3),
        "S": calibrate.distribution("lognormal", median=1.0, log_sd=0.4),
    }
    result = solve(form, variables)
    assert result.beta == pytest.approx(beta, abs=1e-8)
    assert result.status == CONVERGED


def test_a_tail_in_which_only_the_survival_function_has_digits():
    # One variable: the design point is the quantile itself, Phi(-beta) = P(S > 400).
    extreme = calibrate.distribution("gumbel", location=30.0, scale=10.0)
    result = solve("400 - S", {"S": extreme})
    assert result.failure_probability == pytest.approx(-math.expm1(-math.exp(-37.0)), rel=1e-10)
    assert result.design_point["S"] == pytest.approx(400.0, rel=1e-12)


# Several design points, kinks ------------------------------

SQRT2 = math.sqrt(2.0)
CORNER = 7.0 / SQRT2
BRANCHES = "min(min(3 + 0.1 * (u - v)**2 - (u + v) / r, 3 + 0.1 * (u - v)**2 + (u + v) / r), min(u - v + k, v - u + k))"
KNOWN = {
    # Worked by hand: distance of the nearest point of each region.
    "3 - abs(u)": (3.0, SEVERAL),
    "min(3 - u, 3.05 + u)": (3.0, SEVERAL),
    "min(3 - u, 4.5 - v)": (3.0, CONVERGED),
    "min(3 - u, 9 - 0 * v)": (3.0, CONVERGED),
    "max(3 - u, 2 - v)": (math.hypot(3.0, 2.0), CONVERGED),
    "max(3 - u, 1 + u - v)": (5.0, CONVERGED),
    "max(1 - u, 3 - u - v)": (3.0 / SQRT2, CONVERGED),
    "abs(u) - 2": (-2.0, SEVERAL),
    "9 - u**2 - v**2": (3.0, SEVERAL),
    "u**2 + v**2 - 9": (-3.0, SEVERAL),
    "u * v + 1": (SQRT2, SEVERAL),
    "20 + u**3 + v**3": (20.0 ** (1.0 / 3.0), SEVERAL),
    "where(u >= 0, 3 - u, 3 + 0.5 * u)": (3.0, CONVERGED),
    "min(abs(3.1 - u), 4 - v)": (4.0, CONVERGED),
    "exp(3 * u + 8) - 1": (8.0 / 3.0, CONVERGED),
    "(3 - u) * exp(v)": (3.0, CONVERGED),
    "log(3 - u) + 5": (3.0 - math.exp(-5.0), CONVERGED),
    "sqrt(3 - u) - 0.5": (2.75, CONVERGED),
}


@pytest.mark.parametrize("limit_state", KNOWN)
def test_nearest_point_of_limit_states_that_are_not_smooth_or_not_alone(limit_state):
    beta, status = KNOWN[limit_state]
    result = solve(limit_state)
    assert result.beta == pytest.approx(beta, abs=2e-9)
    assert result.status == status


@pytest.mark.parametrize("limit_state", KNOWN)
def test_the_same_as_a_function_of_which_nothing_is_known(limit_state):
    functions = {
        "abs": np.abs, "min": np.minimum, "max": np.maximum, "where": np.where,
        "exp": np.exp, "log": np.log, "sqrt": np.sqrt,
    }  # fmt: skip
    code = compile(limit_state, "limit state", "eval")

    def g(u, v):
        return eval(code, functions, {"u": u, "v": v}) + 0.0 * u

    beta, status = KNOWN[limit_state]
    result = solve(g)
    # Differences see both branches next to a kink.
    assert result.beta == pytest.approx(beta, abs=2e-6)
    assert result.status == status


# M. Waarts, Structural reliability using finite element methods (2000), four branches; worked by hand: the curved
# branches are at a distance of 3, the straight ones at (7/sqrt 2)/sqrt 2 = 3.5.
def test_series_system_of_four_branches():
    result = solve(BRANCHES, k=CORNER, r=SQRT2)
    assert result.beta == pytest.approx(3.0, abs=1e-9)
    assert result.status == SEVERAL
    assert abs(result.standard_point["u"]) == pytest.approx(3.0 / SQRT2, abs=1e-6)
    assert result.standard_point["u"] == pytest.approx(result.standard_point["v"], abs=1e-6)


def test_flat_quartic():
    """x1^4 + 2 x2^4 = 20 with N(10, 5): the nearest of two million points all round the curve."""
    wide = calibrate.distribution("normal", mean=10.0, sd=5.0)
    result = solve("x1**4 + 2 * x2**4 - 20", {"x1": wide, "x2": wide})
    angle = np.linspace(0.0, 2.0 * np.pi, 2_000_001)
    x1, x2 = np.cos(angle), np.sin(angle)
    radius = (20.0 / (x1**4 + 2.0 * x2**4)) ** 0.25
    nearest = np.min(np.hypot(radius * x1 - 10.0, radius * x2 - 10.0)) / 5.0
    assert result.beta == pytest.approx(nearest, abs=1e-9)
    assert result.status == CONVERGED
    g, steepest = (
        sum(c * result.design_point[x] ** 4 for x, c in (("x1", 1), ("x2", 2))) - 20.0,
        result.gradient_norm,
    )
    assert abs(g) <= 1e-9 * steepest


# Nothing to find ------------------------------


@pytest.mark.parametrize(
    ("limit_state", "status"),
    [
        ("u**2 + v**2 + 1", NO_FAILURE),
        ("abs(u) + 1", NO_FAILURE),
        ("exp(u) + exp(v)", NO_FAILURE),
        ("max(3 - u, u - 2)", NO_FAILURE),
        ("abs(3.1 - u)", NO_FAILURE),
        # A ray meets this zero exactly; whether it is a failure cannot be seen.
        ("abs(3 - u)", KINK),
        ("(3.1 - u + 0.5 * v)**2", NO_FAILURE),
        ("-(3.1 - u + 0.5 * v)**2", NO_SAFETY),
        ("-1 - u**2", NO_SAFETY),
        ("1 + 0 * u", NO_FAILURE),
        ("0 * u - 1", NO_SAFETY),
        ("0 * u", KINK),
        ("sqrt(-1 - u**2)", NOT_FINITE),
        ("log(u - 1)", NOT_FINITE),
        ("1 / u", NOT_FINITE),
        ("sqrt(3 - u) + 0.5", NOT_FINITE),
        ("where(u >= 3, -1, 1)", KINK),
        ("where(u >= 3, 0, 1)", KINK),
        ("1e200 * (3 - u)", NOT_FINITE),
    ],
)
def test_no_design_point_is_told_in_words(limit_state, status):
    assert solve(limit_state).status == status


@pytest.mark.parametrize(
    ("value", "status"),
    [(1.0, NO_FAILURE), (-1.0, NO_SAFETY), (0.0, KINK), (np.nan, NOT_FINITE), (np.inf, NOT_FINITE)],
)
def test_a_function_that_returns_a_constant(value, status):
    assert solve(lambda u, v: np.full_like(u, value)).status == status


@pytest.mark.parametrize(
    "jump", ["where(u >= 3, -1 - 0.1 * u, 5 - u)", "1 / (3 - u)", "where(u + v >= 3, -v, 9 - v)"]
)
def test_a_jump_is_no_design_point(jump):
    assert not solve(jump).converged


def test_not_a_number_on_part_of_the_way():
    # The root ends the domain at u = -4; the limit state fails before.
    assert solve("sqrt(u + 4) - 0.5 + 0 * v").beta == pytest.approx(3.75, abs=1e-9)
    # A gradient that is not a number is no better than a value.
    result = calibrate.form(
        lambda u, v: 3.0 - u, PAIR, gradient=lambda u, v: {"u": np.full_like(u, np.nan), "v": 0.0}
    )
    assert_consistent(result)
    assert not result.converged


def test_supports_that_only_touch():
    """R from 2 to 3 and S up to 1.9, 2 or 2.1: only the last can fail."""
    variables = {
        "R": calibrate.distribution("uniform", lower=2.0, upper=3.0),
        "S": calibrate.distribution("uniform", lower=0.0, upper=[1.9, 2.0, 2.1]),
    }
    result = solve("R - S", variables)
    assert result.status.tolist() == [NO_FAILURE, KINK, CONVERGED]


@pytest.mark.parametrize(("strength", "status"), [(4.0, NO_FAILURE), (2.0, NO_SAFETY), (3.0, KINK)])
def test_no_variable_that_varies(strength, status):
    fixed = {name: calibrate.distribution("constant", value=v) for name, v in [("R", strength), ("S", 3.0)]}
    assert solve("R - S", fixed).status == status


def test_one_bad_situation_leaves_the_others_alone():
    b = np.array([3.0, -1.0, 20.0, np.pi])
    result = solve("sqrt(b) - u", b=b)
    assert result.status.tolist() == [CONVERGED, NOT_FINITE, CONVERGED, CONVERGED]
    np.testing.assert_allclose(result.beta[[0, 2, 3]], np.sqrt(b[[0, 2, 3]]), rtol=1e-14)
