"""All checks, from the plainest upwards."""

from __future__ import annotations

from calibrate.study.ladder import beyond_form, calibration, dependence, evidence, form_cases, periods
from calibrate.study.ladder.check import Check, LadderRow

CHECKS: tuple[Check, ...] = (
    *form_cases.CHECKS,
    *dependence.CHECKS,
    *beyond_form.CHECKS,
    *periods.CHECKS,
    *evidence.CHECKS,
    *calibration.CHECKS,
)


def run_ladder() -> tuple[LadderRow, ...]:
    """Make every check, in order; takes some tenths of a second, and gives the same figures each time."""
    return tuple(check.row() for check in CHECKS)
