"""Characteristic and design resistance from component tests, step by step as in EN 1990:2002, D.8 (from memory)."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import Doubt, InputError
from calibrate.resistance.component_tests import ComponentTests
from calibrate.resistance.error_scatter import ErrorScatter, cluster_doubts, error_scatter
from calibrate.resistance.fractile_factors import FractileFactors, Fractiles, fractile_factors
from calibrate.resistance.model_factor import WHERE, CensoredModelFactor, ModelFactor
from calibrate.resistance.predicted_scatter import PredictedScatter, predicted_scatter

Array = NDArray[np.float64]

FEW = 10
"""Number of tests below which a doubt is recorded."""


@dataclass(frozen=True, slots=True, eq=False)
class Resistances:
    """Characteristic and design resistance over g_rt(X_m), the prediction at mean properties, and their factors.

    Attributes
    ----------
    r_k, r_d : float
    gamma_m : float
        r_k/r_d.
    gamma_m_star : array
        r_n/r_d with the prediction r_n at nominal properties, in the shape of the ratios given; NaN without one.
    """

    r_k: float
    r_d: float
    gamma_m: float
    gamma_m_star: Array


@dataclass(frozen=True, slots=True, eq=False)
class AnnexD8:
    """The evaluation of D.8 with all its intermediate values.

    Attributes
    ----------
    model : ModelFactor or CensoredModelFactor
        Steps 2 to 4: b, errors and their scatter from the tests.
    error : ErrorScatter
        What of it enters here; differs from ``model`` for pooled or known scatter and for the tail.
    predicted : PredictedScatter
        Step 6: V_rt from the basic variables by every way.
    v_rt, v_delta, v_r : float
        Coefficients of variation of the prediction, of the error, and of the resistance.
    v_r_first_order : float
        sqrt(V_rt² + V_delta²), which D.8 allows for small ones; shown only.
    q_rt, q_delta, q : float
        sqrt(ln(1 + V²)) of each.
    alpha_rt, alpha_delta : float
        q_rt/q and q_delta/q. Their squares do not quite add up to one with the propagation ``sum``, in which V_rt
        is of first order and V_r is not.
    factors : FractileFactors
    small, large : Resistances
        Step 7 and D.8.3 with k_n for the error, and with the formulas for many tests.
    many : bool
        Whether ``large`` holds: more than 100 tests.
    nominal : array
        g_rt at nominal over g_rt at mean properties, as given; NaN without one.
    doubts : tuple of Doubt
    """

    model: ModelFactor | CensoredModelFactor
    error: ErrorScatter
    predicted: PredictedScatter
    v_rt: float
    v_delta: float
    v_r: float
    v_r_first_order: float
    q_rt: float
    q_delta: float
    q: float
    alpha_rt: float
    alpha_delta: float
    factors: FractileFactors
    small: Resistances
    large: Resistances
    many: bool
    nominal: Array
    doubts: tuple[Doubt, ...]

    @property
    def result(self) -> Resistances:
        """The resistances that hold for this number of tests."""
        return self.large if self.many else self.small

    @property
    def b(self) -> float:
        """Mean correction."""
        return self.error.b

    @property
    def r_k(self) -> float:
        """Characteristic resistance over g_rt(X_m)."""
        return self.result.r_k

    @property
    def r_d(self) -> float:
        """Design resistance over g_rt(X_m)."""
        return self.result.r_d

    @property
    def gamma_m(self) -> float:
        """Factor r_k/r_d."""
        return self.result.gamma_m

    @property
    def gamma_m_star(self) -> Array:
        """Factor r_n/r_d against nominal properties."""
        return self.result.gamma_m_star


@dataclass(frozen=True, slots=True, eq=False)
class BasicVariables:
    """What D.8 needs to know apart from the tests.

    Parameters
    ----------
    covs, gradient, propagation
        As in `calibrate.resistance.predicted_scatter.predicted_scatter`.
    nominal : array_like, optional
        g_rt(nominal properties)/g_rt(mean properties), above zero, of any shape, for gamma_M*.
    """

    covs: Mapping[str, float]
    gradient: Mapping[str, float] | None = None
    propagation: str | None = None
    nominal: ArrayLike | None = None

    def checked_nominal(self) -> Array:
        """Return the ratio as an array, NaN of shape () without one."""
        if self.nominal is None:
            return np.asarray(math.nan)
        ratio = np.asarray(self.nominal, dtype=np.float64)
        wrong = ~(np.isfinite(ratio) & (ratio > 0.0))
        if wrong.any():
            raise InputError(
                f"The ratio of nominal to mean resistance is {float(ratio[wrong].flat[0]):g}; it must be above zero."
            )
        return ratio


def annex_d8(
    tests: ComponentTests,
    covs: Mapping[str, float],
    *,
    gradient: Mapping[str, float] | None = None,
    propagation: str | None = None,
    nominal: ArrayLike | None = None,
    fractiles: Fractiles | None = None,
    known_v_delta: float | None = None,
    survivors: str = "refuse",
    where: str = WHERE,
) -> AnnexD8:
    """Evaluate a resistance model from tests as in D.8.

    Parameters
    ----------
    tests : ComponentTests
        Predictions from measured properties.
    covs : mapping of str to float
        Coefficients of variation of the basic variables in the structures to be designed, independent of each other.
    gradient : mapping of str to float, optional
        (dr/dx_i) sd_i/r at the means, for functions that are no product; from where in their range is the caller's
        choice, since it varies over it.
    propagation : {"sum", "lognormal_product", "gradient"}, optional
        Way to V_rt; default ``gradient`` where one is given, otherwise ``sum`` as D.8 writes it.
    nominal : array_like, optional
        g_rt(nominal properties)/g_rt(mean properties).
    fractiles : Fractiles, optional
        Default: 5 %, beta = 3.8, alpha_R = 0.8, factors by formula.
    known_v_delta : float, optional
        V_delta known from elsewhere; b still comes from the tests.
    survivors : {"refuse", "censored", "as_failed", "leave_out"}
        What becomes of tests that did not fail: nothing is computed; b and V_delta of largest likelihood; the bound
        counts as the resistance; the test is left out. Anything but the first leaves a doubt.
    where : str
        Place of the doubts.

    Raises
    ------
    InputError
        Something is outside its range, there are too few tests, or they have no scatter.

    Notes
    -----
    r_k/g_rt(X_m) = b exp(-k_inf alpha_rt Q_rt - k_n alpha_delta Q_delta - Q²/2), with k_d,inf and k_d,n for r_d; for
    more than 100 tests b exp(-k_inf Q - Q²/2) (EN 1990:2002, D.8.2 and D.8.3, from memory).

    Without scatter of the basic variables a further specimen falls below r_d with the probability Phi(-alpha_R beta),
    on average over series of tests. With it, no exact statement holds, and alpha_delta k_d,n is more than the
    uncertainty of the error asks for: with 12 tests, V_delta = 0.08 and V_rt = 0.06, the simulated average was seven
    tenths of that probability.

    With ``censored`` the variance of the likelihood is multiplied by m/(m - 1), m being the number of failures, and m
    is the number of tests in k_n: survivors say something of the level, so that this is on the safe side.
    """
    model, error, doubts = error_scatter(tests, survivors, where)
    if known_v_delta is not None:
        if not (math.isfinite(known_v_delta) and known_v_delta > 0.0):
            raise InputError(f"The known V_delta is {known_v_delta:g}; it must be above zero.")
        error = ErrorScatter(error.b, known_v_delta, error.size, known=True)
    variables = BasicVariables(covs, gradient, propagation, nominal)
    return evaluated(
        model, error, variables, fractiles or Fractiles(), (*doubts, *cluster_doubts(tests, where)), where
    )


def evaluated(
    model: ModelFactor | CensoredModelFactor,
    error: ErrorScatter,
    variables: BasicVariables,
    fractiles: Fractiles,
    doubts: tuple[Doubt, ...],
    where: str,
) -> AnnexD8:
    """Return the resistances for a mean correction and a scatter of the error, however found."""
    nominal = variables.checked_nominal()
    predicted = predicted_scatter(variables.covs, variables.gradient, variables.propagation)
    v_rt, v_delta = predicted.v_rt, error.v_delta
    v_r = predicted.v_r(v_delta)
    q_rt, q_delta, q = (math.sqrt(math.log1p(v**2)) for v in (v_rt, v_delta, v_r))
    factors = fractile_factors(fractiles, error.size, freedom=error.freedom, known=error.known)

    def lowered(predicted_part: float, error_part: float) -> float:
        moved = (predicted_part * q_rt**2 + error_part * q_delta**2) / q
        return error.b * math.exp(-moved - 0.5 * q**2)

    def large(k: float) -> float:
        return error.b * math.exp(-k * q - 0.5 * q**2)

    return AnnexD8(
        model=model,
        error=error,
        predicted=predicted,
        v_rt=v_rt,
        v_delta=v_delta,
        v_r=v_r,
        v_r_first_order=math.hypot(v_rt, v_delta),
        q_rt=q_rt,
        q_delta=q_delta,
        q=q,
        alpha_rt=q_rt / q,
        alpha_delta=q_delta / q,
        factors=factors,
        small=_resistances(
            lowered(factors.k_infinity, factors.k_n), lowered(factors.k_d_infinity, factors.k_d_n), nominal
        ),
        large=_resistances(large(factors.k_infinity), large(factors.k_d_infinity), nominal),
        many=error.many,
        nominal=nominal,
        doubts=(*model.doubts, *doubts, *_doubts(error, v_rt, where)),
    )


def _resistances(r_k: float, r_d: float, nominal: Array) -> Resistances:
    return Resistances(r_k, r_d, r_k / r_d, np.asarray(nominal / r_d))


def _doubts(error: ErrorScatter, v_rt: float, where: str) -> list[Doubt]:
    doubts = []
    if error.size < FEW:
        message = f"The level of the resistance rests on {error.size} tests."
        doubts.append(Doubt("few-tests", message, where))
    if v_rt == 0.0:
        message = (
            "The basic variables have no scatter, so that the resistance has that of the tested specimens alone; the "
            "material and the dimensions in the structures will scatter more."
        )
        doubts.append(Doubt("no-basic-scatter", message, where))
    return doubts
