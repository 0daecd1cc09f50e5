"""Actions: from load records to the distribution of the maximum of a period, and what follows from periods and sizes.

Owns the models of block maxima, pooled stations and threshold exceedances, return levels, reference periods,
combinations of variable actions, actions over sites, and the weakest link that does for strengths what a period does
for actions. Knows nothing of files, units or studies; times are years.
"""

from calibrate.actions.accompanying import accompanying_part
from calibrate.actions.combination import (
    Action,
    Alternative,
    combination_doubts,
    repetition_alternatives,
    turkstra,
)
from calibrate.actions.fbc import CombinedMaximum, fbc_maximum, fbc_maximum_cdf
from calibrate.actions.intermittent import Intermittent, intermittent
from calibrate.actions.periods import (
    OtherPeriod,
    beta_of_one_period,
    beta_of_period,
    other_period,
    over_period,
    require_same_period,
)
from calibrate.actions.size_effect import size_effect, size_factor, stress_integral
from calibrate.actions.territories import (
    SiteReliability,
    Territory,
    over_sites,
    reliability_over_sites,
    territory,
)

__all__ = [
    "Action",
    "Alternative",
    "CombinedMaximum",
    "Intermittent",
    "OtherPeriod",
    "SiteReliability",
    "Territory",
    "accompanying_part",
    "beta_of_one_period",
    "beta_of_period",
    "combination_doubts",
    "fbc_maximum",
    "fbc_maximum_cdf",
    "intermittent",
    "other_period",
    "over_period",
    "over_sites",
    "reliability_over_sites",
    "repetition_alternatives",
    "require_same_period",
    "size_effect",
    "size_factor",
    "stress_integral",
    "territory",
    "turkstra",
]
