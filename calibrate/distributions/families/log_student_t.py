# ruff: noqa: D102  (the formulas are documented in Family)
"""The family whose logarithm is Student t: a further value of a lognormal variable with estimated parameters."""

from __future__ import annotations

import math
from typing import ClassVar

import numpy as np

from calibrate.distributions.families.student_t import StudentT
from calibrate.distributions.family import Family
from calibrate.distributions.parameter import POSITIVE, Array, Parameter, Values

# exp() of more has no finite value; so far out (|u| > 20 for few degrees of freedom) nothing is decided.
_LONGEST = 650.0


class LogStudentT(Family):
    """ln(x/median)/log_scale is Student t; no moment exists."""

    name = "log_student_t"
    parameters = (
        Parameter("median", "scale", POSITIVE),
        Parameter("log_scale", "shape", POSITIVE),
        Parameter("freedom", "shape", POSITIVE),
    )
    moment_names = ()
    limits = (0.0, math.inf)
    base: ClassVar[StudentT] = StudentT()

    def _inner(self, p: Values) -> Values:
        return np.zeros(()), p[1], p[2]

    def logpdf(self, x: Array, p: Values) -> Array:
        y = np.log(x / p[0])
        return np.where(
            x > 0.0, self.base.logpdf(y, self._inner(p)) - np.log(np.where(x > 0.0, x, 1.0)), -np.inf
        )

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        return self.base.log_tails(np.log(x / p[0]), self._inner(p))

    def x(self, u: Array, p: Values) -> Array:
        return p[0] * np.exp(self._log(u, p))

    def _log(self, u: Array, p: Values) -> Array:
        return np.clip(self.base.x(u, self._inner(p)), -_LONGEST, _LONGEST)

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        y, slope, curvature = self.base.x_curvature(u, self._inner(p))
        x = p[0] * np.exp(np.clip(y, -_LONGEST, _LONGEST))
        return x, x * slope, x * (curvature + slope * slope)

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        _, by_scale, by_freedom = self.base.parameter_slopes(u, self._inner(p))
        ratio = np.exp(self._log(u, p))
        x = p[0] * ratio
        return np.broadcast_to(ratio, x.shape), x * by_scale, x * by_freedom

    def moments(self, p: Values) -> tuple[Array, Array]:
        none = np.full(np.broadcast_shapes(*(q.shape for q in p)), np.inf)
        return none, none
