"""Values, gradients and Hessians against sympy, complex steps and closed forms."""

import math

import numpy as np
import pytest
import sympy
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from calibrate.expressions import parse
from calibrate.expressions.interpreter import interpret

NAMES = ("x", "y", "z_1")
POINTS = [
    {"x": 0.731, "y": 1.613, "z_1": 2.207},
    {"x": 1.9021, "y": 0.4177, "z_1": 0.8643},
]


def exact(twin, point):
    """Evaluate a sympy expression to 30 digits; None where it is not a moderate real number."""
    number = twin.subs({sympy.Symbol(k, real=True): sympy.Float(v, 40) for k, v in point.items()}).evalf(30)
    if not number.is_number or not number.is_real or not number.is_finite or abs(number) > 1e8:
        return None
    return float(number)


def on_an_edge(tree, point):
    """Whether a root, logarithm, power or quotient sits at 0, where sympy cancels and IEEE does not."""
    risky = {"sqrt": 0, "log": 0, "log10": 0, "**": 0, "/": 1}
    at = [float(interpret(tree[: i + 1], point)) for i in range(len(tree))]
    return any(n.op in risky and at[n.children[risky[n.op]]] == 0.0 for n in tree)


@settings(max_examples=200, suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much])
@given(data=st.data())
def test_sympy_agrees(data, trees):
    text, build = data.draw(trees)
    expression = parse(text)
    point = data.draw(st.sampled_from(POINTS))
    assume(math.isfinite(float(expression.interpret(point))))
    assume(not on_an_edge(expression.tree, point))
    twin = sympy.sympify(build())
    symbols = [sympy.Symbol(n, real=True) for n in NAMES]
    value, slopes, matrix = expression.hessian(point, NAMES)
    pairs = [(value, twin)]
    pairs += [(slopes[i], twin.diff(symbols[i])) for i in range(3)]
    pairs += [(matrix[i][j], twin.diff(symbols[i], symbols[j])) for i in range(3) for j in range(3)]
    for ours, theirs in pairs:
        truth = exact(theirs, point)
        if truth is not None:
            # small trees of moderate numbers: cancellation costs at most a few digits
            assert float(ours) == pytest.approx(truth, rel=1e-9, abs=1e-9), (text, theirs)


def complex_value(tree, values):
    """Evaluate the smooth part of the language with complex numbers."""
    functions = {
        "+": np.add,
        "-": np.subtract,
        "*": np.multiply,
        "/": np.divide,
        "**": np.power,
        "neg": np.negative,
        "pos": np.positive,
        "asin": np.arcsin,
        "acos": np.arccos,
        "atan": np.arctan,
    }
    at = []
    for node in tree:
        if node.op == "name":
            at.append(values[node.name])
        elif not node.children:
            at.append(complex(node.constant))
        else:
            function = functions.get(node.op) or getattr(np, node.op)
            at.append(function(*(at[c] for c in node.children)))
    return at[-1]


SMOOTH = [
    "x*y/z_1 - x**2*y**0.7",
    "sqrt(x**2 + y**2)*log(z_1)",
    "exp(-x*y)*sin(z_1)*cos(x) + tan(y/3)",
    "asin(x/4)*acos(y/5)*atan(z_1)",
    "tanh(x*y - z_1) * log10(x + 3)",
    "x**y**0.5 - (y + 1)**-2.5",
    "(x/(y + z_1))**1.3 / (x - 7)**3",
    "2**x * x**-x",
    "1/(1 + exp(-(x*y - z_1)))",
    "x**8 - x**9/y**13 + z_1**17.5",
]


@pytest.mark.parametrize("text", SMOOTH)
def test_complex_step_agrees(text):
    expression = parse(text)
    rng = np.random.default_rng(5)
    values = {name: rng.uniform(0.3, 2.5, 7) for name in NAMES}
    _, slopes = expression.gradient(values, NAMES)
    for name, slope in zip(NAMES, slopes, strict=True):
        step = {k: v + (1e-30j if k == name else 0.0) for k, v in values.items()}
        truth = np.imag(complex_value(expression.tree, step)) / 1e-30
        np.testing.assert_allclose(slope, truth, rtol=1e-11, atol=1e-13)


@pytest.mark.parametrize("text", SMOOTH)
def test_hessian_is_the_derivative_of_the_gradient(text):
    expression = parse(text)
    rng = np.random.default_rng(6)
    point = {name: rng.uniform(0.5, 2.0, 4) for name in NAMES}
    _, _, matrix = expression.hessian(point, NAMES)
    for j, name in enumerate(NAMES):
        h = 1e-5
        up = expression.gradient({**point, name: point[name] + h}, NAMES)[1]
        down = expression.gradient({**point, name: point[name] - h}, NAMES)[1]
        for i in range(3):
            # central differences: error h²·f⁗ plus rounding eps/h
            np.testing.assert_allclose(matrix[i][j], (up[i] - down[i]) / (2 * h), rtol=2e-6, atol=2e-6)


def slope(text, **values):
    return [float(s) for s in parse(text).gradient(values, tuple(sorted(values)))[1]]


def test_ties_are_decided_as_documented():
    assert slope("abs(x)", x=0.0) == [1.0]
    assert slope("abs(x)", x=-0.0) == [-1.0]
    assert slope("min(x, 2*y)", x=2.0, y=1.0) == [1.0, 0.0]
    assert slope("max(x, 2*y)", x=2.0, y=1.0) == [1.0, 0.0]
    assert slope("max(2*y, x)", x=2.0, y=1.0) == [0.0, 2.0]
    assert slope("min(x, y, z)", x=1.0, y=1.0, z=1.0) == [1.0, 0.0, 0.0]
    assert slope("max(3, x, 3*y, z)", x=2.0, y=1.0, z=3.0) == [0.0, 0.0, 0.0]
    assert slope("where(x >= 1, 3*x, 5*x)", x=1.0) == [3.0]
    assert slope("where(x <= 1, 3*x, 5*x)", x=1.0) == [3.0]


def test_inactive_branches_do_no_harm():
    # the derivative of the root is infinite or NaN where the branch is not taken
    assert slope("where(x >= 0, sqrt(x), 2*x)", x=-4.0) == [2.0]
    assert slope("where(x <= 0, 0, sqrt(x)) + max(sqrt(x), 1)", x=0.0) == [0.0]
    assert slope("5*where(x >= 0, log(x), x**3)", x=-2.0) == [60.0]
    value, _, matrix = parse("where(x >= 0, x**2.5, x**3)").hessian({"x": np.array([-1.0, 4.0])}, ("x",))
    np.testing.assert_allclose(value, [-1.0, 32.0])
    np.testing.assert_allclose(matrix[0][0], [-6.0, 2.5 * 1.5 * 2.0])


def test_edges_of_domains_follow_ieee_without_warnings():
    assert slope("sqrt(x)", x=0.0) == [math.inf]
    assert slope("x**0.5", x=0.0) == [math.inf]
    assert slope("x**2", x=0.0) == [0.0]
    assert slope("x**1.3", x=0.0) == [0.0]
    assert slope("x**0.7", x=0.0) == [math.inf]
    assert slope("1/x", x=0.0) == [-math.inf]
    assert math.isnan(slope("log(x) + sqrt(x)", x=-1.0)[1 - 1])
    assert slope("asin(x)", x=1.0) == [math.inf]
    assert slope("x**y", x=0.0, y=2.0) == [0.0, 0.0]
    assert slope("tanh(x)", x=1000.0) == [0.0]
    assert slope("exp(x)", x=1e4) == [math.inf]
    with np.errstate(all="raise"):
        assert (
            float(parse("1/x - 1/x").value({"x": 0.0})) != 0.0
        )  # NaN, and the caller's settings do not matter


def test_derivatives_keep_their_digits():
    # 1 - tanh² would be 0 here; sech² by mpmath: mp.sech(20)**2 (self-made: mpmath, 30 digits)
    assert slope("tanh(x)", x=20.0)[0] == pytest.approx(1.6993417021166357e-17, rel=1e-14, abs=0)
    # d asin at 1 - 1e-12: 1/sqrt((1-x)(1+x)) in exact arithmetic of the float x
    x = 1.0 - 1e-12
    gap = sympy.Integer(1) - sympy.Float(x, 40)
    truth = float(1 / sympy.sqrt(gap * (2 - gap)))
    assert slope("asin(x)", x=x)[0] == pytest.approx(truth, rel=1e-14, abs=0)


def test_gradient_by_names_that_do_not_occur_is_zero():
    value, slopes = parse("2*x").gradient({"x": np.arange(3.0)}, ("q", "x"))
    np.testing.assert_array_equal(value, [0.0, 2.0, 4.0])
    np.testing.assert_array_equal(slopes, [[0.0] * 3, [2.0] * 3])


def test_shapes_broadcast_and_results_are_fresh():
    x, y = np.arange(1.0, 4.0), np.arange(1.0, 3.0)[:, None]
    value, slopes, matrix = parse("x*y + 1").hessian({"x": x, "y": y}, ("x", "y"))
    assert value.shape == slopes[0].shape == slopes[1].shape == matrix[0][1].shape == (2, 3)
    np.testing.assert_array_equal(slopes[0], np.broadcast_to(y, (2, 3)))
    plain = parse("x")
    same = plain.value({"x": x})
    same[0] = 99.0
    assert x[0] == 1.0
    assert parse("x").value({"x": 2}).shape == ()
    assert parse("3").value({}).shape == ()
