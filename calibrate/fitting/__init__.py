"""Fitting: a sample and a family become a fit, several families a comparison; all in the unit of the sample.

Owns the likelihoods, the method of moments, standard errors, AICc and the Anderson-Darling distance.
Knows nothing of files, units or studies.
"""

from calibrate.fitting.fits import compare, fit, fit_family
from calibrate.fitting.goodness import anderson_darling, plotting_positions
from calibrate.fitting.registry import FITTABLE
from calibrate.fitting.result import Comparison, Fit

__all__ = [
    "FITTABLE",
    "Comparison",
    "Fit",
    "anderson_darling",
    "compare",
    "fit",
    "fit_family",
    "plotting_positions",
]
