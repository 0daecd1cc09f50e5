"""Importance sampling over many situations, as ratios against two baselines of the same run.

Run ``OMP_NUM_THREADS=1 python tests/benchmarks/bench_simulation.py [situations]`` on a quiet machine. The model is that
of bench_form.py with the area of each situation scaled to beta = 3.8. Baselines:

- plain numpy that draws as many samples and evaluates the limit state at them, written out by hand, with the
  parameters of each situation repeated, in blocks of the same size (median of 5);
- the samples that crude Monte Carlo takes for the same coefficient of variation, (1 - p) / (p cov^2).
"""

import sys

import numpy as np
from bench_form import NAMES, TEXT, model, timed
from scipy.special import log_ndtr

from calibrate.expressions import parse_comparison
from calibrate.reliability import ExpressionLimitState, Problem, design_points
from calibrate.reliability.simulation import METHODS, simulate
from calibrate.reliability.simulation.batches import BLOCK

BETA, COV = 3.8, 0.02


def sized(n, rng):
    """Return the problem with areas at which FORM gives the wanted beta, its design points, and what the area is."""
    area, models = model(n, rng)
    for _ in range(6):
        problem = Problem(
            ExpressionLimitState(parse_comparison(TEXT).margin, NAMES, {"A": area}), tuple(models), n
        )
        found = design_points(problem)
        # d beta / d ln A = theta_R A f_y / |grad g| at the design point.
        slope = found.x[0] * area * found.x[1] / found.gradient_norm
        area = area * np.exp((BETA - found.beta) / slope)
    return problem, found, area, models


def plain_value(u, area, parameters):
    """One pass by hand: x(u) and g."""
    (mr, sr), (mf, sf), (me, se), (mg, sg), (mc, sc), (lq, bq) = parameters
    r, f, e, c = (
        np.exp(m + s * row) for m, s, row in ((mr, sr, u[0]), (mf, sf, u[1]), (me, se, u[2]), (mc, sc, u[4]))
    )
    q = lq - bq * np.log(-log_ndtr(u[5]))
    return r * area * f - e * (mg + sg * u[3] + c * q)


def plain(samples, design, area, models):
    """Draw and evaluate samples around the design points, a block of situations at a time."""
    pairs = [tuple(np.asarray(p, dtype=float) for p in m.parameters.values()) for m in models]
    parameters = [
        (np.log(a) if m.family.name == "lognormal" else a, b) for m, (a, b) in zip(models, pairs, strict=True)
    ]
    rng = np.random.default_rng(1)
    ends = np.cumsum(samples)
    total, start = 0.0, 0
    while start < samples.size:
        stop = max(start + 1, int(np.searchsorted(ends, ends[start] - samples[start] + BLOCK, side="right")))
        at = np.repeat(np.arange(start, stop), samples[start:stop])
        u = rng.standard_normal((6, at.size))
        u += np.repeat(design[:, start:stop], samples[start:stop], axis=1)
        own = [tuple(p[at] if p.ndim else p for p in pair) for pair in parameters]
        total += np.sum(plain_value(u, area[at], own) <= 0.0)
        start = stop
    return total


def main(n):
    problem, found, area, models = sized(n, np.random.default_rng(20261))
    for sobol in (False, True):
        report(problem, found, area, models, sobol)
    few = problem.take(slice(0, 20), 20)
    small = design_points(few)
    for name in METHODS:
        if name == "crude monte carlo":
            continue
        seconds, result = timed(lambda name=name: simulate(few, name, seed=1, cov=0.05, reliability=small), 1)
        print(
            f"{name}, 20 situations to 5 %: {seconds:.2f} s, {result.samples.mean():.0f} evaluations each, "
            f"beta {result.beta.mean():.3f}, reached {result.reached.mean():.0%}"
        )


def report(problem, found, area, models, sobol):
    n = problem.n
    seconds, result = timed(
        lambda: simulate(problem, "importance sampling", seed=1, cov=COV, reliability=found, sobol=sobol), 3
    )
    bare, _ = timed(lambda: plain(result.samples, found.u, area, models), 5)
    total = int(result.samples.sum())
    p = result.probability
    crude = np.mean((1.0 - p) / (p * result.cov**2) / result.samples)
    print(f"{n} situations, beta {found.beta.min():.3f} to {found.beta.max():.3f}, Sobol points: {sobol}")
    print(f"importance sampling to {COV:.0%}: {seconds:.2f} s (wanted for 1000: less than 4)")
    print(
        f"reached {result.reached.mean():.1%}; {total / n:.0f} samples each; {seconds / total * 1e9:.0f} ns per sample"
    )
    print(
        f"that is {seconds / bare:.2f} times plain drawing and evaluating, {bare:.2f} s (wanted: at most 1.5)"
    )
    print(f"crude Monte Carlo takes {crude:.0f} times as many samples (wanted: at least 1000)")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1000)
