"""The squared calibration of three factors, in units of one cold FORM sweep over all situations.

Run ``OMP_NUM_THREADS=1 python tests/benchmarks/bench_calibration.py [situations]`` on a quiet machine.
"""

import statistics
import sys
import time

import numpy as np

from calibrate.expressions import parse, parse_comparison
from calibrate.factors import Factor, Goal, Response, RuleModel, make_penalty, optimise, search_lattice
from calibrate.situations import BasicVariable

TARGET = 3.8


def variable(name, family, **texts):
    return BasicVariable(name, family, {k: parse(v) for k, v in texts.items()})


def rules(n, rng):
    """Two rules over half of the situations each: six variables, sizes solved from the design check."""
    models = []
    for name, scatter, half in (("first", "0.09", n // 2), ("second", "0.16", n - n // 2)):
        values = {"chi": rng.uniform(0.05, 0.95, half), "v_Q": rng.uniform(0.2, 0.45, half)}
        variables = (
            variable("theta_R", "lognormal", mean="1.05", cov=scatter),
            variable("f_y", "lognormal", mean="1.15", cov="0.07"),
            variable("theta_E", "lognormal", mean="1", cov="0.06"),
            variable("G", "normal", mean="1 - chi", cov="0.1"),
            variable("C", "lognormal", mean="0.9", cov="0.12"),
            variable("Q", "gumbel", mean="0.6 * chi", cov="v_Q"),
        )
        check = parse_comparison(f"A * phi_{name} >= 1.2 * (1 - chi) + gamma_Q * chi").margin
        limit = parse_comparison("theta_R * A * f_y >= theta_E * (G + C * Q)").margin
        weight = np.full(half, 1.0 / half)
        models.append(RuleModel(name, check, "A", limit, variables, values, weight, 0.5))
    return models


def timed(function, repeats=1):
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        result = function()
        times.append(time.perf_counter() - begin)
    return statistics.median(times), result


def main(n):
    factors = [
        Factor("phi_first", 0.9, 0.4, 1.5, 0.05, held=False),
        Factor("phi_second", 0.8, 0.4, 1.5, 0.05, held=False),
        Factor("gamma_Q", 1.5, 1.0, 3.0, 0.05, held=False),
    ]
    models = rules(n, np.random.default_rng(7))
    response = Response(models, factors)
    goal = Goal(response.weight / response.weight.sum(), TARGET, make_penalty("squared"), None)
    present = np.array([f.present for f in factors])
    response(present)
    sweep, first = timed(lambda: response(present), 7)
    best, found = timed(lambda: optimise(response, goal, response(present)), 3)
    lattice, search = timed(lambda: search_lattice(response, goal, found.evaluation), 3)
    print(f"{n} situations, two rules, six variables, three factors, one thread")
    print(f"one cold sweep {sweep * 1e3:.1f} ms; {np.isfinite(first.beta).mean():.2%} with β")
    print(f"optimum: {best / sweep:.1f} cold sweeps, {found.passes} passes (wanted: at most 15)")
    print(
        f"lattice: {lattice / sweep:.1f} cold sweeps for {search.evaluated} of {search.points} points (wanted: 30)"
    )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 10_000)
