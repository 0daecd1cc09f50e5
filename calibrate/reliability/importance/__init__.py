"""Sensitivity and importance measures at the design points: what counts, and by how much beta would change.

Works on found design points; evaluates a limit state once more, and searches nothing.
"""

from calibrate.reliability.importance.elasticities import (
    Elasticities,
    elasticities,
    slopes_through_correlation,
)
from calibrate.reliability.importance.quantities import quantity_slopes
from calibrate.reliability.importance.vectors import (
    OmissionFactors,
    importance_shares,
    importance_vector,
    omission_factors,
)

__all__ = [
    "Elasticities",
    "OmissionFactors",
    "elasticities",
    "importance_shares",
    "importance_vector",
    "omission_factors",
    "quantity_slopes",
    "slopes_through_correlation",
]
