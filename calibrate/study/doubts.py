"""Reservations that need the whole chain: models against the reliability that they lead to."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from scipy.special import ndtr

from calibrate.errors import Doubt, InputError, Problem
from calibrate.factors import Calibration
from calibrate.study.action_doubts import action_doubts
from calibrate.study.evidence_doubts import evidence_doubts
from calibrate.study.fits import RecordModel, fit_doubts
from calibrate.study.mean_limits import mean_limit_doubts
from calibrate.study.model import Study

STOP_SHARE = 0.05
DOUBT_SHARE = 0.001
IMPORTANT = 0.1
"""Sensitivity factor above which a variable acts as a resistance."""


def study_doubts(
    study: Study,
    fitted: Mapping[str, RecordModel],
    calibration: Calibration,
) -> tuple[Doubt, ...]:
    """Return the reservations of a finished calibration.

    Raises
    ------
    InputError
        When a resistance that should be positive has so much mass below zero
        that it makes up more than 5 % of a failure probability.
    """
    return (
        *fit_doubts(fitted),
        *mean_limit_doubts(study, fitted),
        *evidence_doubts(study, fitted, calibration),
        *_negative_mass(study, calibration),
        *action_doubts(study, calibration),
    )


def _negative_mass(study: Study, calibration: Calibration) -> list[Doubt]:
    """Compare the mass below zero of every positive resistance with the failure probability."""
    largest: dict[str, tuple[float, float, str, int]] = {}
    evaluation = calibration.proposed.evaluation
    for rule, e in zip(study.rules.values(), evaluation.per_rule, strict=True):
        p_f = ndtr(-e.reliability.beta)
        taking_part = np.isfinite(p_f) & (study.situations.weight > 0)
        for i, name in enumerate(rule.variables):
            distribution = e.distributions[i]
            if study.variables[name].may_be_negative or distribution.is_constant:
                continue
            acts = taking_part & (e.reliability.alpha[i] > IMPORTANT)
            mass = np.broadcast_to(distribution.cdf(0.0), p_f.shape)
            positive = np.broadcast_to(distribution.mean, p_f.shape) > 0
            share = np.where(acts & positive, mass / np.where(p_f > 0, p_f, 1.0), 0.0)
            worst = int(np.argmax(share))
            if share[worst] > largest.get(name, (DOUBT_SHARE,))[0]:
                largest[name] = (float(share[worst]), float(mass[worst]), rule.name, worst + 1)
    problems, doubts = [], []
    for name, (fraction, mass_below, rule_name, situation) in largest.items():
        text = (
            f"Variable '{name}' ({study.variables[name].families[0]}) has a probability of {mass_below:.1e} below "
            f"zero, {fraction:.1%} of the failure probability of rule '{rule_name}', situation {situation}."
        )
        if fraction > STOP_SHARE:
            suggestion = (
                "Use a family that is positive, such as lognormal or weibull; if the quantity can really be "
                "negative, say may_be_negative = true."
            )
            problems.append(Problem(text, study.shown, study.variables[name].line, suggestion))
        else:
            doubts.append(Doubt("negative-mass", text, f"variables.{name}"))
    if problems:
        raise InputError(problems)
    return doubts
