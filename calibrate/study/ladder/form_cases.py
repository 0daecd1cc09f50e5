"""FORM with independent variables, against closed forms and exact probabilities."""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.distributions import Distribution, distribution
from calibrate.reliability import public_form
from calibrate.study.ladder.check import ABSOLUTE, Check, Figures
from calibrate.study.ladder.quadrature import Array, normal_mean

MEAN_R, MEAN_S = 350.0, 200.0
SD_R, SD_S = 35.0, 40.0

COV_R, COV_S = 0.10, 0.30
MEAN_RATIO = 3.0
"""Mean of a lognormal resistance over the mean of the load, 1."""


def log_sd(cov: float) -> float:
    """Return the standard deviation of the logarithm of a lognormal variable."""
    return math.sqrt(math.log1p(cov * cov))


def lognormal_ratio_beta() -> float:
    """Return beta of R > S for lognormal variables: ln of the ratio of medians over its standard deviation."""
    medians = MEAN_RATIO * math.sqrt((1.0 + COV_S**2) / (1.0 + COV_R**2))
    return math.log(medians) / math.hypot(log_sd(COV_R), log_sd(COV_S))


def lognormal_gumbel() -> dict[str, Distribution]:
    """Return the variables of the case lognormal resistance, Gumbel load."""
    return {
        "R": distribution("lognormal", mean=MEAN_RATIO, cov=COV_R),
        "S": distribution("gumbel", mean=1.0, cov=COV_S),
    }


def lognormal_gumbel_beta() -> float:
    """Return the exact beta of that case: P(S > R) summed over R."""
    median, sd = MEAN_RATIO / math.sqrt(1.0 + COV_R**2), log_sd(COV_R)
    scale = COV_S * math.sqrt(6.0) / math.pi
    location = 1.0 - np.euler_gamma * scale

    def beyond(u: Array) -> Array:
        r = median * np.exp(sd * u)
        return np.asarray(-np.expm1(-np.exp(-(r - location) / scale)))

    return -float(special.ndtri(normal_mean(beyond)))


def _linear() -> Figures:
    variables = {
        "R": distribution("normal", mean=MEAN_R, sd=SD_R),
        "S": distribution("normal", mean=MEAN_S, sd=SD_S),
    }
    expected = (MEAN_R - MEAN_S) / math.hypot(SD_R, SD_S)
    return Figures(expected, float(public_form("R - S", variables).beta))


def _lognormal() -> Figures:
    variables = {
        "R": distribution("lognormal", mean=MEAN_RATIO, cov=COV_R),
        "S": distribution("lognormal", mean=1.0, cov=COV_S),
    }
    return Figures(lognormal_ratio_beta(), float(public_form("R - S", variables).beta))


def _design_value() -> Figures:
    s_r, s_s = log_sd(COV_R), log_sd(COV_S)
    alpha = -s_s / math.hypot(s_r, s_s)
    expected = math.exp(-alpha * lognormal_ratio_beta() * s_s) / math.sqrt(1.0 + COV_S**2)
    variables = {
        "R": distribution("lognormal", mean=MEAN_RATIO, cov=COV_R),
        "S": distribution("lognormal", mean=1.0, cov=COV_S),
    }
    return Figures(expected, float(public_form("R - S", variables).design_point["S"]))


def _gumbel() -> Figures:
    return Figures(lognormal_gumbel_beta(), float(public_form("R - S", lognormal_gumbel()).beta))


CHECKS = (
    Check(
        "linear margin, normal",
        "β by FORM of R − S with normal R (mean 350, sd 35) and S (mean 200, sd 40).",
        "closed form: 150/√(35² + 40²)",
        _linear,
        ABSOLUTE,
        1e-12,
        "FORM is exact here; rounding",
    ),
    Check(
        "lognormal R and S",
        "β by FORM of R − S with lognormal R (mean 3, cov 0.10) and S (mean 1, cov 0.30).",
        "closed form: ln of the ratio of medians over its sd",
        _lognormal,
        ABSOLUTE,
        1e-9,
        "FORM is exact here; β is computed to about 1e-10",
    ),
    Check(
        "design value of a load",
        "Design point of the load in the same problem: exp(−α β s) times its median.",
        "closed form: α = −s_S/√(s_R² + s_S²)",
        _design_value,
        ABSOLUTE,
        1e-7,
        "the point is known to the square root of the precision of β at worst",
    ),
    Check(
        "lognormal R, Gumbel S",
        "β by FORM of R − S with lognormal R (mean 3, cov 0.10) and Gumbel S (mean 1, cov 0.30) against the exact β.",
        "quadrature over R",
        _gumbel,
        ABSOLUTE,
        0.003,
        "what FORM neglects: the curvature of the limit state in standard normal space",
    ),
)
