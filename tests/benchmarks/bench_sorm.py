"""Second-order reliability over many situations, as a ratio against the FORM sweep of the same situations.

Run ``OMP_NUM_THREADS=1 python tests/benchmarks/bench_sorm.py [situations]`` on a quiet machine. The parts are timed
alone on the same design points, as ratios too.
"""

import sys
import time

import numpy as np
from bench_form import NAMES, TEXT, model

from calibrate.expressions import parse_comparison
from calibrate.reliability import ExpressionLimitState, Problem, design_points
from calibrate.reliability.second_order import paraboloid, principal_curvatures, second_order


def least(*functions, rounds=15):
    """Return the least time of each, called in turn so that a busy machine strikes all alike."""
    best = [float("inf")] * len(functions)
    for _ in range(rounds):
        for i, function in enumerate(functions):
            begin = time.perf_counter()
            function()
            best[i] = min(best[i], time.perf_counter() - begin)
    return best


def main(n):
    area, models = model(n, np.random.default_rng(20261))
    limit = ExpressionLimitState(parse_comparison(TEXT).margin, NAMES, {"A": area})
    problem = Problem(limit, tuple(models), n)
    found = design_points(problem)
    result = second_order(problem, found)
    hessian = problem.hessian(found.u)
    form_seconds, seconds, hessian_seconds, bends, exact = least(
        lambda: design_points(problem),
        lambda: second_order(problem, found),
        lambda: problem.hessian(found.u),
        lambda: principal_curvatures(hessian, found.alpha, found.gradient_norm),
        lambda: paraboloid(found.beta, result.curvatures),
    )
    micro = 1e6 / n
    print(f"{n} situations, {len(NAMES)} variables, one thread")
    print(f"microseconds per situation: FORM {form_seconds * micro:.2f}, second order {seconds * micro:.2f}")
    print(f"second order takes {seconds / form_seconds:.2f} times as long as FORM (wanted: at most 5)")
    parts = {"Hessian": hessian_seconds, "curvatures": bends, "probability beyond the paraboloid": exact}
    text = ", ".join(f"{name} {part / form_seconds:.2f}" for name, part in parts.items())
    print(f"of it, each in one piece: {text}")
    change = result.paraboloid / result.first_order
    print(
        f"probability over that of FORM: {change.min():.3f} to {change.max():.3f}; sound {result.sound.mean():.2%}"
    )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 10_000)
