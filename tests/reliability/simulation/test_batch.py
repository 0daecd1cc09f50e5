"""A situation's result is the same, to the last bit, alone and in any batch, chunk, thread and order."""

import numpy as np
import pytest

from calibrate.reliability import design_points
from calibrate.reliability.simulation import METHODS, batches, simulate

FIELDS = (
    "probability",
    "cov",
    "lower",
    "upper",
    "beta",
    "beta_lower",
    "beta_upper",
    "samples",
    "complement",
    "code",
)
TEXT = "b - x + k * (y**2 + z**2) - 0.05 * x * z"
N = 9
CASES = [(method, False) for method in METHODS] + [
    (method, True) for method in METHODS if method != "subset simulation"
]


def case(standard, order):
    # One fails at the origin, one has no failure that any method would see, the others differ in curvature.
    b = np.linspace(1.0, 3.0, N)
    k = np.linspace(-0.02, 0.3, N)
    b[4], b[6] = -1.0, 60.0
    return standard(TEXT, ["x", "y", "z"], len(order), b=b[order], k=k[order])


def run(standard, method, sobol, order, **options):
    order = np.asarray(order)
    problem = case(standard, order)
    found = design_points(problem)
    # A second point beside the first for some of them only.
    second = np.where(order % 3 == 0, 1.2 * found.u, np.nan)
    points = np.stack([found.u, second])
    return simulate(
        problem,
        method,
        seed=7,
        keys=100 + order,
        cov=0.15,
        most=60_000,
        points=points,
        sobol=sobol,
        **options,
    )


def assert_same(result, at, expected, where):
    for name in FIELDS:
        found, wanted = getattr(result, name)[at], getattr(expected, name)[where]
        assert np.ascontiguousarray(found).tobytes() == np.ascontiguousarray(wanted).tobytes(), name


@pytest.mark.parametrize(("method", "sobol"), CASES)
def test_bits(standard, method, sobol, monkeypatch):
    whole = run(standard, method, sobol, np.arange(N))
    for i in range(N):
        assert_same(run(standard, method, sobol, [i]), [0], whole, [i])
    order = np.array([8, 3, 0, 5, 5, 1])
    assert_same(run(standard, method, sobol, order), slice(None), whole, order)
    assert_same(
        run(standard, method, sobol, np.arange(N), chunk=4, workers=2), slice(None), whole, slice(None)
    )
    monkeypatch.setattr(batches, "BLOCK", 1000)
    assert_same(run(standard, method, sobol, np.arange(N)), slice(None), whole, slice(None))


def test_points_that_are_absent_change_nothing(standard):
    problem = standard("2 - x + 0.1 * y**2", ["x", "y"], 3)
    found = design_points(problem)
    padded = np.stack([np.full((2, 3), np.nan), found.u, np.full((2, 3), np.nan)])
    for method in ("importance sampling", "line sampling"):
        for sobol in (False, True):
            one = simulate(problem, method, seed=1, points=found.u, sobol=sobol)
            assert_same(
                simulate(problem, method, seed=1, points=padded, sobol=sobol), [0, 1, 2], one, [0, 1, 2]
            )


@pytest.mark.parametrize("method", METHODS)
def test_seed_key_and_purpose_choose_the_numbers(standard, method):
    problem = standard("1.5 - x + 0.2 * y**2", ["x", "y"], 2)
    found = design_points(problem)

    def p(**options):
        return simulate(
            problem, method, **{"seed": 1, "cov": 0.1, "reliability": found, **options}
        ).probability

    first = p()
    assert first[0] != first[1]
    assert (p() == first).all()
    assert (p(keys=np.array([1, 0])) == first[::-1]).all()
    assert (p(keys=np.array([5, 5]))[0] == p(keys=np.array([5, 5]))[1]).all()
    assert (p(seed=2) != first).all()
    assert (p(purpose="check") != first).all()


def test_progress_is_told(standard):
    problem = standard("2 - x", ["x"], 5)
    told = []
    simulate(
        problem,
        "crude monte carlo",
        seed=1,
        cov=0.3,
        chunk=2,
        progress=lambda done, n: told.append((done, n)),
    )
    assert told == [(2, 5), (4, 5), (5, 5)]


def test_no_situations(standard):
    problem = standard("2 - x", ["x"], 3).take(slice(0, 0), 0)
    result = simulate(problem, "crude monte carlo", seed=1)
    assert result.n == 0
    assert result.status.size == 0
