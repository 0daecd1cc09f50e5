"""Periods and sizes: maxima over time, and the weakest link."""

from __future__ import annotations

import math

from scipy import special

from calibrate.actions import beta_of_period, over_period, size_effect
from calibrate.distributions import distribution
from calibrate.study.ladder.check import ABSOLUTE, RELATIVE, Check, Figures

ANNUAL_BETA = 4.7
YEARS = 50.0
SCALE, SHAPE, SIZE_RATIO = 50.0, 12.0, 20.0


def _period() -> Figures:
    log_survival = YEARS * math.log1p(-float(special.ndtr(-ANNUAL_BETA)))
    expected = -float(special.ndtri(-math.expm1(log_survival)))
    return Figures(expected, float(beta_of_period(ANNUAL_BETA, YEARS)))


def _gumbel_maximum() -> Figures:
    mean, sd = 1.0, 0.30
    maximum = over_period(distribution("gumbel", mean=mean, sd=sd), 1.0, YEARS)
    return Figures(mean + sd * math.sqrt(6.0) / math.pi * math.log(YEARS), float(maximum.mean))


def _weakest_link() -> Figures:
    part = size_effect(distribution("weibull", scale=SCALE, shape=SHAPE), SIZE_RATIO)
    mean = SCALE * math.gamma(1.0 + 1.0 / SHAPE)
    return Figures(mean * SIZE_RATIO ** (-1.0 / SHAPE), float(part.mean))


CHECKS = (
    Check(
        "reference period",
        "β for 50 years from 4.7 for one year, years independent.",
        "closed form: Φ(β₅₀) = Φ(β₁)⁵⁰ (EN 1990 C.3, from memory)",
        _period,
        ABSOLUTE,
        1e-9,
        "rounding in both routes",
    ),
    Check(
        "maximum of 50 years, Gumbel",
        "Mean of the largest of 50 annual maxima (Gumbel, mean 1, sd 0.30).",
        "closed form: mean + sd √6/π ln 50",
        _gumbel_maximum,
        RELATIVE,
        1e-12,
        "rounding",
    ),
    Check(
        "size effect, weakest link",
        "Mean strength of a part 20 times as large as the specimens (Weibull, scale 50, shape 12).",
        "closed form: mean of a specimen times 20^(−1/12) (W. Weibull 1939, from memory)",
        _weakest_link,
        RELATIVE,
        1e-12,
        "rounding",
    ),
)
