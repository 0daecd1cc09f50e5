"""Compiled programs against the interpreter, Python's own arithmetic, and themselves in other shapes."""

import pickle
import re

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.expressions import ExpressionError, codegen, constant_expression, parse, parse_comparison
from calibrate.expressions.derive import derivatives
from calibrate.expressions.graph import Graph, from_tree
from calibrate.expressions.lower import lower

NAMES = ("x", "y", "z_1")
EVERYTHING = (
    "min(x, y, 1)**2 + max(x*y, z_1, y)*abs(x - y)**1.7 + where(x >= y, sqrt(x), log(y) + x**3) "
    "+ exp(-z_1)*sin(x)*cos(y)/tan(z_1) + asin(x/9)*acos(y/9)*atan(x*y) + tanh(x - 1)*log10(y + z_1) "
    "+ x**y - x**-2.5 + 2**z_1 + (x*y)**11 + x**0.3"
)


def values(n, seed=1):
    rng = np.random.default_rng(seed)
    return {name: rng.uniform(-0.5, 2.5, n) for name in NAMES}


@settings(max_examples=150)
@given(data=st.data())
def test_compiled_equals_interpreted(data, trees):
    text, _ = data.draw(trees)
    expression = parse(text)
    at = values(11)
    compiled, reference = expression.value(at), np.broadcast_to(expression.interpret(at), (11,))
    if not expression.names:
        reference = reference[0]
    if "**" in text:
        # powers become products and roots: rounding as if the inputs moved by a few units in the last place
        moved = expression.interpret({k: v * (1 + 4e-14) for k, v in at.items()})
        allowed = 1e-12 * np.abs(reference) + np.abs(moved - reference) + 1e-14
        finite = np.isfinite(reference)
        np.testing.assert_array_equal(np.isfinite(compiled), finite)
        assert np.all(np.abs(compiled - reference)[finite] <= allowed[finite])
    else:
        np.testing.assert_array_equal(compiled, reference)


@settings(max_examples=200)
@given(data=st.data())
def test_precedence_is_that_of_python(data, flat_texts):
    text = data.draw(flat_texts)
    space = {"abs": np.abs, "tanh": np.tanh, "exp": np.exp, "sin": np.sin, "max": max, "__builtins__": {}}
    point = {"x": np.float64(0.7), "y": np.float64(1.3), "z_1": np.float64(2.1)}
    with np.errstate(all="ignore"):
        # Python itself is the witness: generated text, no user input
        truth = eval(text, space, dict(point))
    if not np.isfinite(truth) or abs(truth) > 1e12:
        return
    assert float(parse(text).interpret(point)) == pytest.approx(float(truth), rel=1e-14, abs=1e-14)
    assert float(parse(text).value(point)) == pytest.approx(float(truth), rel=1e-11, abs=1e-11)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("-2**2", -4.0),
        ("2**-1", 0.5),
        ("2**3**2", 512.0),
        ("1 - 2 - 3", -4.0),
        ("8/4/2", 1.0),
        ("8/4*2", 4.0),
        ("-3 + 5", 2.0),
        ("- -3", 3.0),
        ("+3", 3.0),
        ("2*-3", -6.0),
        (".5 + 5. + 1e1 + 1E-1", 15.6),
        ("1\n+\r\n2\t* 3", 7.0),
        ("log(exp(2)) + log10(1000)", 5.0),
        ("min(3, 1, 2) + max(1, 5, 2)", 6.0),
        ("where(1 >= 1, 4, 5) + where((2 <= 1), 4, 5)", 9.0),
        ("sin(pi/2) + cos(0) + tan(0) + asin(1)/pi + acos(1) + atan(0) + tanh(0)", 2.5),
        ("007", 7.0),
    ],
)
def test_constants(text, value):
    expression = parse(text)
    assert expression.constant == pytest.approx(value, rel=1e-15)
    assert expression.names == ()
    assert float(expression.value({})) == expression.constant


@pytest.mark.parametrize("order", [1, 2])
def test_batch_and_singles_agree_bit_for_bit(order):
    # long arrays take another path (buffers are reused) than short ones and scalars
    expression = parse(EVERYTHING)
    n = 2500
    at = values(n)
    program = expression.program(NAMES, order)

    def flat(result):
        entries = [result[0], *result[1], *(e for row in result[2:] for r in row for e in r)]
        return np.array([np.broadcast_to(e, np.shape(result[0])) for e in entries])

    batch = flat(program(at))
    for cut in (slice(0, 700), slice(700, 2100), slice(2100, n)):
        np.testing.assert_array_equal(flat(program({k: v[cut] for k, v in at.items()})), batch[:, cut])
    for i in (0, 1, 777, n - 1):
        np.testing.assert_array_equal(
            flat(program({k: v[i : i + 1] for k, v in at.items()}))[:, 0], batch[:, i]
        )
        np.testing.assert_array_equal(flat(program({k: float(v[i]) for k, v in at.items()})), batch[:, i])


def test_programs_do_not_write_into_their_inputs_or_shared_results():
    expression = parse("(x*y + x)*(x*y) - min(x, y) + sqrt(x) - 2*x")
    at = {"x": np.linspace(1, 2, 5000), "y": np.linspace(2, 3, 5000)}
    kept = {k: v.copy() for k, v in at.items()}
    program = expression.program(("x", "y"), 2)
    first = program(at)
    copies = [np.array(e) for e in (first[0], *first[1])]
    program({k: v + 1 for k, v in at.items()})
    for name, value in at.items():
        np.testing.assert_array_equal(value, kept[name])
    for entry, copy in zip((first[0], *first[1]), copies, strict=True):
        np.testing.assert_array_equal(entry, copy)
    fresh = expression.hessian({k: v[:10] for k, v in kept.items()}, ("x", "y"))
    np.testing.assert_array_equal(first[0][:10], fresh[0])
    np.testing.assert_array_equal(first[2][0][1][:10], fresh[2][0][1])


def test_scalars_and_arrays_mix_and_broadcast():
    program = parse("x*y + z_1").program(("x", "y", "z_1"), 1)
    long = np.linspace(0.0, 1.0, 3000)
    value, slopes = program({"x": long, "y": 2, "z_1": np.float64(3)})
    np.testing.assert_array_equal(value, long * 2 + 3)
    assert np.shape(slopes[0]) == ()
    assert slopes[2] == 1.0
    value, _ = program({"x": long, "y": long[:4, None], "z_1": np.ones((1, 1))})
    assert value.shape == (4, 3000)
    np.testing.assert_array_equal(value[2], long * long[2] + 1)
    assert program({"x": long.astype(np.float32), "y": 1, "z_1": 0})[0].dtype == np.float64
    assert program({"x": [1, 2, 3], "y": True, "z_1": 0})[0].tolist() == [1.0, 2.0, 3.0]


@pytest.mark.parametrize(
    "text",
    [
        "theta*A*f - (G + e)",
        "theta*f*A*t*h**2/6 - theta*(G*e + A*f/t*h*e/6)",
        "theta*(f*t)**1.3*A**0.7 - e*(G*e/h + f*G/t*A)",
        "min(theta*A, f*t/2)/(h*(G + e)) - where(G >= e, G*A, f)**2",
        "-(A*G)/(h*f) + (A*theta)**-3 + sqrt(t*G)/h - 0*f",
        "A*h + e",
        "G*f + theta",
        "abs(-G)*h/A/f/e",
        "A/theta/f/G*h - e/(theta/(f/G))",
    ],
)
@pytest.mark.parametrize("n", [3, 2000])
def test_two_stages_equal_one(text, n):
    expression = parse(text)
    rng = np.random.default_rng(3)
    at = {name: rng.uniform(0.5, 2.0, n) for name in ("theta", "A", "f", "G", "e", "t", "h")}
    at["e"] = 1.75
    moving = ("theta", "f", "G")
    plain = expression.hessian(at, moving)
    for order in (1, 2):
        staged = expression.staged(moving, order)
        fixed = staged.fixed(at)
        result = staged(np.array([at[name] for name in moving]), fixed)
        np.testing.assert_allclose(
            np.broadcast_to(result[0], (n,)), plain[0] + np.zeros(n), rtol=1e-12, atol=1e-13
        )
        for ours, theirs in zip(result[1], plain[1], strict=True):
            np.testing.assert_allclose(ours + np.zeros(n), theirs + np.zeros(n), rtol=1e-12, atol=1e-13)
    for i in range(3):
        for j in range(3):
            np.testing.assert_allclose(
                result[2][i][j] + np.zeros(n), plain[2][i][j] + np.zeros(n), rtol=1e-12, atol=1e-13
            )
    # some situations only: index what is fixed as one would the inputs
    few = np.array([0, 2])
    part = staged([at[name][few] for name in moving], [f[few] if np.ndim(f) else f for f in fixed])
    np.testing.assert_array_equal(part[0], np.broadcast_to(result[0], (n,))[few])
    again = pickle.loads(pickle.dumps(staged))
    np.testing.assert_array_equal(again([at[k] for k in moving], again.fixed(at))[0], result[0])


def test_pickles():
    expression = parse(EVERYTHING)
    at = values(5)
    assert pickle.loads(pickle.dumps(expression)) == expression
    assert hash(pickle.loads(pickle.dumps(expression))) == hash(expression)
    program = expression.program(NAMES, 2)
    again = pickle.loads(pickle.dumps(program))
    np.testing.assert_array_equal(again(at)[0], program(at)[0])
    np.testing.assert_array_equal(again(at)[2][0][1], program(at)[2][0][1])
    comparison = parse_comparison("x >= y*2")
    assert pickle.loads(pickle.dumps(comparison)) == comparison
    with pytest.raises(ExpressionError) as caught:
        parse("x +")
    copy = pickle.loads(pickle.dumps(caught.value))
    assert (str(copy), copy.column, copy.problems) == (str(caught.value), 4, caught.value.problems)


def test_programs_are_compiled_once():
    expression = parse("x*y")
    assert expression.program(("x",), 1) is expression.program(("x",), 1)
    assert expression.program(("x",), 1) is not expression.program(("y",), 1)


def test_no_user_text_reaches_the_compiler(monkeypatch):
    seen = []

    def spy(source, *rest):
        seen.append(source)
        return compile(source, *rest)

    monkeypatch.setattr(codegen, "compile", spy, raising=False)
    expression = parse("secret_name**2 + sqrt(other_name) * where(secret_name >= 3, 1.5, -other_name)")
    for shape in ((), (3000,)):
        at = {"secret_name": np.full(shape, 2.0), "other_name": np.full(shape, 3.0)}
        expression.program(("secret_name",), 2)(at)
    assert len(seen) == 2
    for source in seen:
        assert "secret" not in source
        assert "other" not in source
        words = set(re.findall(r"[A-Za-z_]\w*", source))
        allowed = {
            "def",
            "program",
            "return",
            "out",
            "add",
            "subtract",
            "multiply",
            "divide",
            "select",
            "reaches",
        }
        allowed |= {"sqrt", "neg"}
        assert {w for w in words if not re.fullmatch(r"[av]\d+", w)} <= allowed


def test_common_parts_are_computed_once():
    graph = Graph()
    tree = parse("(x*y + 1)**3 * exp(x*y) + sin(x*y) - sin(y*x)").tree
    root = from_tree(graph, tree)
    graph, roots = lower(graph, derivatives(graph, root, ("x", "y"), 1))
    ops = [graph.ops[i] for i in graph.below(roots)]
    assert ops.count("exp") == 1
    assert ops.count("sin") == 1
    products = [graph.children[i] for i in graph.below(roots) if graph.ops[i] == "*"]
    assert len(products) == len(set(products))


def test_a_missing_value_is_named():
    with pytest.raises(InputError, match="'theta_R'"):
        parse("theta_R*x").value({"theta_r": 1.0, "x": 1.0})
    with pytest.raises(InputError, match="'theta_R'"):
        parse("theta_R**0").value({})


@pytest.mark.parametrize(
    ("text", "name", "linear"),
    [
        ("a*z + b", "z", True),
        ("(a*z + b)/c - sqrt(b)*z", "z", True),
        ("a*z**2/z", "z", False),
        ("a/z", "z", False),
        ("z*z - z*z + z", "z", True),
        ("exp(z)/exp(z)", "z", False),
        ("max(z, a)", "z", False),
        ("abs(z)", "z", False),
        ("max(a, b)*z", "z", True),
        ("where(a >= b, z, 2*z)", "z", True),
        ("where(z >= b, a, 2*a)", "z", False),
        ("where(z >= b, z, z + 1)", "z", False),
        ("a*b", "z", True),
        ("A_d*f/g - (G + Q)", "A_d", True),
    ],
)
def test_linearity(text, name, linear):
    assert parse(text).is_linear_in(name) is linear


@pytest.mark.parametrize(
    ("text", "kinks"),
    [
        ("x + y**2", 0),
        ("abs(x)", 1),
        ("min(x, y)", 1),
        ("max(x, y, z, 1)", 3),
        ("where(x >= 1, abs(x), 2)", 2),
        ("abs(x) + abs(x)", 1),
        ("abs(-3)*x", 0),
        ("min(1, 2)*x", 0),
    ],
)
def test_kinks(text, kinks):
    assert parse(text).kinks == kinks


def test_names_and_equality():
    expression = parse("b*a + pi*a - c_1")
    assert expression.names == ("a", "b", "c_1")
    assert expression.depends_on("a")
    assert not expression.depends_on("pi")
    assert expression == parse("b*a + pi*a - c_1")
    assert expression != parse("a*b + pi*a - c_1")
    assert expression != "b*a + pi*a - c_1"
    with pytest.raises(AttributeError):
        expression.text = "x"


@pytest.mark.parametrize("value", [0.0, -1.5, 1e-300, 1.7976931348623157e308, 0.1, -2e-5, 12345678.9, 3])
def test_constant_expressions(value):
    assert constant_expression(value).constant == value


@pytest.mark.parametrize("value", [float("nan"), float("inf"), -float("inf")])
def test_constant_expressions_are_finite(value):
    with pytest.raises(ValueError, match="not finite"):
        constant_expression(value)


@pytest.mark.parametrize(
    ("text", "margin"),
    [
        ("x >= y", -1.0),
        ("x <= y", 1.0),
        ("x - y >= 0", -1.0),
        ("0 <= x", 2.0),
        ("(x >= -y)", 5.0),
        ("3 >= x", 1.0),
    ],
)
def test_margins(text, margin):
    comparison = parse_comparison(text)
    assert float(comparison.margin.value({"x": 2.0, "y": 3.0})) == margin


def test_margin_of_the_largest_comparison():
    side = "+".join(["x"] * 123)
    text = f"{'(' * 30}{side}{')' * 30} >= {'(' * 40}{side}{')' * 40}"
    comparison = parse_comparison(text)
    assert float(comparison.margin.value({"x": 1.0})) == 0.0
    assert comparison.margin.is_linear_in("x")


@pytest.mark.parametrize("joint", ["+", "*", "-", "/"])
def test_the_longest_chains_compile_and_print(joint):
    text = joint.join(["x"] * 250)
    expression = parse(text)
    value, slopes, matrix = expression.hessian({"x": np.array([1.0])}, ("x",))
    truth = {"+": (250, 250, 0), "*": (1, 250, 250 * 249), "-": (-248, -248, 0), "/": (1, -248, 248 * 249)}[
        joint
    ]
    assert (value[0], slopes[0][0], matrix[0][0][0]) == pytest.approx(truth, rel=1e-12)
    assert expression.mathml().count("<mi>x</mi>") == 250
    assert expression.plain().count("x") == 250


def test_the_longest_list_of_arguments():
    names = [f"a{k}" for k in range(380)]
    expression = parse(f"min({','.join(names)})")
    at = {name: float(k) for k, name in enumerate(names)} | {"a200": -1.0}
    value, slopes = expression.gradient(at, tuple(names))
    assert value == -1.0
    assert [i for i, s in enumerate(slopes) if s] == [200]
    assert expression.kinks == 379
