"""Correlated variables: closed forms, and a published example with three correlated variables of four.

The short column is an example of A. Der Kiureghian, "First- and second-order reliability methods", in Engineering
Design Reliability Handbook (2005), from memory. The further digits of its beta were found by sequential quadratic
programming, with the coefficients of the Nataf model from Gauss-Hermite quadrature.
"""

from __future__ import annotations

import math

from calibrate.distributions import distribution
from calibrate.reliability import public_form
from calibrate.reliability.dependence import equivalent_correlation
from calibrate.study.ladder.check import ABSOLUTE, Check, Figures
from calibrate.study.ladder.form_cases import MEAN_R, MEAN_S, SD_R, SD_S, log_sd

RHO = 0.5
SHORT_COLUMN_BETA = 2.466021


def _normals() -> Figures:
    variables = {
        "R": distribution("normal", mean=MEAN_R, sd=SD_R),
        "S": distribution("normal", mean=MEAN_S, sd=SD_S),
    }
    expected = (MEAN_R - MEAN_S) / math.sqrt(SD_R**2 + SD_S**2 - 2.0 * RHO * SD_R * SD_S)
    return Figures(expected, float(public_form("R - S", variables, correlation={("R", "S"): RHO}).beta))


def _lognormals() -> Figures:
    first, second = 0.20, 0.50
    expected = math.log1p(RHO * first * second) / (log_sd(first) * log_sd(second))
    a, b = (distribution("lognormal", mean=1.0, cov=cov) for cov in (first, second))
    return Figures(expected, float(equivalent_correlation(a, b, RHO).coefficient))


def _short_column() -> Figures:
    # kN and m.
    variables = {
        "M1": distribution("normal", mean=250.0, cov=0.30),
        "M2": distribution("normal", mean=125.0, cov=0.30),
        "P": distribution("gumbel", mean=2500.0, cov=0.20),
        "Y": distribution("weibull", mean=40_000.0, cov=0.10),
    }
    found = public_form(
        "1 - M1 / (s1 * Y) - M2 / (s2 * Y) - (P / (A * Y))**2",
        variables,
        correlation={("M1", "M2"): 0.5, ("M1", "P"): 0.3, ("M2", "P"): 0.3},
        quantities={"s1": 0.030, "s2": 0.015, "A": 0.190},
    )
    return Figures(SHORT_COLUMN_BETA, float(found.beta))


CHECKS = (
    Check(
        "correlated normal variables",
        "β by FORM of R − S with normal R and S, correlation 0.5.",
        "closed form: 150/√(35² + 40² − 2·0.5·35·40)",
        _normals,
        ABSOLUTE,
        1e-12,
        "FORM is exact here; rounding",
    ),
    Check(
        "Nataf coefficient, lognormal pair",
        "Correlation in standard normal space of two lognormal variables (cov 0.20 and 0.50, correlation 0.5).",
        "closed form: ln(1 + ρ V₁ V₂)/(s₁ s₂)",
        _lognormals,
        ABSOLUTE,
        1e-8,
        "the precision that the solution of the Nataf coefficient claims",
    ),
    Check(
        "short column, correlated",
        "β by FORM of a short column under two bending moments and a Gumbel axial force, all correlated, with Weibull "
        "yield stress.",
        "A. Der Kiureghian (2005): 2.47 (from memory), its further digits recomputed",
        _short_column,
        ABSOLUTE,
        1e-6,
        "half a unit of the last decimal of the figure, and the precision of β",
    ),
)
