"""Design situations: the grid or table, weights, basic variables over situations, and sizing by the design check.

Owns what turns a design rule into one designed member per situation. Knows nothing of factors' optimisation or of
files.
"""

from calibrate.situations.conditional import ConditionalVariable, law_of
from calibrate.situations.grid import Axis, Situations, full_factorial, normalised_weights
from calibrate.situations.sizing import (
    ALREADY_MET,
    NEVER_MET,
    NOT_FINITE,
    SOLVED,
    SizeSolver,
    Sizing,
    sizing_reason,
    solve_size,
)
from calibrate.situations.variables import BasicVariable, is_converted

__all__ = [
    "ALREADY_MET",
    "NEVER_MET",
    "NOT_FINITE",
    "SOLVED",
    "Axis",
    "BasicVariable",
    "ConditionalVariable",
    "Situations",
    "SizeSolver",
    "Sizing",
    "full_factorial",
    "is_converted",
    "law_of",
    "normalised_weights",
    "sizing_reason",
    "solve_size",
]
