"""Which fractiles the characteristic and the design resistance are, and the factors k for a number of tests.

The design fractile is Phi(-alpha_R beta), 0.12 % for 0.8 and 3.8.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy import special

from calibrate.errors import InputError, did_you_mean
from calibrate.fitting.characteristic import (
    EN_1990_TABLE_D1,
    EN_1990_TABLE_D2,
    prediction_factor,
    prediction_factor_known,
)

K_INFINITY = 1.64
"""Factor of the 5 % fractile as EN 1990 prints it, used where nothing has to be estimated; exactly it is 1.6449."""

SOURCES = ("formula", "table")

_PRINTED_FRACTILE = 0.05
_PRINTED_K_D = 3.04


@dataclass(frozen=True, slots=True)
class Fractiles:
    """What is asked of the characteristic and of the design resistance.

    Parameters
    ----------
    target_beta : float
        Target reliability index, above zero.
    alpha_r : float
        Sensitivity factor of the resistance, above 0 and at most 1.
    fractile : float
        Of the characteristic value, between 0 and 0.5.
    k_infinity : float, optional
        Factor of the characteristic value where nothing has to be estimated; default 1.64 for 5 %, otherwise exact.
    source : {"formula", "table"}
        k_n and k_d,n by the formula of the prediction, or as printed in EN 1990 Tables D1 and D2.

    Raises
    ------
    InputError
        A value is outside its range, or the table is asked for fractiles for which it was not made.
    """

    target_beta: float = 3.8
    alpha_r: float = 0.8
    fractile: float = _PRINTED_FRACTILE
    k_infinity: float = math.nan
    source: str = "formula"

    def __post_init__(self) -> None:
        if not (math.isfinite(self.target_beta) and self.target_beta > 0.0):
            raise InputError(f"The target reliability index is {self.target_beta:g}; it must be above zero.")
        if not 0.0 < self.alpha_r <= 1.0:
            raise InputError(
                f"The sensitivity factor alpha_R is {self.alpha_r:g}; it must be above 0 and at most 1."
            )
        if not 0.0 < self.fractile < 0.5:
            raise InputError(
                f"The characteristic fractile of a resistance is {self.fractile:g}; it must lie between 0 and 0.5, "
                "such as 0.05."
            )
        if self.source not in SOURCES:
            raise InputError(
                f"The source of the fractile factors is '{self.source}'. {did_you_mean(self.source, SOURCES)}"
            )
        if self.source == "table" and not self.as_printed:
            raise InputError(
                "EN 1990 Tables D1 and D2 were made for the 5 % fractile and alpha_R beta = 3.04; asked are "
                f"{100.0 * self.fractile:g} % and {self.k_d_infinity:g}. Use the formula."
            )
        if math.isnan(self.k_infinity):
            exact = -float(special.ndtri(self.fractile))
            object.__setattr__(
                self, "k_infinity", K_INFINITY if self.fractile == _PRINTED_FRACTILE else exact
            )
        elif not (math.isfinite(self.k_infinity) and self.k_infinity > 0.0):
            raise InputError(f"The factor k_inf is {self.k_infinity:g}; it must be above zero.")

    @property
    def k_d_infinity(self) -> float:
        """Factor of the design value where nothing has to be estimated, alpha_R beta."""
        return self.alpha_r * self.target_beta

    @property
    def design_fractile(self) -> float:
        """Probability of a resistance below the design value."""
        return float(special.ndtr(-self.k_d_infinity))

    @property
    def as_printed(self) -> bool:
        """Whether the printed tables were made for these fractiles."""
        return self.fractile == _PRINTED_FRACTILE and math.isclose(
            self.k_d_infinity, _PRINTED_K_D, rel_tol=1e-9
        )


@dataclass(frozen=True, slots=True)
class FractileFactors:
    """Factors k for the evaluation of n tests.

    Attributes
    ----------
    source : {"formula", "table"}
        Where ``k_n`` and ``k_d_n`` come from.
    size : float
        Number of tests behind the level.
    freedom : float
        Degrees of freedom of the scatter; infinite if it is known.
    known : bool
        Whether the scatter is known and not estimated.
    k_infinity, k_n : float
        Of the characteristic value: where nothing is estimated, and for these tests.
    k_d_infinity, k_d_n : float
        Of the design value.
    printed_k_n, printed_k_d_n : float
        EN 1990 Tables D1 and D2 for ``size`` tests, between columns by a straight line in 1/n; NaN where the tables
        do not apply.
    """

    source: str
    size: float
    freedom: float
    known: bool
    k_infinity: float
    k_n: float
    k_d_infinity: float
    k_d_n: float
    printed_k_n: float
    printed_k_d_n: float


def fractile_factors(
    fractiles: Fractiles, size: int, *, freedom: int | None = None, known: bool = False
) -> FractileFactors:
    """Return the factors for a number of tests.

    Parameters
    ----------
    fractiles : Fractiles
    size : int
        Number of tests behind the level, at least 1, or 2 for an estimated scatter without ``freedom``.
    freedom : int, optional
        Degrees of freedom of the estimated scatter; default size - 1.
    known : bool
        The scatter is known.

    Raises
    ------
    InputError
        The printed tables have no value for this, or there are too few tests.

    Notes
    -----
    Formula: t(freedom) sqrt(1 + 1/size) at the fractile, or the normal quantile times that root for a known scatter:
    a further specimen then lies below the limit with the probability of the fractile, on average over samples
    (EN 1990:2002, D.7.2 and D.7.3, from memory). The printed Table D2 belongs to about 0.1 %, not to 0.12 %, and is up
    to 6 % higher.
    """
    printed = (math.nan, math.nan)
    plain = known or freedom is None or freedom == size - 1
    if fractiles.as_printed and plain:
        row = "known" if known else "unknown"
        printed = (_between(EN_1990_TABLE_D1[row], size), _between(EN_1990_TABLE_D2[row], size))
    if fractiles.source == "table":
        if math.isnan(printed[0]) or math.isnan(printed[1]):
            pooled = "" if plain else " whose scatter is pooled with that of others"
            raise InputError(
                f"EN 1990 Tables D1 and D2 have no factors for {size} tests{pooled}. Use the formula."
            )
        k_n, k_d_n = printed
    else:
        k_n, k_d_n = (
            _factor(size, p, freedom, known) for p in (fractiles.fractile, fractiles.design_fractile)
        )
    degrees = math.inf if known else float(size - 1 if freedom is None else freedom)
    return FractileFactors(
        fractiles.source,
        size,
        degrees,
        known,
        fractiles.k_infinity,
        k_n,
        fractiles.k_d_infinity,
        k_d_n,
        *printed,
    )


def _factor(size: int, fractile: float, freedom: int | None, known: bool) -> float:
    if known:
        return float(prediction_factor_known(size, fractile))
    if freedom is None:
        return float(prediction_factor(size, fractile))
    return -float(special.stdtrit(freedom, fractile)) * math.sqrt(1.0 + 1.0 / size)


def _between(row: Mapping[float, float], size: int) -> float:
    """Return the printed factor for a number of tests; NaN below the first column."""
    columns = sorted(row)
    if size < columns[0]:
        return math.nan
    inverse = np.array([0.0 if math.isinf(n) else 1.0 / n for n in columns])
    return float(np.interp(1.0 / size, inverse[::-1], np.array([row[n] for n in columns])[::-1]))
