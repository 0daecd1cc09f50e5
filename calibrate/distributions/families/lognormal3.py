"""The three-parameter lognormal family."""

from __future__ import annotations

from calibrate.distributions.families.lognormal import Lognormal
from calibrate.distributions.shifted import ShiftedFamily


class Lognormal3(ShiftedFamily):
    """Lognormal distribution of x - threshold."""

    name = "lognormal3"
    base = Lognormal()
    parameters = (ShiftedFamily.threshold, *Lognormal.parameters)
