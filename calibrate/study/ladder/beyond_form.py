"""What goes beyond one design point and its tangent plane: curvature, several points, systems, simulation."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions import Distribution, distribution
from calibrate.expressions import parse
from calibrate.reliability import ExpressionLimitState, Problem, design_points, public_form
from calibrate.reliability.further_points import further_points
from calibrate.reliability.second_order import second_order
from calibrate.reliability.series_of_points import series_probability
from calibrate.reliability.simulation import simulate
from calibrate.reliability.systems import series, system_probability
from calibrate.study.ladder.check import ABSOLUTE, HALF_INTERVALS, RELATIVE, Check, Figures
from calibrate.study.ladder.form_cases import lognormal_gumbel, lognormal_gumbel_beta
from calibrate.study.ladder.quadrature import Array, grid, normal_mean

BETA = 3.0
CURVATURES = (0.30, -0.10)
SEED = 1
CONFIDENCE, COV = 0.95, 0.01
MEMBERS = ((350.0, 35.0), (360.0, 30.0))
LOAD = (200.0, 40.0)
"""Mean and standard deviation."""


def _problem(limit_state: str, variables: dict[str, Distribution]) -> Problem:
    state = ExpressionLimitState(parse(limit_state), tuple(variables))
    return Problem(state, tuple(variables.values()), 1)


def _standard(names: str) -> dict[str, Distribution]:
    return {name: distribution("normal", mean=0.0, sd=1.0) for name in names}


def _paraboloid_problem() -> Problem:
    return _problem(f"{BETA} - u + {CURVATURES[0] / 2} * v**2 + {CURVATURES[1] / 2} * w**2", _standard("uvw"))


def _paraboloid_beta() -> float:
    v, weight = grid()
    surface = BETA + 0.5 * (CURVATURES[0] * v[:, None] ** 2 + CURVATURES[1] * v**2)
    return -float(special.ndtri(np.sum(weight[:, None] * weight * special.ndtr(-surface))))


def _paraboloid() -> Figures:
    problem = _paraboloid_problem()
    found = second_order(problem, design_points(problem))
    return Figures(_paraboloid_beta(), float(found.beta[0]))


def _curved() -> Figures:
    problem = _problem("R - S", lognormal_gumbel())
    found = second_order(problem, design_points(problem))
    return Figures(lognormal_gumbel_beta(), float(found.beta[0]))


def _two_points() -> Figures:
    problem = _problem(f"{BETA} - abs(u)", _standard("u"))
    found = further_points(problem, design_points(problem), most=2)
    probability = series_probability(found.beta, found.alpha)
    return Figures(2.0 * float(special.ndtr(-BETA)), float(probability[0]))


def _series() -> Figures:
    variables = {
        name: distribution("normal", mean=mean, sd=sd)
        for name, (mean, sd) in zip(("R1", "R2", "S"), (*MEMBERS, LOAD), strict=True)
    }
    found = [public_form(margin, variables) for margin in ("R1 - S", "R2 - S")]
    alpha = np.array([[f.sensitivity[name] for name in variables] for f in found])[:, :, None]
    beta = np.array([[f.beta] for f in found])
    system = system_probability(beta, series(("first", "second")), alpha=alpha, slopes=False)

    def any_fails(u: Array) -> Array:
        # Given the load the members are independent.
        load = LOAD[0] + LOAD[1] * u
        return np.asarray(-np.expm1(sum(special.log_ndtr((mean - load) / sd) for mean, sd in MEMBERS)))

    return Figures(normal_mean(any_fails), float(system.probability[0]))


def _importance_sampling() -> Figures:
    problem = _paraboloid_problem()
    found = simulate(
        problem,
        "importance sampling",
        seed=SEED,
        cov=COV,
        reliability=design_points(problem),
        confidence=CONFIDENCE,
        purpose="ladder",
    )
    half = 0.5 * (found.beta_upper[0] - found.beta_lower[0])
    return Figures(_paraboloid_beta(), float(found.beta[0]), float(half))


CHECKS = (
    Check(
        "quadratic limit state",
        "β by the second-order method of a paraboloid at a distance of 3 with principal curvatures 0.30 and −0.10.",
        "quadrature over both axes",
        _paraboloid,
        ABSOLUTE,
        1e-9,
        "second order is exact here; precision of its integral",
    ),
    Check(
        "lognormal R, Gumbel S, second order",
        "β by the second-order method of lognormal R against Gumbel S.",
        "quadrature over R",
        _curved,
        ABSOLUTE,
        1e-4,
        "what second order neglects: the limit state is no exact paraboloid",
    ),
    Check(
        "two design points",
        "First-order probability of |u| > 3 as the series system of its two design points.",
        "closed form: 2 Φ(−3)",
        _two_points,
        RELATIVE,
        1e-9,
        "planes are exact here; precision of β and of the bivariate normal probability",
    ),
    Check(
        "series system of two members",
        "Probability that one of two members fails under a common load, from the design points of both.",
        "quadrature over the load",
        _series,
        RELATIVE,
        1e-9,
        "planes are exact here; precision of β and of the bivariate normal probability",
    ),
    Check(
        "importance sampling",
        "β by simulation around the design point of the same paraboloid, with a fixed seed and a cov of 0.01.",
        "quadrature over both axes",
        _importance_sampling,
        HALF_INTERVALS,
        2.0,
        "twice the half width of the 95 % interval: exceeded by one seed in ten thousand",
    ),
)
