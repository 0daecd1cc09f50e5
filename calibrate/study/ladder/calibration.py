"""The whole way from factors through sizes and FORM to the optimal factor."""

from __future__ import annotations

import math

import numpy as np

from calibrate.expressions import parse, parse_comparison
from calibrate.factors import Factor, Response, RuleModel, calibrate_factors, make_penalty
from calibrate.situations import BasicVariable
from calibrate.study.ladder.check import RELATIVE, Check, Figures
from calibrate.study.ladder.form_cases import COV_R, COV_S, log_sd

TARGET = 3.8
LOADS = (0.5, 1.0, 2.0)
"""Mean load of each design situation; the same factor serves all."""


def _calibrated() -> Figures:
    rule = RuleModel(
        "only",
        parse_comparison("z >= gamma * load").margin,
        "z",
        parse_comparison("R >= E").margin,
        (
            BasicVariable("R", "lognormal", {"mean": parse("z"), "cov": parse(str(COV_R))}),
            BasicVariable("E", "lognormal", {"mean": parse("load"), "cov": parse(str(COV_S))}),
        ),
        {"load": np.array(LOADS)},
        np.full(len(LOADS), 1.0 / len(LOADS)),
        1.0,
    )
    factors = (Factor("gamma", present=2.0, lower=1.0, upper=6.0, step=None, held=False),)
    response = Response((rule,), factors)
    found = calibrate_factors(response, factors, response.weight, TARGET, make_penalty("squared"))
    spread = math.hypot(log_sd(COV_R), log_sd(COV_S))
    expected = math.exp(TARGET * spread) * math.sqrt((1.0 + COV_R**2) / (1.0 + COV_S**2))
    return Figures(expected, float(found.optimal.factors["gamma"]))


CHECKS = (
    Check(
        "calibration of one factor",
        "Optimal load factor for three design situations with lognormal R (cov 0.10) and E (cov 0.30), target 3.8.",
        "closed form: exp(3.8 s) √((1 + V_R²)/(1 + V_E²))",
        _calibrated,
        RELATIVE,
        1e-7,
        "the optimiser ends with steps below 1e-9 of the width of the bounds",
    ),
)
