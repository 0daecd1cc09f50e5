"""Beta for further periods: converted from the index itself, and recomputed with converted actions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.periods import beta_of_period
from calibrate.errors import Doubt
from calibrate.factors import Calibration, Response
from calibrate.study.assemble import basic_variables, rule_models, system_models
from calibrate.study.fits import RecordModel
from calibrate.study.model import Study

Array = NDArray[np.float64]

OF_PERMANENT_ACTIONS = "normal"
"""The family of permanent actions, which stay as they are for every period (common practice, no source)."""

WHY = (
    "The first takes all failures of different intervals as independent; the second repeats only the actions that "
    "have a period and keeps resistance, model uncertainty and what is constant in time as they are, so that failures "
    "go together and β falls less."
)


@dataclass(frozen=True, slots=True, eq=False)
class PeriodBeta:
    """Beta of every row for another period, with the proposed factors.

    Attributes
    ----------
    period : float
        Years.
    converted : array (N,)
        From beta of the reference period by independent intervals.
    direct : array (N,)
        By FORM with the actions of that period.
    """

    period: float
    converted: Array
    direct: Array


def other_periods(
    study: Study,
    fitted: Mapping[str, RecordModel],
    calibration: Calibration,
    correction: Array | None = None,
    workers: int = 1,
) -> tuple[PeriodBeta, ...]:
    """Return beta for the periods that the study asks for, in its order.

    ``correction`` is what verification added to the index of FORM in every row; it is taken over.
    """
    found = []
    evaluation = calibration.proposed.evaluation
    for years in study.other_periods:
        response = Response(
            rule_models(study, basic_variables(study, fitted, years), years),
            study.factors,
            workers=workers,
            systems=system_models(study),
        )
        if correction is not None:
            response = response.corrected(correction)
        direct = response(evaluation.gamma, evaluation).beta
        intervals = [max(t / study.independence, 1.0) for t in (years, study.reference_period)]
        converted = beta_of_period(evaluation.beta, intervals[0] / intervals[1])
        found.append(PeriodBeta(years, np.asarray(converted), direct))
    return tuple(found)


def period_doubts(study: Study, found: tuple[PeriodBeta, ...]) -> list[Doubt]:
    """Name actions that cannot follow another period because they have none."""
    if not found:
        return []
    combined = {action.name for action in study.combination}
    fixed = [
        name
        for name, variable in study.variables.items()
        if variable.role == "action"
        and name not in combined
        and variable.families != (OF_PERMANENT_ACTIONS,)
        and (variable.period is None or not variable.converted)
    ]
    if not fixed:
        return []
    text = (
        f"For other periods {', '.join(fixed)} stayed as given: a model without a period, or one that is not "
        "converted, does not say what its maximum over another period is."
    )
    return [Doubt("period-not-followed", text, "study.other_periods")]
