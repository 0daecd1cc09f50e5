"""Tolerance limits from few lots: the fractile of a specimen taken from a lot that has not been tested."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.errors import Doubt, InputError, Problem
from calibrate.fitting.characteristic.factors import general_tolerance_factor, inside_unit
from calibrate.fitting.characteristic.result import CharacteristicValue, Request
from calibrate.fitting.tools import logs

Array = NDArray[np.float64]

FEW_LOTS = 5
"""Number of lots below which a doubt is recorded."""

_CONFIDENCES = (0.0, 0.5, 0.75, 0.90, 0.95, 0.99, 1.0)
_RATIO_LEVELS = (0.5, 0.5, 0.75, 0.85, 0.905, 0.975, 1.0)
"""Confidence of the upper limit of the variance ratio, by that of the tolerance limit.

0.90, 0.95 and 0.99: Mee and Owen 1983, from memory; 0.75: chosen by simulation; the rest between them.
"""


@dataclass(frozen=True, slots=True)
class LotLimit:
    """A one-sided tolerance limit from lots.

    Attributes
    ----------
    limit : float
    factor : float
        k in mean -/+ k sd.
    mean : float
        Mean of the lot means, each with the same weight.
    sd : float
        Of a specimen of a random lot: between and within lots.
    effective_n : float
        Number of independent specimens that would fix the mean as well, for the variance ratio in use.
    freedom : float
        Degrees of freedom of ``sd``.
    between_share : float
        Share of the variance that lies between lots, as estimated (not below 0).
    """

    limit: float
    factor: float
    mean: float
    sd: float
    effective_n: float
    freedom: float
    between_share: float


def lot_limit(
    means: ArrayLike,
    sizes: ArrayLike,
    within_sd: float,
    fractile: float,
    confidence: float,
    *,
    least_sd: float = 0.0,
) -> LotLimit:
    """Return the limit of a fractile of normal specimens of a random lot, normal lots (one-way random effects).

    Parameters
    ----------
    means : array_like, shape (lots,)
        Mean of each lot; at least two lots.
    sizes : array_like, shape (lots,)
        Specimens of each lot; at least one lot has more than one.
    within_sd : float
        Pooled within lots, with ``sum(sizes) - lots`` degrees of freedom.
    fractile, confidence : float
        Between 0 and 1; the limit of a lower fractile is a lower limit, of one above 0.5 an upper limit.
    least_sd : float
        Floor of the total sd.

    Notes
    -----
    The variance of a specimen is estimated by B + (1 - 1/h) W: B, the variance of the lot means; W, the pooled variance
    within lots; h, the harmonic mean of the sizes. Satterthwaite's degrees of freedom for it and the effective n of the
    mean depend on the ratio of the variances; an upper confidence limit of that ratio is put in their place [1]_.
    Unequal lots enter by their unweighted means and h [2]_, which is exact for equal sizes and approximate otherwise.
    By simulation (normal, 2 to 10 lots of 1 to 30 specimens) the coverage is the stated one where lots differ much, and
    exceeds it the more, the fewer and the more alike they are: 0.75 becomes 0.76 to 0.80 with five lots.

    References
    ----------
    .. [1] R. W. Mee, D. B. Owen, Improved factors for one-sided tolerance limits for balanced one-way ANOVA random
       model, J. Am. Stat. Assoc. 78 (1983) 901-905 (from memory).
    .. [2] J. D. Thomas, R. A. Hultquist, Interval estimation for the unbalanced case of the one-way random effects
       model, Ann. Stat. 6 (1978) 582-587 (from memory).
    """
    m, size = np.asarray(means, dtype=np.float64), np.asarray(sizes, dtype=np.float64)
    p, c = float(inside_unit(fractile, "The fractile")), float(inside_unit(confidence, "The confidence"))
    lots, spare = m.size, float(np.sum(size)) - m.size
    if m.ndim != 1 or lots < 2:
        raise InputError(
            f"A limit over lots needs at least two lots; there is {'one' if lots == 1 else 'none'}."
        )
    if np.any(size < 1) or not spare > 0.0:
        raise InputError(
            Problem(
                "A limit over lots needs at least one lot with two specimens, and none that is empty.",
                suggestion="If every lot has one specimen, they are a simple sample of the population.",
            )
        )
    inverse = float(np.mean(1.0 / size))
    between, within = float(np.var(m, ddof=1)), within_sd**2
    total = between + (1.0 - inverse) * within
    if not total > 0.0:
        raise InputError("All values are equal, so the lots have no scatter to estimate.")
    level = float(np.interp(c, _CONFIDENCES, _RATIO_LEVELS))
    share = _share(between, within, inverse, float(special.fdtri(spare, lots - 1.0, level)))
    of_mean = share + (1.0 - share) * inverse
    freedom = 1.0 / (of_mean**2 / (lots - 1.0) + ((1.0 - share) * (1.0 - inverse)) ** 2 / spare)
    k = float(general_tolerance_factor(lots / of_mean, freedom, p, c))
    sd = max(math.sqrt(total), least_sd)
    mean = float(np.mean(m))
    return LotLimit(
        limit=mean + (-k if p <= 0.5 else k) * sd,
        factor=k,
        mean=mean,
        sd=sd,
        effective_n=lots / of_mean,
        freedom=freedom,
        between_share=_share(between, within, inverse, 1.0),
    )


def lots_value(
    values: Array, lots: ArrayLike, request: Request, least_cov: float | None = None
) -> CharacteristicValue:
    """Return the characteristic value of a specimen of a random lot.

    Parameters
    ----------
    values : array, shape (n,)
        Complete sample; positive for `lognormal`.
    lots : array_like, shape (n,)
        Name or number of the lot of each specimen.
    request : Request
        Family `normal` or `lognormal`, with a confidence.
    least_cov : float, optional
        Floor as in `normal_value`.
    """
    assert request.confidence is not None
    of_logs = request.family == "lognormal"
    if of_logs and np.min(values) <= 0.0:
        raise InputError(
            f"The smallest value is {np.min(values):g}; the family 'lognormal' needs values above zero."
        )
    centre, y = logs(values) if of_logs else (1.0, values)
    names, index = np.unique(np.asarray(lots), return_inverse=True)
    sizes = np.bincount(index)
    means = np.bincount(index, weights=y) / sizes
    spare = max(int(values.size - names.size), 1)
    within = math.sqrt(float(np.sum((y - means[index]) ** 2)) / spare)
    least = 0.0
    if least_cov is not None:
        least = math.sqrt(math.log1p(least_cov**2)) if of_logs else least_cov * abs(float(np.mean(means)))
    p, c = request.fractile, request.confidence
    own = lot_limit(means, sizes, within, p, c)
    found = lot_limit(means, sizes, within, p, c, least_sd=least)

    def natural(number: float) -> float:
        return centre * math.exp(number) if of_logs else number

    doubts = []
    if names.size < FEW_LOTS:
        message = f"Only {names.size} lots: what lies between lots is hardly known, and the limit is far out for it."
        doubts.append(Doubt("few-lots", message, request.where))
    z = float(special.ndtri(min(p, 1.0 - p)))
    relative = math.sqrt(math.expm1(found.sd**2)) if of_logs else found.sd / (abs(found.mean) or math.nan)
    extra = f"specimen of a random lot, {names.size} lots"
    if found.sd > own.sd:
        extra += f", cov raised to {least_cov:g}"
    note = (
        f"{100.0 * found.between_share:.0f} % of the variance lies between lots. The mean counts as that of "
        f"{found.effective_n:.1f} independent specimens, the sd has {found.freedom:.1f} degrees of freedom."
    )
    return request.answer(
        values,
        value=natural(found.limit),
        factor=found.factor,
        point_estimate=natural(found.mean - request.sign * z * own.sd),
        cov_used=relative,
        floored=found.sd > own.sd,
        statement=request.statement(values.size, found.factor, extra),
        notes=(note,),
        doubts=tuple(doubts),
    )


def _share(between: float, within: float, inverse: float, quantile: float) -> float:
    """Return the share of the variance between lots at which B/(W/h) would have this F quantile."""
    if within == 0.0:
        return 1.0
    ratio = max(between / within * quantile - inverse, 0.0)
    return ratio / (1.0 + ratio) if math.isfinite(ratio) else 1.0
