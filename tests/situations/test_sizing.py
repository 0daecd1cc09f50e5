"""The size that just meets a design check: smallest passage, exact slopes, honest refusals."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from calibrate.expressions import parse_comparison
from calibrate.situations import ALREADY_MET, NEVER_MET, NOT_FINITE, SOLVED, sizing_reason, solve_size

N = 200
RNG = np.random.default_rng(71)
LOADS = {
    "gamma": 1.5,
    "phi": 0.8,
    "f": RNG.uniform(2e8, 5e8, N),
    "E": RNG.uniform(1e3, 1e6, N),
    "L": RNG.uniform(0.5, 12.0, N),
    "t": RNG.uniform(1e-3, 2e-2, N),
}

CHECKS = {
    "linear": "phi * z * f >= gamma * E",
    "inverse": "gamma * E / z <= phi * f",
    "quadratic": "phi * f * t * z**2 / 6 >= gamma * E * L",
    "mixed": "phi * f * (t * z**2 / 6 + t**2 * z) >= gamma * E * L * (1 + z / L)",
    "real powers": "phi * f * z**0.7 * t**1.3 >= gamma * E",
    "transcendental": "phi * f * t**2 * tanh(z / t) * (1 + z / t) >= gamma * E",
    "kinked": "phi * f * z >= max(gamma * E, 1.35 * E + f * z * 0.1)",
}


def margin(text):
    return parse_comparison(text).margin


@pytest.mark.parametrize("name", CHECKS)
def test_size_agrees_with_a_bracketing_root_finder(name):
    check = margin(CHECKS[name])
    found = solve_size(check, "z", LOADS, N)
    assert (found.code == SOLVED).all()
    for i in range(0, N, 10):
        one = {k: v[i] if np.ndim(v) else v for k, v in LOADS.items()}
        root = brentq(
            lambda z, one=one: float(check.value({**one, "z": z})),
            found.size[i] * 0.5,
            found.size[i] * 2,
            xtol=1e-300,
            rtol=1e-15,
        )
        assert found.size[i] == pytest.approx(root, rel=1e-12)


@pytest.mark.parametrize("name", CHECKS)
def test_slopes_agree_with_central_differences(name):
    check = margin(CHECKS[name])
    found = solve_size(check, "z", LOADS, N, ["gamma", "phi"])
    for row, factor in zip(found.slopes, ["gamma", "phi"], strict=True):
        h = 1e-5
        sides = [solve_size(check, "z", {**LOADS, factor: LOADS[factor] * (1 + d)}, N).size for d in (-h, h)]
        by_difference = (sides[1] - sides[0]) / (2 * h * LOADS[factor])
        np.testing.assert_allclose(row, by_difference, rtol=2e-8, atol=1e-12 * np.abs(found.size).max())


def test_smallest_of_several_passages_is_taken():
    # (z - 1)(z - 2)(z - 3) passes from violated to met at 1 and at 3.
    found = solve_size(margin("(z - a) * (z - 2) * (z - 3) >= 0"), "z", {"a": np.array([1.0, 0.5])}, 2)
    np.testing.assert_allclose(found.size, [1.0, 0.5], rtol=1e-12)


@pytest.mark.parametrize(
    ("text", "code", "words"),
    [
        ("z + 1 >= a", ALREADY_MET, "already met"),
        ("a >= z * 2", ALREADY_MET, "already met"),
        ("-z >= a", NEVER_MET, "no size meets"),
        ("tanh(z) >= 2 * a", NEVER_MET, "no size meets"),
        ("z * log(-a) >= 1", NOT_FINITE, "not a finite number"),
    ],
)
def test_unsolvable_checks_say_why(text, code, words):
    found = solve_size(margin(text), "z", {"a": np.array([1.0])}, 1)
    assert found.code.tolist() == [code]
    assert np.isnan(found.size).all()
    assert words in sizing_reason(code)


def test_one_unsolvable_situation_leaves_the_others_alone():
    values = {"a": np.array([1.0, -1.0, 4.0])}
    found = solve_size(margin("z**2 >= a"), "z", values, 3)
    assert found.code.tolist() == [SOLVED, ALREADY_MET, SOLVED]
    np.testing.assert_allclose(found.size[[0, 2]], [1.0, 2.0], rtol=1e-15)


@given(a=st.floats(0.01, 100.0), b=st.floats(0.01, 100.0), scale=st.sampled_from([1e-6, 1.0, 1e12]))
def test_quadratic_has_its_closed_form_at_any_scale(a, b, scale):
    found = solve_size(margin("a * z**2 >= b * z + c"), "z", {"a": a, "b": b * scale, "c": scale**2}, 1)
    exact = scale * (b + np.sqrt(b**2 + 4 * a)) / (2 * a)
    assert found.size[0] == pytest.approx(exact, rel=1e-13)


@pytest.mark.parametrize("name", CHECKS)
def test_batch_equals_one_at_a_time(name):
    check = margin(CHECKS[name])
    whole = solve_size(check, "z", LOADS, N, ["gamma"])
    for i in (0, 77, N - 1):
        one = {k: v[i : i + 1] if np.ndim(v) else v for k, v in LOADS.items()}
        alone = solve_size(check, "z", one, 1, ["gamma"])
        assert alone.size[0] == whole.size[i]
        assert alone.slopes[0, 0] == whole.slopes[0, i]
