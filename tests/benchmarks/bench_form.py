"""FORM over many situations, as ratios against two baselines of the same run.

Run ``OMP_NUM_THREADS=1 python tests/benchmarks/bench_form.py [situations]`` on a quiet machine. Baselines:

- scipy's SLSQP with exact gradients, one situation at a time, on a seeded sample;
- one plain numpy pass of transform, limit state and gradient at the design points, written out by hand, in chunks of
  the same size (median of 20).
"""

import statistics
import sys
import time

import numpy as np
from scipy.optimize import minimize
from scipy.special import log_ndtr, ndtr

from calibrate.distributions import distribution
from calibrate.engine import chunk_size
from calibrate.expressions import parse_comparison
from calibrate.reliability import ExpressionLimitState, form

TEXT = "theta_R * A * f_y >= theta_E * (G + C * Q)"
NAMES = ("theta_R", "f_y", "theta_E", "G", "C", "Q")


def model(n, rng):
    """Return area and distributions: four lognormal variables, a normal one, a Gumbel one."""
    chi = rng.uniform(0.05, 0.95, n)
    cov = rng.uniform(0.15, 0.45, n)
    area = (1.35 * (1 - chi) + 1.5 * chi) * rng.uniform(0.9, 1.2, n)
    return area, [
        distribution("lognormal", mean=1.05, cov=0.08),
        distribution("lognormal", mean=1.15, cov=0.07),
        distribution("lognormal", mean=1.0, cov=0.06),
        distribution("normal", mean=1 - chi, cov=0.1),
        distribution("lognormal", mean=0.9, cov=0.12),
        distribution("gumbel", mean=0.6 * chi, cov=cov),
    ]


def plain_pass(u, area, parameters):
    """One pass by hand: x(u), dx/du, g and its gradient in u space."""
    (mr, sr), (mf, sf), (me, se), (mg, sg), (mc, sc), (lq, bq) = parameters
    r, f, e, c = (
        np.exp(mr + sr * u[0]),
        np.exp(mf + sf * u[1]),
        np.exp(me + se * u[2]),
        np.exp(mc + sc * u[4]),
    )
    g = mg + sg * u[3]
    v = u[5]
    log_cdf = log_ndtr(v)
    q = lq - bq * np.log(-log_cdf)
    slope = -bq * np.exp(-0.5 * v * v) * 0.3989422804014327 / (ndtr(v) * log_cdf)
    resistance, load = r * area * f, g + c * q
    effect = e * load
    gradient = np.stack(
        [resistance * sr, resistance * sf, -effect * se, -e * sg, -e * c * q * sc, -e * c * slope]
    )
    return resistance - effect, gradient


def by_slsqp(area, parameters, k):
    """One situation with a general-purpose optimiser and exact gradients."""
    own = [tuple(float(p[k]) if np.ndim(p) else float(p) for p in pair) for pair in parameters]

    def limit(u):
        return float(plain_pass(u, area[k], own)[0])

    def slope(u):
        return plain_pass(u, area[k], own)[1]

    found = minimize(
        lambda u: 0.5 * float(u @ u), np.zeros(6), jac=lambda u: u, method="SLSQP",
        constraints={"type": "eq", "fun": limit, "jac": slope}, options={"ftol": 1e-12, "maxiter": 100},
    )  # fmt: skip
    return float(np.sqrt(found.x @ found.x))


def timed(function, repeats):
    """Return the median time of a call and its last result."""
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        result = function()
        times.append(time.perf_counter() - begin)
    return statistics.median(times), result


def main(n):
    rng = np.random.default_rng(20261)
    area, models = model(n, rng)
    limit = ExpressionLimitState(parse_comparison(TEXT).margin, NAMES, {"A": area})
    seconds, found = timed(lambda: form(limit, models, n), 7)
    chunk = chunk_size(n)
    pairs = [tuple(np.asarray(p, dtype=float) for p in m.parameters.values()) for m in models]
    parameters = [
        (np.log(a) if m.family.name == "lognormal" else a, b) for m, (a, b) in zip(models, pairs, strict=True)
    ]

    def whole_pass():
        for start in range(0, n, chunk):
            piece = slice(start, start + chunk)
            plain_pass(
                found.u[:, piece],
                area[piece],
                [tuple(p[piece] if p.ndim else p for p in pair) for pair in parameters],
            )

    bare, _ = timed(whole_pass, 20)
    sample = rng.choice(n, size=min(n, 400), replace=False)
    alone, betas = timed(lambda: [by_slsqp(area, parameters, k) for k in sample], 1)
    per_slsqp = alone / sample.size
    error = np.abs(np.array(betas) - np.abs(found.beta[sample]))
    micro = 1e6 / n
    print(f"{n} situations, {len(NAMES)} variables, one thread; chunks of {chunk}")
    print(f"microseconds per situation: FORM {seconds * micro:.2f}, plain pass {bare * micro:.3f}")
    print(f"SLSQP {per_slsqp * 1e6:.0f} µs; largest difference of β {error.max():.1e}")
    print(f"converged {found.converged.mean():.2%}, mean passes {found.iterations.mean():.1f}")
    print(f"FORM is {per_slsqp * n / seconds:.0f} times faster than SLSQP (wanted: 200, better: 400)")
    print(f"FORM takes as long as {seconds / bare:.1f} plain passes (wanted: at most 40, better: 20)")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 100_000)
