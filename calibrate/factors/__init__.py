"""Factors: from the reliability of every design situation to optimal and proposed factors.

Owns penalties, the optimiser, the search on the lattice of steps and the diagnosis of what situations cannot tell
apart. Knows nothing of study files or reports.
"""

from calibrate.factors.calibration import Calibration, calibrate_factors
from calibrate.factors.identify import Diagnostics
from calibrate.factors.lattice import Candidate, LatticeSearch, levels, search_lattice
from calibrate.factors.model import Alternative, Factor, RuleModel, SystemModel
from calibrate.factors.objective import FactorSet, Goal, factor_set
from calibrate.factors.optimise import Optimum, optimise
from calibrate.factors.penalties import PENALTIES, Penalty, make_penalty
from calibrate.factors.required import required_factor
from calibrate.factors.response import Evaluation, Response, RuleEvaluation
from calibrate.factors.systems import SystemEvaluation
from calibrate.factors.verification import (
    NONE,
    SECOND_ORDER_ONLY,
    Verification,
    VerificationSettings,
    verify,
)

__all__ = [
    "NONE",
    "PENALTIES",
    "SECOND_ORDER_ONLY",
    "Alternative",
    "Calibration",
    "Candidate",
    "Diagnostics",
    "Evaluation",
    "Factor",
    "FactorSet",
    "Goal",
    "LatticeSearch",
    "Optimum",
    "Penalty",
    "Response",
    "RuleEvaluation",
    "RuleModel",
    "SystemEvaluation",
    "SystemModel",
    "Verification",
    "VerificationSettings",
    "calibrate_factors",
    "factor_set",
    "levels",
    "make_penalty",
    "optimise",
    "required_factor",
    "search_lattice",
    "verify",
]
