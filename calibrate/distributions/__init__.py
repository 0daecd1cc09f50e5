"""The families of distributions, their registry, and the maxima and minima of them.

Owns the transforms between physical and standard normal space, exact derivatives, moments, quantiles and tails.
Knows nothing of units, files, samples or limit states.
"""

from calibrate.distributions.distribution import Distribution
from calibrate.distributions.family import Family
from calibrate.distributions.maxima import Extreme, maximum_of, minimum_of, ratio_slope
from calibrate.distributions.mixture import Mixture, mixture
from calibrate.distributions.parameter import Parameter
from calibrate.distributions.registry import distribution, family, family_names

__all__ = [
    "Distribution",
    "Extreme",
    "Family",
    "Mixture",
    "Parameter",
    "distribution",
    "family",
    "family_names",
    "maximum_of",
    "minimum_of",
    "mixture",
    "ratio_slope",
]
