"""Design value straight from a sample of resistances or properties: EN 1990:2002, Annex D.7 (from memory).

Plain: mean and sd of the sample with the printed or the computed k_d,n. Bayesian: the fractile of the predictive
distribution of a further specimen, with prior knowledge of mean and scatter or without; without any it is the plain
value with the computed factor.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.fitting.characteristic import characteristic_value
from calibrate.fitting.tools import logs
from calibrate.resistance.fractile_factors import FractileFactors, Fractiles, fractile_factors
from calibrate.resistance.model_factor import WHERE

Array = NDArray[np.float64]

FAMILIES = ("normal", "lognormal")


@dataclass(frozen=True, slots=True)
class Prior:
    """Earlier knowledge of a normal population, as if from tests that were not made (conjugate prior).

    Parameters
    ----------
    mean, sd : float
        m' and s': of the values, or of their natural logarithms for ``lognormal``; sd above zero.
    size : float
        n': number of tests that would tell the mean as well, at least 0.
    freedom : float
        nu': degrees of freedom that would tell the sd as well, at least 0.

    Raises
    ------
    InputError
        A value is outside its range.
    """

    mean: float
    sd: float
    size: float
    freedom: float

    def __post_init__(self) -> None:
        fine = {
            "mean": math.isfinite(self.mean),
            "sd": math.isfinite(self.sd) and self.sd > 0.0,
            "size": math.isfinite(self.size) and self.size >= 0.0,
            "freedom": math.isfinite(self.freedom) and self.freedom >= 0.0,
        }
        rule = {"mean": "finite", "sd": "above zero", "size": "at least 0", "freedom": "at least 0"}
        problems = [
            Problem(f"The {name} of the prior is {getattr(self, name):g}; it must be {rule[name]}.")
            for name, good in fine.items()
            if not good
        ]
        if problems:
            raise InputError(problems)


@dataclass(frozen=True, slots=True)
class DirectDesignValue:
    """Characteristic and design value of a sample, in its unit, conversion included.

    Attributes
    ----------
    x_k, x_d : float
    gamma_m : float
        x_k/x_d; NaN where x_d is not above zero.
    family : {"normal", "lognormal"}
    route : {"plain", "predictive"}
    n : int
    mean, sd : float
        Behind the values: of the sample, or of the posterior; of logarithms for ``lognormal``; sd as known if it is.
    size, freedom : float
        Tests behind the mean and degrees of freedom behind the sd, those of the prior included; freedom is infinite for
        a known scatter.
    k_n, k_d_n : float
        In mean - k sd.
    factors : FractileFactors or None
        With the printed factors; None with a prior, which the tables do not know.
    conversion : float
        eta_d.
    doubts : tuple of Doubt
    """

    x_k: float
    x_d: float
    gamma_m: float
    family: str
    route: str
    n: int
    mean: float
    sd: float
    size: float
    freedom: float
    k_n: float
    k_d_n: float
    factors: FractileFactors | None
    conversion: float
    doubts: tuple[Doubt, ...]


def plain_design_value(
    values: ArrayLike,
    family: str = "lognormal",
    *,
    fractiles: Fractiles | None = None,
    known_cov: float | None = None,
    conversion: float = 1.0,
    where: str = WHERE,
) -> DirectDesignValue:
    """Return the design value mean - k_d,n sd, of the logarithms for ``lognormal``.

    Parameters
    ----------
    values : array_like, shape (n,)
        At least 2, or 1 with a known cov; above zero for ``lognormal``.
    family : {"normal", "lognormal"}
    fractiles : Fractiles, optional
        Default: 5 %, beta = 3.8, alpha_R = 0.8, factors by formula. With the source ``table`` the factors are those
        printed in EN 1990 Tables D1 and D2.
    known_cov : float, optional
        V_X known: sd = V_X times the mean, or sqrt(ln(1 + V_X²)) of logarithms.
    conversion : float
        eta_d, which multiplies both values; above zero.
    where : str
        Place of the doubts.

    Raises
    ------
    InputError
        A value or an argument is outside its range, or the sample has no scatter.
    """
    asked = fractiles or Fractiles()
    x = _sample(values, family, known_cov, conversion)
    factors = fractile_factors(asked, int(x.size), known=known_cov is not None)
    centre, y = logs(x) if family == "lognormal" else (1.0, x)
    mean = float(np.mean(y))
    sd = _known_sd(family, mean, known_cov) if known_cov is not None else float(np.std(y, ddof=1))

    def at(k: float) -> float:
        moved = mean - k * sd
        return conversion * (centre * math.exp(moved) if family == "lognormal" else moved)

    shown = mean + math.log(centre) if family == "lognormal" else mean
    ends = (at(factors.k_n), at(factors.k_d_n))
    return _answer(
        ends,
        family=family,
        route="plain",
        n=int(x.size),
        level=(shown, sd),
        weight=(float(x.size), factors.freedom),
        k=(factors.k_n, factors.k_d_n),
        factors=factors,
        conversion=conversion,
        where=where,
    )


def predictive_design_value(
    values: ArrayLike,
    family: str = "lognormal",
    *,
    prior: Prior | None = None,
    fractiles: Fractiles | None = None,
    known_cov: float | None = None,
    conversion: float = 1.0,
    where: str = WHERE,
) -> DirectDesignValue:
    """Return the design value as fractile of the predictive distribution of a further specimen.

    Parameters
    ----------
    values, family, known_cov, conversion, where
        As in `plain_design_value`.
    prior : Prior, optional
        Default: none, which is the vague prior of Annex D. With a known cov its sd and freedom are not used.
    fractiles : Fractiles, optional
        The printed tables have no part in this.

    Raises
    ------
    InputError
        A value or an argument is outside its range, or the sample has no scatter.

    Notes
    -----
    With n' and nu' of the prior, n'' = n' + n, nu'' = nu' + n - 1 + [n' > 0], m'' = (n' m' + n m)/n'' and
    nu'' s''² = nu' s'² + (n - 1) s² + (n' n/n'') (m - m')²; the fractile is m'' + t(nu'') s'' sqrt(1 + 1/n'') (JCSS
    Probabilistic Model Code, part 3, and ISO 12491, from memory). For a known sd it is normal.
    """
    asked = replace(fractiles or Fractiles(), source="formula")
    x = _sample(values, family, known_cov, conversion)
    tails = (asked.fractile, asked.design_fractile)
    n = int(x.size)
    if prior is None:
        route = "prediction" if known_cov is None else "prediction_known"
        found = [characteristic_value(x, family, p, route=route, known_cov=known_cov) for p in tails]
        y = np.log(x) if family == "lognormal" else x
        mean = float(np.mean(y))
        sd = _known_sd(family, mean, known_cov) if known_cov is not None else float(np.std(y, ddof=1))
        k = [float(c.factor) for c in found if c.factor is not None]
        factors = fractile_factors(asked, n, known=known_cov is not None)
        ends = (conversion * found[0].value, conversion * found[1].value)
        size, freedom = float(n), factors.freedom
    else:
        y = np.log(x) if family == "lognormal" else x
        mean, sd, size, freedom = _posterior(y, prior, family, known_cov)
        factors = None
        k = [-_quantile(p, freedom) * math.sqrt(1.0 + 1.0 / size) for p in tails]
        moved = [mean - factor * sd for factor in k]
        natural = [math.exp(v) for v in moved] if family == "lognormal" else moved
        ends = (conversion * natural[0], conversion * natural[1])
    return _answer(
        ends,
        family=family,
        route="predictive",
        n=n,
        level=(mean, sd),
        weight=(size, freedom),
        k=(k[0], k[1]),
        factors=factors,
        conversion=conversion,
        where=where,
    )


def _posterior(
    y: Array, prior: Prior, family: str, known_cov: float | None
) -> tuple[float, float, float, float]:
    """Return mean, sd, size and degrees of freedom of what prior and sample know together."""
    n, m = int(y.size), float(np.mean(y))
    size = prior.size + n
    mean = (prior.size * prior.mean + n * m) / size
    if known_cov is not None:
        return mean, _known_sd(family, mean, known_cov), size, math.inf
    freedom = prior.freedom + n - 1.0 + (1.0 if prior.size > 0.0 else 0.0)
    squares = prior.freedom * prior.sd**2 + float(np.sum((y - m) ** 2))
    squares += prior.size * n / size * (m - prior.mean) ** 2
    return mean, math.sqrt(squares / freedom), size, freedom


def _quantile(p: float, freedom: float) -> float:
    return float(special.ndtri(p) if math.isinf(freedom) else special.stdtrit(freedom, p))


def _known_sd(family: str, mean: float, cov: float) -> float:
    return math.sqrt(math.log1p(cov**2)) if family == "lognormal" else cov * abs(mean)


def _sample(values: ArrayLike, family: str, known_cov: float | None, conversion: float) -> Array:
    if family not in FAMILIES:
        raise InputError(f"The family is '{family}'. {did_you_mean(family, FAMILIES)}")
    if not (math.isfinite(conversion) and conversion > 0.0):
        raise InputError(f"The conversion factor is {conversion:g}; it must be above zero.")
    if known_cov is not None and not (math.isfinite(known_cov) and known_cov > 0.0):
        raise InputError(f"The known coefficient of variation is {known_cov:g}; it must be above zero.")
    x = np.asarray(values, dtype=np.float64)
    if x.ndim != 1:
        raise InputError(f"The sample must be one row of values; it has {x.ndim} dimensions.")
    least = 2 if known_cov is None else 1
    if x.size < least:
        raise InputError(f"The sample has {x.size} values; at least {least} are needed.")
    wrong = ~np.isfinite(x) if family == "normal" else ~(np.isfinite(x) & (x > 0.0))
    if wrong.any():
        i = int(np.argmax(wrong))
        rule = "finite" if family == "normal" else "finite and above zero"
        raise InputError(f"Value {i + 1} is {x[i]:g}; values of this sample must be {rule}.")
    if known_cov is None and float(np.ptp(x)) == 0.0:
        raise InputError(
            f"All {x.size} values are equal, so the sample has no scatter to estimate. State a known coefficient of "
            "variation."
        )
    return x


def _answer(
    ends: tuple[float, float],
    *,
    family: str,
    route: str,
    n: int,
    level: tuple[float, float],
    weight: tuple[float, float],
    k: tuple[float, float],
    factors: FractileFactors | None,
    conversion: float,
    where: str,
) -> DirectDesignValue:
    x_k, x_d = ends
    doubts = []
    if not x_d > 0.0:
        message = (
            f"The design value is {x_d:.4g}: the normal family reaches below zero for this scatter. Use the lognormal "
            "one, or a cov known from elsewhere."
        )
        doubts.append(Doubt("design-value-not-positive", message, where))
    return DirectDesignValue(
        x_k=x_k,
        x_d=x_d,
        gamma_m=x_k / x_d if x_d > 0.0 else math.nan,
        family=family,
        route=route,
        n=n,
        mean=level[0],
        sd=level[1],
        size=weight[0],
        freedom=weight[1],
        k_n=k[0],
        k_d_n=k[1],
        factors=factors,
        conversion=conversion,
        doubts=tuple(doubts),
    )
