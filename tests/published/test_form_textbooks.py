"""FORM against examples of textbooks and papers with independent variables.

Each case names its source. The printed β was recalled from memory; design points and sensitivity factors were
recomputed for these checks by sequential quadratic programming in standard normal space from several starts, a route
that shares nothing with the package. Signs follow the package: α is positive for resistances.
"""

from dataclasses import dataclass

import pytest

import calibrate


def normal(mean, sd):
    return calibrate.distribution("normal", mean=mean, sd=sd)


def lognormal(mean, cov):
    return calibrate.distribution("lognormal", mean=mean, cov=cov)


@dataclass(frozen=True)
class Example:
    """What is printed, to its last decimal, and what was recomputed, with the tolerance of each."""

    limit_state: str
    variables: dict
    printed: float
    printed_tolerance: float
    beta: float
    point: dict
    alpha: dict
    tolerance: float = 5e-6


EXAMPLES = {
    # M. H. Faber, Statistics and Probability Theory (2012), rod under tension: β 3.7448 printed.
    "rod": Example(
        "r * a - s",
        {"r": normal(350.0, 35.0), "a": normal(10.0, 1.0), "s": normal(1500.0, 300.0)},
        3.7448, 1e-4, 3.74483,
        {"r": 276.471, "a": 7.89917, "s": 2183.888},
        {"r": 0.56100, "a": 0.56100, "s": -0.60874},
    ),
    # A. H-S. Ang and W. H. Tang, Probability Concepts in Engineering Planning and Design, vol. II (1984), beam in
    # bending: β 3.049 printed.
    "beam": Example(
        "Y * Z - M",
        {"Y": normal(40.0, 5.0), "Z": normal(50.0, 2.5), "M": normal(1000.0, 200.0)},
        3.049, 1e-3, 3.04907,
        {"Y": 28.5504, "Z": 48.3083, "M": 1379.219},
        {"Y": 0.75102, "Z": 0.22193, "M": -0.62186},
    ),
    # P.-L. Liu and A. Der Kiureghian, Optimization algorithms for structural reliability, Structural Safety 9 (1991),
    # plastic mechanism of a frame: β 2.348 printed.
    "frame": Example(
        "x1 + 2 * x2 + 2 * x3 + x4 - 5 * x5 - 5 * x6",
        {f"x{i}": lognormal(120.0, 0.1) for i in (1, 2, 3, 4)}
        | {"x5": lognormal(50.0, 0.3), "x6": lognormal(40.0, 0.3)},
        2.348, 5e-4, 2.34817,
        {"x1": 117.268, "x2": 115.242, "x3": 115.242, "x4": 117.268, "x5": 83.650, "x6": 55.450},
        {"x1": 0.07708, "x2": 0.15150, "x3": 0.15150, "x4": 0.07708, "x5": -0.80906, "x6": -0.53631},
    ),
    # S.-K. Choi, R. V. Grandhi and R. A. Canfield, Reliability-based Structural Design (2007), cubic limit state:
    # β 2.2401 printed. By symmetry u = (9^(1/3) - 10)/5 twice.
    "cubic": Example(
        "x1**3 + x2**3 - 18",
        {"x1": normal(10.0, 5.0), "x2": normal(10.0, 5.0)},
        2.2401, 1e-4, 2.24009,
        {"x1": 2.08008, "x2": 2.08008},
        {"x1": 0.5**0.5, "x2": 0.5**0.5},
    ),
    # The same with another mean, ibidem: β 2.2260 printed; the design point is not printed.
    "cubic, unlike means": Example(
        "x1**3 + x2**3 - 18",
        {"x1": normal(10.0, 5.0), "x2": normal(9.9, 5.0)},
        2.2260, 1e-4, 2.22599, {}, {},
    ),
    # Closed form: (350 - 200)/sqrt(35^2 + 40^2), worked here.
    "linear": Example(
        "R - S",
        {"R": normal(350.0, 35.0), "S": normal(200.0, 40.0)},
        2.822163, 5e-7, 150.0 / (35.0**2 + 40.0**2) ** 0.5,
        {"R": 350.0 - 35.0**2 * 150.0 / 2825.0, "S": 200.0 + 40.0**2 * 150.0 / 2825.0},
        {"R": 35.0 / 2825.0**0.5, "S": -40.0 / 2825.0**0.5},
        1e-12,
    ),
}  # fmt: skip


WITH_POINT = [name for name, example in EXAMPLES.items() if example.point]


def solve(name):
    return calibrate.form(EXAMPLES[name].limit_state, EXAMPLES[name].variables)


@pytest.mark.parametrize("name", EXAMPLES)
def test_reliability_index(name):
    example, result = EXAMPLES[name], solve(name)
    assert result.beta == pytest.approx(example.printed, abs=example.printed_tolerance)
    # Five decimals were noted, except for the closed form.
    assert result.beta == pytest.approx(example.beta, abs=example.tolerance)
    assert result.status == "converged"


@pytest.mark.parametrize("name", WITH_POINT)
def test_design_point(name):
    example, result = EXAMPLES[name], solve(name)
    for variable, value in example.point.items():
        # Five significant digits or more were noted: half a unit of the last is at most 1e-5 of the value.
        assert result.design_point[variable] == pytest.approx(value, rel=2 * example.tolerance)


@pytest.mark.parametrize("name", WITH_POINT)
def test_sensitivity_factors(name):
    example, result = EXAMPLES[name], solve(name)
    for variable, value in example.alpha.items():
        assert result.sensitivity[variable] == pytest.approx(value, abs=example.tolerance)


# First-order probabilities of the same sources, recomputed with six digits by the same route.
@pytest.mark.parametrize(
    ("name", "probability"), [("rod", 9.0260e-5), ("beam", 1.14774e-3), ("frame", 9.4331e-3)]
)
def test_first_order_probability(name, probability):
    assert solve(name).failure_probability == pytest.approx(probability, rel=2e-5)
