"""Reliability of many situations at once: limit states, FORM, sensitivities.

Knows distributions and expressions, and nothing of studies, files, units or factors.
"""

from calibrate.reliability.conditional import Conditional
from calibrate.reliability.correlated_pairs import CorrelatedPair, nataf_correlation
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.form import design_points, form
from calibrate.reliability.limit_state import CallableLimitState, ExpressionLimitState, LimitState
from calibrate.reliability.problem import Problem
from calibrate.reliability.public import FormResult, public_form
from calibrate.reliability.result import Reliability
from calibrate.reliability.sensitivities import beta_slope, parameter_slopes, physical_slopes
from calibrate.reliability.settings import REACH, FormSettings

__all__ = [
    "REACH",
    "CallableLimitState",
    "Conditional",
    "CorrelatedPair",
    "Correlation",
    "ExpressionLimitState",
    "FormResult",
    "FormSettings",
    "LimitState",
    "Problem",
    "Reliability",
    "beta_slope",
    "design_points",
    "form",
    "nataf_correlation",
    "parameter_slopes",
    "physical_slopes",
    "public_form",
]
