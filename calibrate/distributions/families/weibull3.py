"""The three-parameter Weibull family."""

from __future__ import annotations

from calibrate.distributions.families.weibull import Weibull
from calibrate.distributions.shifted import ShiftedFamily


class Weibull3(ShiftedFamily):
    """Weibull distribution of x - threshold."""

    name = "weibull3"
    base = Weibull()
    parameters = (ShiftedFamily.threshold, *Weibull.parameters)
