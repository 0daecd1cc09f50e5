"""Screening of one sample: what to look at before it is used. Nothing is removed by itself."""

from calibrate.records.screening.findings import Finding
from calibrate.records.screening.kaplan_meier import (
    KaplanMeier,
    PlottingPositions,
    kaplan_meier,
    plotting_positions,
)
from calibrate.records.screening.modes import FailureMode, failure_modes
from calibrate.records.screening.moments import Moments, moments
from calibrate.records.screening.screen import Screening, screen

__all__ = [
    "FailureMode",
    "Finding",
    "KaplanMeier",
    "Moments",
    "PlottingPositions",
    "Screening",
    "failure_modes",
    "kaplan_meier",
    "moments",
    "plotting_positions",
    "screen",
]
