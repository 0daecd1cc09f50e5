"""Exact derivatives of beta by what is stated: closed forms, and central differences of beta itself."""

import numpy as np
import pytest

from calibrate.distributions import distribution, maximum_of, mixture
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import (
    CallableLimitState,
    Conditional,
    CorrelatedPair,
    ExpressionLimitState,
    Problem,
    design_points,
    nataf_correlation,
    parameter_slopes,
)
from calibrate.reliability.importance import elasticities, quantity_slopes


def solved(state, laws, pairs=(), n=1):
    """Return problem, design points and table of derivatives."""
    laws = tuple(laws)
    problem = Problem(state, laws, n, nataf_correlation(pairs, state.variables, laws, n))
    found = design_points(problem)
    return problem, found, elasticities(problem, found, pairs)


def slope(table, name, argument, kind=None):
    return table.slopes[table.row(name, argument, kind)]


def difference(function, value, step):
    """Return the central difference of fourth order."""
    near, far = (function(value + h) - function(value - h) for h in (step, 2.0 * step))
    return (8.0 * near - far) / (12.0 * step)


# Closed forms ------------------------------


def test_linear_normal():
    """beta = (z mR - mS)/sqrt(z^2 a^2 + b^2 - 2 z r a b), differentiated by complex steps."""
    values = {"mR": 9.0, "a": 1.2, "mS": 4.0, "b": 0.9, "r": 0.35, "z": 1.3}

    def beta(v):
        return (v["z"] * v["mR"] - v["mS"]) / np.sqrt(
            (v["z"] * v["a"]) ** 2 + v["b"] ** 2 - 2.0 * v["r"] * v["z"] * v["a"] * v["b"]
        )

    state = ExpressionLimitState(parse("z*R - S"), ("R", "S"), {"z": values["z"]})
    laws = distribution("normal", mean=9.0, sd=1.2), distribution("normal", mean=4.0, sd=0.9)
    _, found, table = solved(state, laws, [CorrelatedPair("R", "S", values["r"])])
    assert found.beta[0] == pytest.approx(beta(values), rel=1e-12)
    places = {"mR": ("R", "mean"), "a": ("R", "sd"), "mS": ("S", "mean"), "b": ("S", "sd")}
    places |= {"r": ("R, S", "product-moment"), "z": ("z", "value")}
    for key, place in places.items():
        expected = beta(values | {key: values[key] + 1e-30j}).imag / 1e-30
        assert slope(table, *place)[0] == pytest.approx(expected, rel=1e-11), key
        row = table.row(*place)
        assert table.values[row, 0] == values[key]
        relative = expected * values[key] / beta(values)
        assert table.elasticities[row, 0] == pytest.approx(relative, rel=1e-11)
    np.testing.assert_array_equal(slope(table, "R", "location"), slope(table, "R", "mean"))
    np.testing.assert_array_equal(slope(table, "R", "scale"), slope(table, "R", "sd"))
    assert table.kinds[:4] == ("moment", "moment", "parameter", "parameter")
    assert table.kinds[-2:] == ("correlation", "quantity")


@pytest.mark.parametrize("r", [-0.3, 0.0, 0.5])
def test_two_lognormal_variables(r):
    """beta = ln(R/S of medians)/sqrt(s^2 + t^2 - 2 ln(1 + r v w)), the coefficient r of the values held."""
    values = {"mR": 8.0, "a": 2.0, "mS": 2.5, "b": 1.0, "r": r}

    def beta(v):
        v_r, v_s = v["a"] / v["mR"], v["b"] / v["mS"]
        s2, t2 = np.log(1.0 + v_r**2), np.log(1.0 + v_s**2)
        gap = np.log(v["mR"] / v["mS"]) - 0.5 * s2 + 0.5 * t2
        return gap / np.sqrt(s2 + t2 - 2.0 * np.log(1.0 + v["r"] * v_r * v_s))

    state = ExpressionLimitState(parse("R - S"), ("R", "S"))
    laws = distribution("lognormal", mean=8.0, sd=2.0), distribution("lognormal", mean=2.5, sd=1.0)
    _, found, table = solved(state, laws, [CorrelatedPair("R", "S", r)])
    assert found.beta[0] == pytest.approx(beta(values), rel=1e-10)
    places = {"mR": ("R", "mean"), "a": ("R", "sd"), "mS": ("S", "mean"), "b": ("S", "sd")}
    for key, place in (places | {"r": ("R, S", "product-moment")}).items():
        expected = beta(values | {key: values[key] + 1e-30j}).imag / 1e-30
        # FORM itself is converged to about 1e-8 of the direction.
        assert slope(table, *place)[0] == pytest.approx(expected, rel=2e-8), key


# Differences ------------------------------

# FORM finds the direction of the design point to about 1e-7, which counts fully in derivatives.
N = 2
QUANTITIES = {"z": np.array([1.0, 1.4]), "c": 0.4}
NAMES = ("A", "B", "C", "D")
GIVEN = {
    "A": ("lognormal", {"mean": [12.0, 13.0], "sd": [2.4, 3.0]}),
    "B": ("gumbel", {"mean": 3.0, "sd": [0.9, 0.7]}),
    "C": ("weibull", {"mean": 1.2, "sd": 0.3}),
    "D": ("gamma", {"mean": [1.0, 1.2], "sd": 0.4}),
}
PAIRS = (
    CorrelatedPair("A", "C", 0.4),
    CorrelatedPair("B", "A", -0.3),
    CorrelatedPair("B", "D", 0.5, "rank"),
    CorrelatedPair("C", "D", 0.0),
)


def state_of(quantities=QUANTITIES):
    return ExpressionLimitState(parse("z*A*C**c - B - D**1.5"), NAMES, quantities)


def laws_of(**changed):
    given = {
        name: distribution(family, **{k: np.array(v) for k, v in own.items()})
        for name, (family, own) in GIVEN.items()
    }
    return tuple((given | changed).values())


def beta_of(quantities=QUANTITIES, pairs=PAIRS, **changed):
    laws = laws_of(**changed)
    found = design_points(Problem(state_of(quantities), laws, N, nataf_correlation(pairs, NAMES, laws, N)))
    assert found.converged.all()
    return found.beta


@pytest.fixture(scope="module")
def table():
    """The derivatives of the usual problem."""
    return solved(state_of(), laws_of(), PAIRS, N)[2]


@pytest.mark.parametrize("name", NAMES)
def test_moments_and_own_parameters(table, name):
    family, given = GIVEN[name]
    for argument, value in given.items():
        start = np.broadcast_to(np.array(value), (N,))

        def moved(v, argument=argument):
            return beta_of(**{name: distribution(family, **{**given, argument: v})})

        expected = difference(moved, start, 2e-3 * start)
        np.testing.assert_allclose(slope(table, name, argument), expected, rtol=1e-6, atol=1e-8)
    own = dict(distribution(family, **{k: np.array(v) for k, v in given.items()}).parameters)
    for argument, value in own.items():
        start = np.broadcast_to(value, (N,))

        def moved(v, argument=argument):
            return beta_of(**{name: distribution(family, **{**own, argument: v})})

        expected = difference(moved, start, 2e-3 * start)
        found = slope(table, name, argument, "parameter")
        np.testing.assert_allclose(found, expected, rtol=1e-6, atol=1e-8)
        np.testing.assert_allclose(table.values[table.row(name, argument, "parameter")], start)


def test_stated_coefficients(table):
    for k, pair in enumerate(PAIRS):

        def moved(r, k=k, pair=pair):
            changed = CorrelatedPair(pair.first, pair.second, float(r), pair.kind)
            return beta_of(pairs=(*PAIRS[:k], changed, *PAIRS[k + 1 :]))

        found = slope(table, pair.label, pair.kind)
        np.testing.assert_allclose(found, difference(moved, pair.coefficient, 2e-3), rtol=1e-6)
    # One that is stated as 0 has a derivative and no elasticity.
    assert np.isnan(table.elasticities[table.row("C, D", "product-moment")]).all()


def test_quantities(table):
    for name, value in QUANTITIES.items():
        expected = difference(lambda v, name=name: beta_of({**QUANTITIES, name: v}), value, 1e-3)
        np.testing.assert_allclose(slope(table, name, "value"), expected, rtol=1e-6)


@pytest.mark.parametrize(
    ("base", "own"),
    [
        ("normal", {"mean": 1.0, "sd": 0.3}),
        ("gamma", {"mean": 1.0, "sd": 0.4}),
        ("gumbel", {"mean": 1.0, "sd": 0.3}),
    ],
)
def test_moments_and_ratio_of_an_extreme(base, own):
    """Moments and parameters are those of the base; the ratio of periods moves margin and correlation."""

    def beta(**changed):
        given = own | {"ratio": 20.0} | changed
        ratio = given.pop("ratio")
        return beta_of(B=maximum_of(distribution(base, **given), ratio))

    laws = laws_of(B=maximum_of(distribution(base, **own), 20.0))
    found = solved(state_of(), laws, PAIRS, N)[2]
    for name, value in (own | {"ratio": 20.0}).items():
        expected = difference(lambda v, name=name: beta(**{name: v}), value, 2e-3 * value)
        np.testing.assert_allclose(slope(found, "B", name), expected, rtol=1e-6)
    assert found.values[found.row("B", "ratio")].tolist() == [20.0, 20.0]


def test_kept_parameters_are_held():
    """Threshold, bounds and shape beside the moments."""
    for family, kept in (("lognormal3", {"threshold": 1.0}), ("beta", {"lower": 0.0, "upper": 9.0})):
        given = {"mean": 3.0, "sd": 0.9} | kept
        found = solved(state_of(), laws_of(B=distribution(family, **given)), PAIRS, N)[2]
        for name in ("mean", "sd"):

            def moved(v, name=name, family=family, given=given):
                return beta_of(B=distribution(family, **{**given, name: v}))

            expected = difference(moved, given[name], 2e-3)
            np.testing.assert_allclose(slope(found, "B", name), expected, rtol=1e-6)


def test_the_mean_alone_where_it_is_enough():
    found = solved(state_of(), laws_of(D=distribution("exponential", mean=0.5)), PAIRS, N)[2]
    expected = difference(lambda v: beta_of(D=distribution("exponential", mean=v)), 0.5, 1e-3)
    np.testing.assert_allclose(slope(found, "D", "mean"), expected, rtol=1e-6)
    with pytest.raises(InputError, match="by 'sd' of 'D'"):
        found.row("D", "sd")


def test_independent_variables_agree_with_the_slopes_by_own_parameters():
    problem, found, table = solved(state_of(), laws_of(), (), N)
    for name, by in parameter_slopes(found, problem).items():
        for parameter, expected in by.items():
            np.testing.assert_allclose(slope(table, name, parameter, "parameter"), expected, rtol=1e-14)


def test_without_pairs_the_correlation_in_standard_normal_space_is_held():
    laws = laws_of()
    problem, found, _ = solved(state_of(), laws, PAIRS, N)
    table = elasticities(problem, found)
    assert "correlation" not in table.kinds
    for name, by in parameter_slopes(found, problem).items():
        for parameter, expected in by.items():
            np.testing.assert_allclose(slope(table, name, parameter, "parameter"), expected, rtol=1e-14)


# Limit states ------------------------------


def test_python_functions_by_differences(table):
    def g(A, B, C, D, z, c):
        return z * A * C**c - B - D**1.5

    state = CallableLimitState(g, NAMES, QUANTITIES)
    found = solved(state, laws_of(), PAIRS, N)[2]
    assert found.names == table.names
    np.testing.assert_allclose(found.slopes, table.slopes, rtol=1e-6)


def test_some_situations_of_a_problem():
    """The fixed part of the limit state is evaluated by then."""
    problem, found, table = solved(state_of(), laws_of(), PAIRS, N)
    at = np.array([1])
    part = elasticities(problem.take(at, 1), found.take(at), PAIRS)
    assert part.names == table.names
    np.testing.assert_array_equal(part.slopes, table.slopes[:, at])
    np.testing.assert_array_equal(part.values, table.values[:, at])


def test_limit_states_without_named_quantities():
    class Other:
        pass

    assert quantity_slopes(Other(), [np.ones(1)]) == {}
    assert quantity_slopes(ExpressionLimitState(parse("A - 1"), ("A",), {"unused": 1.0}), [np.ones(1)]) == {}


def test_quantity_of_zero_by_differences():
    state = CallableLimitState(lambda A, q: A - 2.0 * q, ("A",), {"q": 0.0})
    value, by = quantity_slopes(state, [np.ones(2)])["q"]
    assert value == 0.0
    np.testing.assert_allclose(by, -2.0, rtol=1e-9)


# What has no rows, and no values ------------------------------


class Shifted(Conditional):
    """Normal around its parent."""

    parents, shape = (0,), ()

    def take(self, columns):
        return self

    def given(self, parents):
        return distribution("normal", mean=parents[0], sd=1.0)

    def x_slopes(self, z, parents):
        return *self.given(parents).x_slope(z), (np.ones_like(z),)


def test_mixtures_and_conditional_variables():
    both = mixture(distribution("normal", mean=np.array([9.0, 10.0]), sd=1.0), [0.5, 0.5])
    laws = (distribution("normal", mean=1.0, sd=0.5), Shifted(), both)
    state = ExpressionLimitState(parse("C - B - A"), ("A", "B", "C"))
    pairs = [CorrelatedPair("A", "B", 0.0), CorrelatedPair("A", "C", 0.2), CorrelatedPair("A", "X", 0.2)]
    _, _, table = solved(state, laws, pairs)
    assert table.names == ("A",) * 4 + ("A, C",)
    by_mean = difference(
        lambda m: solved(state, (distribution("normal", mean=m, sd=0.5), *laws[1:]), pairs)[1].beta, 1.0, 1e-2
    )
    np.testing.assert_allclose(slope(table, "A", "mean"), by_mean, rtol=1e-6)


def test_infinite_variance_has_no_moments():
    laws = distribution("normal", mean=30.0, sd=1.0), distribution("frechet", scale=1.0, shape=1.5)
    _, _, table = solved(ExpressionLimitState(parse("A - B"), ("A", "B")), laws)
    assert np.isfinite(slope(table, "B", "shape", "parameter")).all()
    assert np.isnan(slope(table, "B", "sd")).all()


def test_no_design_point_and_no_elasticity():
    state = ExpressionLimitState(parse("z + R**2"), ("R",), {"z": np.array([-0.5, 1.0])})
    _, found, table = solved(state, (distribution("normal", mean=0.0, sd=1.0),), (), 2)
    assert found.converged.tolist() == [True, False]
    assert np.isfinite(table.slopes[:, 0]).all()
    assert np.isnan(table.slopes[:, 1]).all()
    assert np.isnan(table.elasticities[table.row("R", "mean")]).all()
    laws = distribution("normal", mean=2.0, sd=1.0), distribution("normal", mean=2.0, sd=1.0)
    _, zero, table = solved(ExpressionLimitState(parse("R - S"), ("R", "S")), laws)
    assert zero.beta[0] == 0.0
    assert slope(table, "R", "mean")[0] == pytest.approx(1.0 / np.sqrt(2.0))
    assert np.isnan(table.elasticities).all()


# Batches ------------------------------


def test_a_situation_is_the_same_alone_and_in_any_batch():
    rng = np.random.default_rng(8)
    n = 9
    z, cov = rng.uniform(0.8, 2.0, n), rng.choice([0.15, 0.2, 0.3], n)
    cases = {
        "A": lambda at: distribution("lognormal", mean=12.0, cov=cov[at]),
        "B": lambda at: maximum_of(distribution("gamma", mean=z[at], cov=cov[at]), 3.0),
        "C": lambda at: distribution("weibull", mean=1.2, cov=0.2),
        "D": lambda at: distribution("truncated_normal", location=z[at], scale=0.3, lower=0.5, upper=np.inf),
    }

    def at_once(at):
        laws = tuple(make(at) for make in cases.values())
        return solved(state_of({"z": z[at], "c": 0.4}), laws, PAIRS, at.size)[2]

    whole = at_once(np.arange(n))
    assert np.isfinite(whole.slopes[whole.row("D", "location")]).all()
    for i in range(n):
        one = at_once(np.array([i]))
        for name in ("values", "slopes", "elasticities"):
            np.testing.assert_array_equal(getattr(whole, name)[:, [i]], getattr(one, name))


def test_no_situations():
    laws = distribution("lognormal", mean=np.empty(0), cov=0.2), distribution("gumbel", mean=1.0, cov=0.3)
    state = ExpressionLimitState(parse("A - B"), ("A", "B"))
    table = solved(state, laws, [CorrelatedPair("A", "B", 0.3)], 0)[2]
    assert table.slopes.shape == (len(table.names), 0)
