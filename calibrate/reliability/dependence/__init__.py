"""Dependence between variables: correlation of physical values carried over to standard normal space.

Knows distributions and matrices, and nothing of limit states, studies or records.
"""

from calibrate.reliability.dependence.matrix import CorrelationFactor, correlation_factor
from calibrate.reliability.dependence.nataf import Equivalent, equivalent_correlation
from calibrate.reliability.dependence.slopes import EquivalentSlopes, Margin, equivalent_slopes

__all__ = [
    "CorrelationFactor",
    "Equivalent",
    "EquivalentSlopes",
    "Margin",
    "correlation_factor",
    "equivalent_correlation",
    "equivalent_slopes",
]
