"""Resistance factor from bias statistics by closed forms, and by FORM for the same inputs.

The closed forms are those of the first calibrations of foundations, retaining structures and steel; FORM shows what
their simplifications cost.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.distributions import distribution
from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.reliability import public_form
from calibrate.resistance.loads import LoadStatistics
from calibrate.resistance.positive_values import Array, positive_values

LoadScatter = Literal["unweighted", "weighted"]

PASSES = 25
"""Newton steps for the factor; lognormal cases take about three."""

CLOSE = 1e-9
"""How near the target FORM must come, in beta."""

FAR = 0.05
"""Relative difference of the factors from which a doubt is recorded: the step to which factors are rounded."""


@dataclass(frozen=True, slots=True)
class BiasStatistics:
    """Measured over predicted of n tests, by moments and by logarithms.

    Attributes
    ----------
    n : int
    mean, sd : float
        Of delta, divisor n - 1.
    log_mean, log_sd : float
        Of ln delta, divisor n - 1. A skew sample gives others than the moments of delta converted.
    """

    n: int
    mean: float
    sd: float
    log_mean: float
    log_sd: float

    @classmethod
    def of(cls, delta: ArrayLike) -> BiasStatistics:
        """Return the statistics of a sample.

        Parameters
        ----------
        delta : array, shape (n,)
            At least two, above zero.

        Raises
        ------
        InputError
            Fewer, or values that are not finite and positive.
        """
        d = positive_values(delta, "delta", 2)
        y = np.log(d)
        parts = (np.mean(d), np.std(d, ddof=1), np.mean(y), np.std(y, ddof=1))
        return cls(d.size, *(float(p) for p in parts))

    @property
    def by_moments(self) -> tuple[float, float]:
        """Bias and coefficient of variation from the moments of delta."""
        return self.mean, self.sd / self.mean

    @property
    def by_logarithms(self) -> tuple[float, float]:
        """Bias and coefficient of variation of the lognormal distribution of the logarithms."""
        return math.exp(self.log_mean + 0.5 * self.log_sd**2), math.sqrt(math.expm1(self.log_sd**2))

    @property
    def log_sd_by_moments(self) -> float:
        """The sd of ln delta that the moments of delta would have."""
        return math.sqrt(math.log1p((self.sd / self.mean) ** 2))


@dataclass(frozen=True, slots=True, eq=False)
class FormFactor:
    """Resistance factors at which FORM meets the target; NaN where it was not found.

    Attributes
    ----------
    phi : array
    alpha_resistance, alpha_dead, alpha_live : array
        Sensitivity factors at the design point, positive for the resistance.
    status : array of str
        ``converged``, or why not.
    """

    phi: Array
    alpha_resistance: Array
    alpha_dead: Array
    alpha_live: Array
    status: NDArray[Any]


@dataclass(frozen=True, slots=True, eq=False)
class MeanValueFactors:
    """The routes beside each other, all of the broadcast shape of the inputs.

    Attributes
    ----------
    lognormal : array
        Closed form for lognormal resistance and load.
    linearised : array
        bias exp(-alpha beta V_R).
    form : FormFactor
    beta : array
        What FORM finds at the factor of the closed form.
    load_cov : array
        V_Q in the closed form.
    doubts : tuple of Doubt
    """

    lognormal: Array
    linearised: Array
    form: FormFactor
    beta: Array
    load_cov: Array
    doubts: tuple[Doubt, ...]


def lognormal_factor(
    bias: ArrayLike,
    cov: ArrayLike,
    target: ArrayLike,
    loads: LoadStatistics,
    load_scatter: LoadScatter = "unweighted",
) -> Array:
    """Return the resistance factor of the closed lognormal form.

    Parameters
    ----------
    bias, cov : array_like
        Of the resistance: mean over nominal, above zero, and coefficient of variation, zero or above.
    target : array_like
        Target reliability index.
    loads : LoadStatistics
    load_scatter : {"unweighted", "weighted"}
        V_Q² = V_D² + V_L² as foundation practice has it, or weighted with the mean loads.

    Raises
    ------
    InputError
        Values out of range, or shapes that do not broadcast.

    Notes
    -----
    phi = bias C_phi sqrt((1 + V_Q²)/(1 + V_R²)) exp(-beta sqrt(ln[(1 + V_R²)(1 + V_Q²)])): R and Q = D + L both
    lognormal, exact for given V_Q.

    References
    ----------
    .. [1] R. M. Barker et al., Manuals for the design of bridge foundations, NCHRP Report 343, 1991 (from memory).
    .. [2] S. G. Paikowsky et al., LRFD for deep foundations, NCHRP Report 507, 2004 (from memory).
    """
    b, v, t = _resistance(bias, cov, target, loads)
    v_q = _load_cov(loads, load_scatter)
    spread = np.sqrt(np.log1p(v * v) + np.log1p(v_q * v_q))
    return np.asarray(
        b * loads.calibration_coefficient * np.sqrt((1.0 + v_q**2) / (1.0 + v**2)) * np.exp(-t * spread)
    )


def linearised_factor(bias: ArrayLike, cov: ArrayLike, target: ArrayLike, alpha: float = 0.55) -> Array:
    """Return bias exp(-alpha beta V_R), in which the load has no part.

    Parameters
    ----------
    bias, cov, target : array_like
        As in `lognormal_factor`.
    alpha : float
        Share of the resistance; 0.55 separates sqrt(V_R² + V_Q²) for steel structures of 1978.

    References
    ----------
    .. [1] M. K. Ravindra, T. V. Galambos, Load and resistance factor design for steel, J. Struct. Div. ASCE 104 (1978)
       1337-1353 (from memory).
    """
    b, v, t = _resistance(bias, cov, target, None)
    if not 0.0 < alpha <= 1.0:
        raise InputError(f"The share alpha of the resistance lies between 0 and 1; got {alpha:g}.")
    return np.asarray(b * np.exp(-alpha * t * v))


def form_factor(
    bias: ArrayLike,
    cov: ArrayLike,
    target: ArrayLike,
    loads: LoadStatistics,
    *,
    resistance: str = "lognormal",
    dead: str = "lognormal",
    live: str = "lognormal",
) -> FormFactor:
    """Return the resistance factor at which FORM gives the target.

    Parameters
    ----------
    bias, cov, target, loads
        As in `lognormal_factor`; the coefficients of variation above zero.
    resistance, dead, live : str
        Families of R, D and L, such as "lognormal", "normal" or "gumbel".

    Raises
    ------
    InputError
        Values out of range, shapes that do not broadcast, an unknown family.

    Notes
    -----
    g = R (gamma_D D_n + gamma_L L_n)/(phi R_n) - D - L. Newton's method in ln phi with the exact slope
    d beta/d ln phi = -R* (dg/dR)/norm of the gradient in standard normal space, from the closed form on, for all
    cases at once.
    """
    b, v, t = _resistance(bias, cov, target, loads)
    shape = np.broadcast_shapes(b.shape, v.shape, t.shape, loads.shape)
    goal = np.broadcast_to(t, shape)
    log_phi = np.log(np.broadcast_to(lognormal_factor(b, v, t, loads, "weighted"), shape))
    variables = _variables(b, v, loads, resistance, dead, live)
    found = None
    for _ in range(PASSES):
        size = np.exp(-log_phi) * loads.factored
        quantities = {"ratio": loads.dead_to_live, "size": size}
        found = public_form("size * R - ratio * D - L", variables, quantities=quantities, start=found)
        miss = found.beta - goal
        open_ = found.converged & (np.abs(miss) > CLOSE)
        if not open_.any():
            break
        slope = -size * found.design_point["R"] / found.gradient_norm
        log_phi = np.where(open_, log_phi - miss / np.where(open_, slope, 1.0), log_phi)
    assert found is not None
    there = found.converged & (np.abs(found.beta - goal) <= CLOSE)
    status = np.where(there | ~found.converged, found.status, "not converged: the target was not met")

    def kept(values: Array) -> Array:
        return np.where(there, values, np.nan)

    alpha = found.sensitivity
    return FormFactor(kept(np.exp(log_phi)), kept(alpha["R"]), kept(alpha["D"]), kept(alpha["L"]), status)


def mean_value_factors(
    bias: ArrayLike,
    cov: ArrayLike,
    target: ArrayLike,
    loads: LoadStatistics,
    *,
    load_scatter: LoadScatter = "unweighted",
    alpha: float = 0.55,
    resistance: str = "lognormal",
    dead: str = "lognormal",
    live: str = "lognormal",
    where: str = "resistance",
) -> MeanValueFactors:
    """Return the closed forms with the FORM answer beside them.

    Parameters
    ----------
    bias, cov, target, loads, load_scatter, alpha, resistance, dead, live
        As in `lognormal_factor`, `linearised_factor` and `form_factor`.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        As there.
    """
    closed = lognormal_factor(bias, cov, target, loads, load_scatter)
    exact = form_factor(bias, cov, target, loads, resistance=resistance, dead=dead, live=live)
    b, v, _ = _resistance(bias, cov, target, loads)
    variables = _variables(b, v, loads, resistance, dead, live)
    quantities = {"ratio": loads.dead_to_live, "size": loads.factored / closed}
    beta = public_form("size * R - ratio * D - L", variables, quantities=quantities).beta
    linear = np.broadcast_to(linearised_factor(bias, cov, target, alpha), closed.shape)
    doubts = _doubts(closed, exact.phi, beta, target, load_scatter, where)
    return MeanValueFactors(closed, linear, exact, beta, _load_cov(loads, load_scatter), doubts)


def _variables(
    b: Array, v: Array, loads: LoadStatistics, resistance: str, dead: str, live: str
) -> dict[str, Any]:
    return {
        "R": distribution(resistance, mean=b, cov=v),
        "D": distribution(dead, mean=loads.dead_bias, cov=loads.dead_cov),
        "L": distribution(live, mean=loads.live_bias, cov=loads.live_cov),
    }


def _resistance(
    bias: ArrayLike, cov: ArrayLike, target: ArrayLike, loads: LoadStatistics | None
) -> tuple[Array, Array, Array]:
    arrays = [np.asarray(a, dtype=np.float64) for a in (bias, cov, target)]
    b, v, t = arrays
    problems = []
    if not np.all(np.isfinite(b) & (b > 0.0)):
        problems.append(Problem(f"The bias of the resistance must be finite and above zero; got {bias!r}."))
    if not np.all(np.isfinite(v) & (v >= 0.0)):
        problems.append(
            Problem(f"The scatter of the resistance must be finite and zero or above; got {cov!r}.")
        )
    if not np.all(np.isfinite(t)):
        problems.append(Problem(f"The target reliability index must be finite; got {target!r}."))
    if problems:
        raise InputError(problems)
    shapes = [a.shape for a in arrays] + ([] if loads is None else [loads.shape])
    try:
        np.broadcast_shapes(*shapes)
    except ValueError:
        text = f"Bias, scatter, target and loads do not broadcast; their shapes are {', '.join(map(str, shapes))}."
        raise InputError(text) from None
    return b, v, t


def _load_cov(loads: LoadStatistics, load_scatter: LoadScatter) -> Array:
    known = get_args(LoadScatter)
    if load_scatter not in known:
        text = f"The scatter of the loads is 'unweighted' or 'weighted'; got {load_scatter!r}."
        raise InputError(Problem(text, suggestion=did_you_mean(str(load_scatter), known)))
    return loads.cov_unweighted if load_scatter == "unweighted" else loads.cov


def _doubts(
    closed: Array, exact: Array, beta: Array, target: ArrayLike, load_scatter: LoadScatter, where: str
) -> tuple[Doubt, ...]:
    with np.errstate(invalid="ignore"):
        difference = np.ravel(exact / closed - 1.0)
    if not np.any(np.abs(difference) > FAR):
        return ()
    at = int(np.nanargmax(np.abs(difference)))
    goal = np.ravel(np.broadcast_to(np.asarray(target, dtype=np.float64), closed.shape))[at]
    why = (
        "it adds the scatter of the loads without weights, and takes their sum as lognormal"
        if load_scatter == "unweighted"
        else "it takes the sum of the loads as lognormal"
    )
    side = "above" if difference[at] > 0.0 else "below"
    text = (
        f"FORM gives a resistance factor {abs(difference[at]):.0%} {side} that of the closed form "
        f"({np.ravel(exact)[at]:.3f} against {np.ravel(closed)[at]:.3f}); at the latter beta is "
        f"{np.ravel(beta)[at]:.2f}, the target {goal:.2f}. The closed form is approximate: {why}."
    )
    return (Doubt("closed-form-differs", text, where),)
