"""Reservations about actions: periods that may have been mixed, and values beyond what can occur."""

from __future__ import annotations

import numpy as np

from calibrate.actions.periods import in_years
from calibrate.errors import Doubt
from calibrate.factors import Calibration
from calibrate.study.model import Study

OF_EXTREMES = ("gumbel", "frechet", "gev")


def action_doubts(study: Study, calibration: Calibration) -> list[Doubt]:
    """Return the reservations about periods and limits of actions."""
    return [
        *_converted(study),
        *_constant_in_time(study),
        *_without_period(study),
        *_beyond_limit(study, calibration),
    ]


def _converted(study: Study) -> list[Doubt]:
    """Name the actions that were converted to another period."""
    combined = {a.name for a in study.combination}
    doubts = []
    for name, variable in study.variables.items():
        if variable.period is None or variable.period == study.reference_period or name in combined:
            continue
        if not variable.converted:
            doubts.append(
                Doubt(
                    "period-not-converted",
                    f"Variable '{name}' is given for {in_years(variable.period)} and was not converted to the "
                    f"reference period of {in_years(study.reference_period)}: {variable.conversion_reason}",
                    f"variables.{name}",
                )
            )
            continue
        doubts.append(
            Doubt(
                "period-converted",
                f"Variable '{name}' is given for {in_years(variable.period)} and was converted to the reference period "
                f"of {in_years(study.reference_period)} as the maximum of independent periods, F^"
                f"{study.reference_period / variable.period:g}. Scatter that is constant in time (coefficients, "
                "model uncertainty) does not belong in it.",
                f"variables.{name}",
            )
        )
    return doubts


def _constant_in_time(study: Study) -> list[Doubt]:
    """Name variables that do not vary in time by their role, and yet were raised to a period."""
    doubts = []
    for name, variable in study.variables.items():
        if variable.role not in ("model", "geometry", "resistance") or not variable.converted:
            continue
        if variable.period is None or variable.period == study.reference_period:
            continue
        text = (
            f"'{name}' has the role {variable.role}, which is constant in time, but was raised to the reference period "
            "like an action that comes anew. The maximum is to be taken of what varies in time only."
        )
        doubts.append(Doubt("constant-in-time-converted", text, f"variables.{name}"))
    return doubts


def _without_period(study: Study) -> list[Doubt]:
    """Name models of maxima that say no period beside actions of another period."""
    others = {
        name: v.period
        for name, v in study.variables.items()
        if v.period is not None and v.period != study.reference_period
    }
    combined = {a.name for a in study.combination}
    doubts = []
    for name, variable in study.variables.items():
        if variable.role != "action" or variable.period is not None or name in combined or not others:
            continue
        if not set(variable.families) & set(OF_EXTREMES):
            continue
        other, period = next(iter(others.items()))
        text = (
            f"'{name}' is a model of maxima without a period and counts as for {in_years(study.reference_period)}, "
            f"while '{other}' is given for {in_years(period)}. If '{name}' is for {in_years(period)} as well, say so."
        )
        doubts.append(Doubt("period-not-stated", text, f"variables.{name}"))
    return doubts


def _beyond_limit(study: Study, calibration: Calibration) -> list[Doubt]:
    """Name actions whose design point lies beyond the largest value that the study says can occur."""
    doubts = []
    for name, variable in study.variables.items():
        limit = variable.upper_limit
        if limit is None:
            continue
        for rule, e in zip(study.rules.values(), calibration.proposed.evaluation.per_rule, strict=True):
            if name not in rule.variables:
                continue
            x = e.reliability.x[rule.variables.index(name)]
            beyond = np.flatnonzero((study.situations.weight > 0.0) & (np.nan_to_num(x, nan=-np.inf) > limit))
            if not beyond.size:
                continue
            factor, unit = variable.unit.factor, variable.unit.text
            worst = beyond[int(np.argmax(x[beyond]))]
            text = (
                f"In {beyond.size} of {x.size} situations of rule {rule.name} the design point of '{name}' lies beyond "
                f"its upper limit {limit / factor:.4g} {unit}; in situation {worst + 1} it is {x[worst] / factor:.4g} "
                f"{unit}. A family with an upper end (beta, truncated_normal, gev with a negative shape) would not go "
                "there."
            )
            doubts.append(Doubt("beyond-upper-limit", " ".join(text.split()), f"variables.{name}"))
            break
    return doubts
