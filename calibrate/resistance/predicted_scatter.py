"""Scatter of the predicted resistance from that of the basic variables: V_rt of EN 1990 Annex D.8."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from calibrate.errors import InputError, Problem, did_you_mean

PROPAGATIONS = ("sum", "lognormal_product", "gradient")


@dataclass(frozen=True, slots=True, eq=False)
class PredictedScatter:
    """Coefficient of variation of the predicted resistance by every way that the data allow.

    Attributes
    ----------
    covs : mapping of str to float
        Coefficients of variation of the basic variables.
    gradient : mapping of str to float
        (dr/dx_i) sd_i/r of every basic variable at the means; empty if none was given.
    from_sum : float
        sqrt(sum V_i²): the first order of a product of the variables.
    from_lognormal_product : float
        sqrt(prod(1 + V_i²) - 1): exact for a product of independent variables.
    from_gradient : float
        sqrt(sum gradient_i²): the first order of any function; NaN without a gradient.
    propagation : str
        Which of them is used, one of `PROPAGATIONS`.
    """

    covs: Mapping[str, float]
    gradient: Mapping[str, float]
    from_sum: float
    from_lognormal_product: float
    from_gradient: float
    propagation: str

    @property
    def v_rt(self) -> float:
        """Coefficient of variation of the predicted resistance that is used."""
        return {
            "sum": self.from_sum,
            "lognormal_product": self.from_lognormal_product,
            "gradient": self.from_gradient,
        }[self.propagation]

    def v_r(self, v_delta: float) -> float:
        """Return the coefficient of variation of the resistance, error included.

        sqrt((1 + V_delta²)(1 + V²) - 1) with prod(1 + V_i²) for (1 + V²) of a product, in ``sum`` too (EN 1990:2002,
        D.8.2.2.7, from memory), and 1 + V_rt² for a gradient.
        """
        own = self.from_gradient if self.propagation == "gradient" else self.from_lognormal_product
        return math.sqrt(math.expm1(math.log1p(v_delta**2) + math.log1p(own**2)))


def predicted_scatter(
    covs: Mapping[str, float],
    gradient: Mapping[str, float] | None = None,
    propagation: str | None = None,
) -> PredictedScatter:
    """Return V_rt from the scatter of independent basic variables.

    Parameters
    ----------
    covs : mapping of str to float
        Coefficients of variation, at least 0, of the basic variables. May be empty if there is a gradient.
    gradient : mapping of str to float, optional
        (dr/dx_i) sd_i/r at the means of every basic variable, of either sign. A product of powers has exponent times
        cov.
    propagation : str, optional
        One of `PROPAGATIONS`. Default ``gradient`` where one is given, otherwise ``sum``.

    Raises
    ------
    InputError
        A value is not finite, a cov is negative, or the propagation needs what was not given.
    """
    problems = [
        Problem(
            f"The coefficient of variation of '{name}' is {float(v):g}; it must be a finite number of at least 0."
        )
        for name, v in covs.items()
        if not (math.isfinite(v) and v >= 0.0)
    ]
    slopes = dict(gradient or {})
    problems += [
        Problem(f"The gradient by '{name}' is {float(v):g}; it must be a finite number.")
        for name, v in slopes.items()
        if not math.isfinite(v)
    ]
    way = propagation or ("gradient" if slopes else "sum")
    if way not in PROPAGATIONS:
        problems.append(Problem(f"The propagation is '{way}'.", suggestion=did_you_mean(way, PROPAGATIONS)))
    elif way == "gradient" and not slopes:
        problems.append(Problem("The propagation 'gradient' needs the gradient of the resistance function."))
    elif way != "gradient" and slopes and not covs:
        problems.append(
            Problem(f"The propagation '{way}' needs the coefficients of variation of the variables.")
        )
    if problems:
        raise InputError(problems)
    squares = [float(v) ** 2 for v in covs.values()]
    return PredictedScatter(
        covs=MappingProxyType({k: float(v) for k, v in covs.items()}),
        gradient=MappingProxyType({k: float(v) for k, v in slopes.items()}),
        from_sum=math.sqrt(math.fsum(squares)),
        from_lognormal_product=math.sqrt(math.expm1(math.fsum(math.log1p(v) for v in squares))),
        from_gradient=math.hypot(*slopes.values()) if slopes else math.nan,
        propagation=way,
    )
