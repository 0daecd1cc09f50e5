"""``calibrate.form``: what it takes, the shapes that it returns, and how it refuses what does not fit together."""

import numpy as np
import pytest

import calibrate
from calibrate.distributions import maximum_of, minimum_of

R = calibrate.distribution("normal", mean=350.0, sd=35.0)
S = calibrate.distribution("normal", mean=200.0, sd=40.0)
SEVERAL_S = calibrate.distribution("normal", mean=200.0, sd=[40.0, 50.0])
ONE, TWO = {"R": R, "S": S}, {"R": R, "S": SEVERAL_S}
BETA = 150.0 / np.hypot(35.0, np.array([40.0, 50.0]))


def margin(R, S):
    return R - S


def everything(**names):
    assert set(names) == {"R", "S"}
    return names["R"] - names["S"]


class Callable:
    def __call__(self, R, S, factor=1.0):
        return R - factor * S


# Ways to give the limit state ------------------------------

WAYS = {
    "expression": ("R - S", None),
    "comparison": ("R >= S", None),
    "comparison the other way": ("S <= R", None),
    "function": (margin, None),
    "function of any names": (everything, None),
    "lambda": (lambda S, R: R - S, None),
    "object with a default": (Callable(), None),
    "list of numbers": (lambda R, S: list(R - S), None),
    "gradient of arrays": (margin, lambda R, S: {"R": np.ones_like(R), "S": -np.ones_like(S)}),
    "gradient of numbers": (margin, lambda R, S: {"S": -1, "R": 1.0}),
    "gradient of any names": (margin, lambda **n: {"R": 1.0, "S": -1.0}),
}


@pytest.mark.parametrize("way", WAYS)
def test_every_way_to_give_a_limit_state(way):
    limit_state, gradient = WAYS[way]
    result = calibrate.form(limit_state, TWO, gradient=gradient)
    np.testing.assert_allclose(result.beta, BETA, rtol=1e-12)
    np.testing.assert_allclose(
        result.sensitivity["S"], -SEVERAL_S.sd / np.hypot(35.0, SEVERAL_S.sd), rtol=1e-9
    )
    np.testing.assert_allclose(result.design_point["R"], result.design_point["S"], rtol=1e-12)
    assert result.status.tolist() == ["converged", "converged"]


def test_a_given_gradient_is_used():
    calls = []

    def gradient(R, S):
        calls.append(R.shape)
        return {"R": 1.0, "S": -1.0}

    calibrate.form(margin, TWO, gradient=gradient)
    assert len(calls) >= 2


def test_functions_may_be_nonlinear_and_use_quantities():
    def g(R, S, z):
        return z * R / S - 1.0

    text = calibrate.form("z * R / S - 1", TWO, quantities={"z": 1.2})
    by_differences = calibrate.form(g, TWO, quantities={"z": 1.2})
    exact = calibrate.form(
        g, TWO, quantities={"z": 1.2}, gradient=lambda R, S, z: {"R": z / S, "S": -z * R / S**2}
    )
    np.testing.assert_allclose(by_differences.beta, text.beta, atol=1e-9)
    np.testing.assert_allclose(exact.beta, text.beta, atol=1e-12)


# Shapes ------------------------------


@pytest.mark.parametrize("limit_state", ["R - S", margin])
def test_numbers_give_arrays_without_dimension(limit_state):
    assert_shape(calibrate.form(limit_state, ONE), ())


SHAPES = {
    "arrays of one element": ({"S": [40.0]}, {}, (1,)),
    "several standard deviations": ({"S": [40.0, 50.0]}, {}, (2,)),
    "rows and columns": ({"R": [[35.0], [30.0], [40.0]], "S": [40.0, 50.0]}, {}, (3, 2)),
    "quantities alone": ({}, {"z": [1.0, 1.1, 1.2]}, (3,)),
    "quantities across": ({"S": [40.0, 50.0]}, {"z": [[1.0], [1.1]]}, (2, 2)),
    "nothing": ({"S": []}, {}, (0,)),
}


@pytest.mark.parametrize("case", SHAPES)
def test_arguments_broadcast(case):
    sds, quantities, shape = SHAPES[case]
    sd = {"R": 35.0, "S": 40.0} | sds
    z = quantities.get("z", 1.0)
    variables = {
        "R": calibrate.distribution("normal", mean=350.0, sd=sd["R"]),
        "S": calibrate.distribution("normal", mean=200.0, sd=sd["S"]),
    }
    result = calibrate.form("z * R - S", variables, quantities={"z": z})
    assert_shape(result, shape)
    z, s_r, s_s = (np.asarray(v, dtype=float) for v in (z, sd["R"], sd["S"]))
    np.testing.assert_allclose(result.beta, (350.0 * z - 200.0) / np.hypot(z * s_r, s_s), rtol=1e-13)


@pytest.mark.parametrize("extreme", [maximum_of, minimum_of])
def test_extremes_broadcast_with_their_ratio(extreme):
    ratio = np.array([[2.0, 5.0]])
    base = calibrate.distribution("normal", mean=200.0, sd=[[40.0], [50.0], [60.0]])
    result = calibrate.form("R - S", {"R": R, "S": extreme(base, ratio)})
    assert_shape(result, (3, 2))
    for i, j in np.ndindex(3, 2):
        one = extreme(calibrate.distribution("normal", mean=200.0, sd=base.sd[i, 0]), ratio[0, j])
        assert calibrate.form("R - S", {"R": R, "S": one}).beta == result.beta[i, j]


def assert_shape(result, shape):
    arrays = [result.beta, result.failure_probability, result.converged, result.status, result.iterations]
    for mapping in (result.design_point, result.sensitivity, result.standard_point):
        assert list(mapping) == ["R", "S"]
        arrays += mapping.values()
    for array in (*arrays, result.gradient_norm):
        assert isinstance(array, np.ndarray)
        assert array.shape == shape
        assert not array.flags.writeable
    assert result.beta.dtype == np.float64
    assert result.converged.dtype == np.bool_
    assert result.iterations.dtype == np.int64


def test_results_cannot_be_changed():
    result = calibrate.form("R - S", ONE)
    with pytest.raises(TypeError):
        result.design_point["R"] = 1.0
    with pytest.raises(AttributeError):
        result.beta = 1.0


def test_names_that_the_limit_state_does_not_use_have_no_share():
    result = calibrate.form("R - 100", ONE, quantities={"unused": 1.0})
    assert result.beta == pytest.approx(250.0 / 35.0, rel=1e-14)
    assert result.sensitivity["S"] == 0.0
    assert result.design_point["S"] == 200.0


# Start, workers, correlation ------------------------------


def test_continuing_from_a_result_takes_fewer_iterations():
    far = {
        "R": calibrate.distribution("lognormal", mean=350.0, cov=0.1),
        "S": calibrate.distribution("gumbel", mean=[150.0, 120.0], cov=0.3),
    }
    first = calibrate.form("R * (1 + 0.001 * R) - S", far)
    again = calibrate.form("R * (1 + 0.001 * R) - S", far, start=first)
    other_order = calibrate.form("R * (1 + 0.001 * R) - S", dict(reversed(far.items())), start=first)
    for result in (again, other_order):
        np.testing.assert_allclose(result.beta, first.beta, atol=1e-11)
        assert (result.iterations < first.iterations).all()


def test_a_start_without_design_point_is_no_hindrance():
    without = calibrate.form("R - S + b", TWO, quantities={"b": 1e5})
    assert not without.converged.any()
    np.testing.assert_allclose(calibrate.form("R - S", TWO, start=without).beta, BETA, rtol=1e-14)


@pytest.mark.parametrize("workers", [1, 3, np.int64(2)])
def test_workers(workers):
    np.testing.assert_array_equal(
        calibrate.form("R - S", TWO, workers=workers).beta, calibrate.form("R - S", TWO).beta
    )


@pytest.mark.parametrize(
    "correlation", [None, {}, {("R", "S"): 0.0}, {("S", "R"): 0}, {("R", "S"): np.float64(0.0)}]
)
def test_correlation_of_zero_is_accepted(correlation):
    np.testing.assert_allclose(calibrate.form("R - S", TWO, correlation=correlation).beta, BETA, rtol=1e-14)


@pytest.mark.parametrize("solver", ["gradient projection", "slsqp", "hasofer-lind-rackwitz-fiessler"])
def test_other_solvers_agree_also_with_correlation(solver):
    pairs = {("R", "S"): -0.3}
    usual = calibrate.form("R - S", TWO, correlation=pairs)
    other = calibrate.form("R - S", TWO, correlation=pairs, solver=solver)
    np.testing.assert_allclose(other.beta, usual.beta, atol=1e-7)
    np.testing.assert_allclose(other.design_point["R"], usual.design_point["R"], rtol=1e-4)


# Published, with dependence ------------------------------


def test_short_column():
    """A. Der Kiureghian, chapter on first- and second-order methods (2005): beta 2.47, from memory.

    Further digits by scipy's SLSQP with numerically exact Nataf coefficients.
    """
    r = calibrate.form(
        "1 - m1 / (0.030 * y) - m2 / (0.015 * y) - (p / (0.190 * y))**2",
        {
            "m1": calibrate.distribution("normal", mean=250.0, cov=0.3),
            "m2": calibrate.distribution("normal", mean=125.0, cov=0.3),
            "p": calibrate.distribution("gumbel", mean=2500.0, cov=0.2),
            "y": calibrate.distribution("weibull", mean=40000.0, cov=0.1),
        },
        correlation={("m1", "m2"): 0.5, ("m1", "p"): 0.3, ("m2", "p"): 0.3},
    )
    assert r.beta == pytest.approx(2.46602, abs=1e-5)
    point = {"m1": 340.726, "m2": 170.363, "p": 3222.41, "y": 31769.2}
    alpha = {"m1": -0.49054, "m2": -0.28321, "p": -0.38117, "y": 0.73067}
    for name, value in point.items():
        assert r.design_point[name] == pytest.approx(value, rel=2e-5)
        assert r.sensitivity[name] == pytest.approx(alpha[name], abs=2e-5)


def test_correlated_strength_and_section():
    """Ang and Tang 1984, vol. II: 3.049 without correlation (from memory); with 0.4 by scipy's SLSQP."""
    variables = {
        "Y": calibrate.distribution("normal", mean=40.0, sd=5.0),
        "Z": calibrate.distribution("normal", mean=50.0, sd=2.5),
        "M": calibrate.distribution("normal", mean=1000.0, sd=200.0),
    }
    assert calibrate.form("Y * Z - M", variables).beta == pytest.approx(3.049, abs=1e-3)
    correlated = calibrate.form("Y * Z - M", variables, correlation={("Y", "Z"): 0.4})
    assert correlated.beta == pytest.approx(2.86287, abs=1e-5)


def test_design_to_a_target():
    """Kuschel and Rackwitz 1997 (from memory): section 8.668 x 25.0 for a target of 2.5; beta recomputed by SLSQP."""
    r = calibrate.form(
        "1 - 4 * M / (b * h**2 * Y) - P**2 / (b**2 * h**2 * Y**2)",
        {
            "P": calibrate.distribution("normal", mean=500.0, sd=100.0),
            "M": calibrate.distribution("normal", mean=2000.0, sd=400.0),
            "Y": calibrate.distribution("lognormal", mean=5.0, sd=0.5),
        },
        correlation={("P", "M"): 0.5},
        quantities={"b": 8.668, "h": 25.0},
    )
    assert r.beta == pytest.approx(2.49965, abs=1e-4)


# Refusals ------------------------------

REFUSED = {
    "correlation out of range": (("R - S",), {"correlation": {("R", "S"): 1.3}}, "number from -1 to 1; got 1.3"),
    "correlation that is not a number": (("R - S",), {"correlation": {("R", "S"): np.nan}}, "-1 to 1; got nan"),
    "correlation as text": (("R - S",), {"correlation": {("R", "S"): "0"}}, "number from -1 to 1; got '0'"),
    "correlation twice": (("R - S",), {"correlation": {("R", "S"): 0.1, ("S", "R"): 0.1}}, "given twice"),
    "full correlation": (("R - S",), {"correlation": {("R", "S"): 1.0}}, "not positive definite"),
    "correlation of an unknown name": (("R - S",), {"correlation": {("R", "SS"): 0.0}}, "'SS'.*Did you mean 'S'"),
    "correlation with itself": (("R - S",), {"correlation": {("R", "R"): 1.0}}, "paired with itself"),
    "correlation by one name": (("R - S",), {"correlation": {"RS": 0.0}}, "pairs of names; got 'RS'"),
    "correlation as matrix": (("R - S",), {"correlation": [[1, 0], [0, 1]]}, "correlation: must be a mapping"),
    "unknown solver": (("R - S",), {"solver": "gradient"}, "gradient projection"),
    "unknown name": (("R - Sx",), {}, "'Sx' is neither a variable nor a quantity. Did you mean 'S'"),
    "syntax": (("R - ",), {}, "ends where a value is expected"),
    "sharp comparison": (("R > S",), {}, "Write '>='"),
    "neither text nor function": ((3,), {}, "must be a text or a callable; got 3"),
    "function with an unknown argument": ((lambda R, Q: R - Q,), {}, "its argument 'Q' is neither"),
    "function without a variable": ((lambda R: R,), {}, "it takes no argument 'S'"),
    "gradient of a text": (("R - S",), {"gradient": margin}, "a text has its own"),
    "gradient that is no function": ((margin,), {"gradient": {"R": 1.0}}, "gradient: must be a callable"),
    "gradient of fewer names": ((margin,), {"gradient": lambda R: {}}, "gradient: it takes no argument 'S'"),
    "no workers": (("R - S",), {"workers": 0}, "whole number of at least 1; got 0"),
    "half a worker": (("R - S",), {"workers": 1.5}, "whole number of at least 1; got 1.5"),
    "start that is no result": (("R - S",), {"start": 3.0}, "start: must be a result of calibrate.form"),
    "start of another shape": (("R - S",), {"start": calibrate.form("R - S", ONE)}, r"start: has shape \(\), .*\(2,\)"),
    "start of other names": (("R - S",), {"start": calibrate.form("A", {"A": SEVERAL_S})}, "variables A, not R, S"),
    "quantity that is a variable": (("R - S",), {"quantities": {"S": 1.0}}, "'S' is given both"),
    "quantity that is not finite": (("R - S",), {"quantities": {"z": [1.0, np.inf]}}, "'z' must be finite"),
    "quantity as text": (("z * R - S",), {"quantities": {"z": "1"}}, "'z' must be a number.*got '1'"),
    "quantities as list": (("R - S",), {"quantities": [1.0]}, "quantities: must be a mapping"),
    "quantity of another shape": (("z * R - S",), {"quantities": {"z": [1.0, 2.0, 3.0]}}, r"S \(2,\), z \(3,\)"),
    "function of a number": ((lambda R, S: 1.0,), {}, r"shape of its arguments, here \(2,\).*float 1.0"),
    "function of another shape": ((lambda R, S: np.ones(5),), {}, r"an array of shape \(5,\)"),
    "function of one more dimension": ((lambda R, S: (R - S)[None],), {}, r"an array of shape \(1, 2\)"),
    "function of nothing": ((lambda R, S: None,), {}, "returned NoneType None"),
    "function that compares": ((lambda R, S: R >= S,), {}, "type bool.*Return the margin"),
    "function of complex numbers": ((lambda R, S: (R - S) + 0j,), {}, "array of numbers.*type complex128"),
    "gradient as list": ((margin,), {"gradient": lambda R, S: [1.0, -1.0]}, "must return a mapping"),
    "gradient without an entry": ((margin,), {"gradient": lambda R, S: {"R": 1.0}}, "has no entry for S"),
    "gradient with an entry too much": ((margin,), {"gradient": lambda R, S: {"R": 1, "S": -1, "T": 0}}, "entry 'T'"),
    "gradient of another shape": ((margin,), {"gradient": lambda R, S: {"R": np.ones(7), "S": -1}}, r"'R'.*\(7,\)"),
}  # fmt: skip


@pytest.mark.parametrize("case", REFUSED)
def test_refusals_name_what_is_wrong(case):
    arguments, options, message = REFUSED[case]
    with pytest.raises(calibrate.InputError, match=message) as caught:
        calibrate.form(*arguments, TWO, **options)
    assert len(caught.value.problems) == 1


@pytest.mark.parametrize(
    ("variables", "message"),
    [
        ({}, "at least one basic variable"),
        ({"R": R, "S": 200.0}, "'S' must be a distribution; got 200.0.*among the quantities"),
        ([R, S], "variables: must be a mapping"),
        ({"R": R, 2: S}, "names must be texts; got 2"),
        (
            {"R": calibrate.distribution("normal", mean=[1.0, 2.0, 3.0], sd=1.0), "S": SEVERAL_S},
            "do not broadcast",
        ),
    ],
)
def test_variables_that_are_none(variables, message):
    with pytest.raises(calibrate.InputError, match=message):
        calibrate.form("R - S", variables)


# What functions do of their own ------------------------------


def test_errors_of_the_function_come_through():
    def g(R, S):
        raise KeyError("table of steel grades")

    with pytest.raises(KeyError, match="table of steel grades"):
        calibrate.form(g, TWO)


def test_a_function_cannot_write_into_its_arguments():
    def g(R, S):
        R -= S
        return R

    with pytest.raises(ValueError, match="read-only"):
        calibrate.form(g, TWO)


def test_not_a_number_is_a_status_of_its_situation():
    def g(R, S, z):
        return np.where(z >= 2.0, np.nan, z * R - S)

    result = calibrate.form(g, ONE, quantities={"z": [1.0, 2.0]})
    assert result.converged.tolist() == [True, False]
    assert result.beta[0] == pytest.approx(BETA[0], rel=1e-10)
    assert result.status[1] == "not converged: the limit state is not finite where it was needed"
