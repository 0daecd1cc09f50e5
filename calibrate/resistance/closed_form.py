"""Characteristic and design resistance of a lognormal resistance in closed form."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import InputError
from calibrate.fitting.characteristic import prediction_factor
from calibrate.resistance.positive_values import Array, inside_unit, positive_number


@dataclass(frozen=True, slots=True)
class FractileFactor:
    """How many standard deviations a fractile lies below the mean of ln R.

    Attributes
    ----------
    known : float
        For scatter that is known, such as that of basic variables (k_inf, k_d,inf).
    estimated : callable
        For scatter estimated from n tests (k_n, k_d,n); n need not be whole, as an effective number is not.
    """

    known: float
    estimated: Callable[[float], float]

    @classmethod
    def constant(cls, k: float) -> FractileFactor:
        """Return k whatever the number of tests: no allowance for statistical uncertainty."""
        return cls(k, lambda _: k)

    @classmethod
    def predictive(cls, fractile: float) -> FractileFactor:
        """Return the predictive factor of a lower fractile, t(n - 1) sqrt(1 + 1/n) (EN 1990:2002, D.7).

        Raises
        ------
        InputError
            A fractile that does not lie between 0 and 0.5.
        """
        from scipy.special import ndtri

        inside_unit(fractile, "The fractile")
        if fractile >= 0.5:
            raise InputError(f"A lower fractile lies below 0.5; got {fractile:g}.")
        return cls(float(-ndtri(fractile)), lambda n: float(prediction_factor(n, fractile)))


CHARACTERISTIC = FractileFactor.constant(1.645)
"""The 5 % fractile of a population that is known."""

DESIGN = FractileFactor.constant(3.04)
"""alpha_R beta = 0.8 x 3.8 of EN 1990:2002, Annex C, rounded as there; the population is known."""


@dataclass(frozen=True, slots=True, eq=False)
class ClosedForm:
    """Fractiles of R over prediction, and their ratio; by subset where there are subsets.

    Attributes
    ----------
    characteristic, design : array, shape (subsets,)
        r_k and r_d over the prediction; the latter is the resistance factor on the prediction.
    partial_factor : float
        r_k over r_d, the same for all subsets.
    log_sd : float
        Q of the resistance: of the model factor and of the basic variables together.
    """

    characteristic: Array
    design: Array
    partial_factor: float
    log_sd: float


def closed_form(
    log_mean: ArrayLike,
    log_sd: float,
    n: float,
    characteristic: FractileFactor,
    design: FractileFactor,
    other_log_sd: float = 0.0,
) -> ClosedForm:
    """Return the fractiles of a lognormal resistance.

    Parameters
    ----------
    log_mean : array_like, shape (subsets,)
        Mean of ln(R/prediction).
    log_sd : float
        Scatter of the logarithm of the model factor, Q_delta, estimated.
    n : float
        Number of tests, or effective number, from which it was estimated.
    characteristic, design : FractileFactor
    other_log_sd : float
        Scatter of the logarithm of the prediction in use, Q_rt, known; 0 leaves it to the rest of the design.

    Notes
    -----
    ln(r/prediction) = log_mean - (k_inf Q_rt² + k_n Q_delta²)/Q with Q² = Q_rt² + Q_delta²: the weights alpha = Q_i/Q
    of EN 1990:2002, D.8.3, with the mean of the logarithm in place of b exp(-Q²/2).
    """
    total = math.hypot(log_sd, other_log_sd)

    def distance(k: FractileFactor) -> float:
        if total == 0.0:
            return 0.0
        return (k.known * other_log_sd**2 + k.estimated(n) * log_sd**2) / total

    mean = np.atleast_1d(np.asarray(log_mean, dtype=np.float64))
    down_k, down_d = distance(characteristic), distance(design)
    return ClosedForm(np.exp(mean - down_k), np.exp(mean - down_d), math.exp(down_d - down_k), total)


def partial_factor_lognormal(
    v_resistance: ArrayLike,
    v_material: ArrayLike,
    *,
    conversion: float = 1.0,
    design: float = 3.04,
    characteristic: float = 1.645,
) -> Array:
    """Return conversion exp(k_d V_R - k_k V_f): the factor on a characteristic strength in a resistance.

    Parameters
    ----------
    v_resistance : array_like
        Coefficient of variation of the resistance: model, geometry and strength together.
    v_material : array_like
        Coefficient of variation of the strength whose characteristic value is divided by the factor.
    conversion : float
        Further factor between specimens and structure, above zero.
    design : float
        alpha_R beta.
    characteristic : float
        Distance of the characteristic value in standard deviations.

    Raises
    ------
    InputError
        A coefficient of variation below zero, a conversion that is not above zero.

    Notes
    -----
    The coefficient of variation stands for the sd of the logarithm, and means equal medians, as the documents have it.

    References
    ----------
    .. [1] fib Bulletin 80, Partial factor methods for existing concrete structures, 2016 (from memory).
    .. [2] European Concrete Platform, Eurocode 2 Commentary, 2008 (from memory).
    """
    v_r, v_f = _scatter(v_resistance), _scatter(v_material)
    return positive_number(conversion, "The conversion factor") * np.exp(design * v_r - characteristic * v_f)


def partial_factor_normal(
    v_resistance: ArrayLike, v_material: ArrayLike, *, design: float = 3.04, characteristic: float = 1.645
) -> Array:
    """Return (1 - k_k V_f)/(1 - k_d V_R), the same for normal variables.

    Raises
    ------
    InputError
        A coefficient of variation below zero, or so large that a fractile is not above zero.
    """
    v_r, v_f = _scatter(v_resistance), _scatter(v_material)
    above, below = 1.0 - characteristic * v_f, 1.0 - design * v_r
    if np.any(above <= 0.0) or np.any(below <= 0.0):
        raise InputError(
            "A normal resistance with so much scatter has a fractile below zero; take it as lognormal."
        )
    return np.asarray(above / below)


def combined_cov(*parts: ArrayLike) -> Array:
    """Return the root of the sum of squares of coefficients of variation, the first-order one of a product."""
    total = sum((_scatter(p) ** 2 for p in parts), start=np.asarray(0.0))
    return np.asarray(np.sqrt(total))


def _scatter(v: ArrayLike) -> Array:
    array = np.asarray(v, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array >= 0.0)):
        raise InputError(f"A coefficient of variation is finite and not below zero; got {v!r}.")
    return array
