"""The scatter of the model alone: what is left of the observed scatter without that of measurement and material.

The observed ratio is the model factor times independent lognormal factors of known scatter, so that logarithmic
variances subtract: 1 + V_theta² = (1 + V_obs²)/prod(1 + V_i²), to first order V_theta² = V_obs² - sum V_i².
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from calibrate.errors import Doubt, InputError, Problem
from calibrate.resistance.model_factor import WHERE

LEVEL = 0.9
"""Confidence of two-sided intervals."""

REPLICATES = 20_000


@dataclass(frozen=True, slots=True, eq=False)
class ScatterSeparation:
    """Scatter of the model, known scatter taken out. Squares keep their sign; nothing is clipped.

    Attributes
    ----------
    observed_cov : float
        V_obs.
    freedom : float
        Of the observed log-variance.
    known : mapping of str to float
        V_i by name.
    known_cov : float
        Of all known parts together, sqrt(prod(1 + V_i²) - 1).
    cov_squared : float
        V_theta² of the lognormal product; negative where the known parts exceed what was observed.
    cov_squared_first_order : float
        V_obs² - sum V_i².
    log_variance : float
        ln(1 + V_theta²).
    cov : float
        V_theta; NaN where its square is negative.
    interval : (float, float)
        Of ``cov_squared`` at ``level``; its ends may be negative.
    level : float
    probability_negative : float
        Share of the simulated true values below zero: the probability that the known parts exceed the whole.
    replicates : int
    doubts : tuple of Doubt
    """

    observed_cov: float
    freedom: float
    known: Mapping[str, float]
    known_cov: float
    cov_squared: float
    cov_squared_first_order: float
    log_variance: float
    cov: float
    interval: tuple[float, float]
    level: float
    probability_negative: float
    replicates: int
    doubts: tuple[Doubt, ...]


def separate_scatter(
    observed_cov: float,
    freedom: float,
    known: Mapping[str, float],
    rng: np.random.Generator,
    *,
    known_freedom: Mapping[str, float] | None = None,
    level: float = LEVEL,
    replicates: int = REPLICATES,
    where: str = WHERE,
) -> ScatterSeparation:
    """Take known scatter out of the observed one.

    Parameters
    ----------
    observed_cov : float
        V_delta of the tests, sqrt(exp(s²) - 1).
    freedom : float
        Degrees of freedom of s², n - 1 for one series.
    known : mapping of str to float
        Coefficients of variation, at least 0, of the parts that are in the observed scatter and not in the model's:
        error of measurement, material and dimensions where the prediction was not given the specimen's own.
    rng : numpy.random.Generator
    known_freedom : mapping of str to float, optional
        Degrees of freedom of known parts that were estimated themselves; the others count as exact.
    level : float
        Confidence of the interval.
    replicates : int
        Simulated values, at least 100.
    where : str
        Place of the doubts.

    Raises
    ------
    InputError
        A value is outside its range, or degrees of freedom belong to no known part.

    Notes
    -----
    The true log-variance behind s² is simulated as freedom s²/chi²(freedom), the distribution that s² as a sampling
    statistic leaves for it (flat prior of its logarithm), and likewise for known parts with degrees of freedom.
    The interval has the stated confidence exactly, but for the draw, where the observed variance alone is uncertain. A
    model has no negative scatter: a large ``probability_negative`` says that a known part is stated too large, or is
    not in the tests at all.
    """
    degrees = dict(known_freedom or {})
    _check(observed_cov, freedom, known, degrees, level, replicates)
    observed = math.log1p(observed_cov**2)
    parts = {name: math.log1p(v**2) for name, v in known.items()}
    total = math.fsum(parts.values())
    log_variance = observed - total
    drawn = observed * freedom / rng.chisquare(freedom, replicates)
    for name in sorted(parts):
        scale = degrees[name] / rng.chisquare(degrees[name], replicates) if name in degrees else 1.0
        drawn = drawn - parts[name] * scale
    tail = 0.5 * (1.0 - level)
    low, high = (float(v) for v in np.expm1(np.quantile(drawn, [tail, 1.0 - tail])))
    negative = float(np.mean(drawn < 0.0))
    squared = math.expm1(log_variance)
    known_cov = math.sqrt(math.expm1(total))
    return ScatterSeparation(
        observed_cov=observed_cov,
        freedom=freedom,
        known=MappingProxyType(dict(known)),
        known_cov=known_cov,
        cov_squared=squared,
        cov_squared_first_order=observed_cov**2 - math.fsum(v**2 for v in known.values()),
        log_variance=log_variance,
        cov=math.sqrt(squared) if squared >= 0.0 else math.nan,
        interval=(low, high),
        level=level,
        probability_negative=negative,
        replicates=replicates,
        doubts=tuple(_doubts(observed_cov, known_cov, squared, (low, high), negative, where)),
    )


def _check(
    observed_cov: float,
    freedom: float,
    known: Mapping[str, float],
    degrees: Mapping[str, float],
    level: float,
    replicates: int,
) -> None:
    problems = []
    if not (math.isfinite(observed_cov) and observed_cov > 0.0):
        problems.append(
            Problem(f"The observed coefficient of variation is {observed_cov:g}; it must be above zero.")
        )
    if not (math.isfinite(freedom) and freedom >= 1.0):
        problems.append(
            Problem(f"The degrees of freedom of the observed scatter are {freedom:g}; at least 1 is needed.")
        )
    problems += [
        Problem(f"The known coefficient of variation of '{name}' is {v:g}; it must be at least 0.")
        for name, v in known.items()
        if not (math.isfinite(v) and v >= 0.0)
    ]
    for name, v in degrees.items():
        if name not in known:
            problems.append(Problem(f"Degrees of freedom are given for '{name}', which is no known part."))
        elif not (math.isfinite(v) and v >= 1.0):
            problems.append(Problem(f"The degrees of freedom of '{name}' are {v:g}; at least 1 is needed."))
    if not 0.0 < level < 1.0:
        problems.append(Problem(f"The confidence of the interval is {level:g}; it must lie between 0 and 1."))
    if replicates < 100:
        problems.append(
            Problem(f"{replicates} simulated values are too few for an interval; 100 are the least.")
        )
    if problems:
        raise InputError(problems)


def _doubts(
    observed: float,
    known: float,
    squared: float,
    interval: tuple[float, float],
    negative: float,
    where: str,
) -> list[Doubt]:
    if squared < 0.0:
        message = (
            f"The known parts (V = {known:.3g}) exceed the observed scatter (V = {observed:.3g}), so that V_theta² "
            f"would be {squared:.3g}; the true one is below zero with a probability of {negative:.2g}. No model has "
            "negative scatter: a known part is stated too large or is not in these tests, or chance made the tests "
            f"agree too well. {_upper(interval)}"
        )
        return [Doubt("negative-model-scatter", message, where)]
    if interval[0] < 0.0:
        message = (
            f"The tests do not show that the model scatters at all: V_theta = {math.sqrt(squared):.3g}, but the "
            f"interval of its square reaches below zero ({negative:.2g} of it). {_upper(interval)}"
        )
        return [Doubt("model-scatter-not-shown", message, where)]
    return []


def _upper(interval: tuple[float, float]) -> str:
    if interval[1] <= 0.0:
        return "The upper end of the interval is below zero as well: look for the mistake before going on."
    return f"The upper end of the interval is V_theta = {math.sqrt(interval[1]):.3g}."
