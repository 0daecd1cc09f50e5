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


@dataclass(frozen=True, slots=True, eq=False)
class LotLimit:
    """One-sided tolerance limits from lots, one for each set of lots.

    Attributes
    ----------
    limit : array
    factor : array
        k in mean -/+ k sd.
    mean : array
        Mean of the lot means, each with the same weight.
    sd : array
        Of a specimen of a random lot: between and within lots.
    effective_n : array
        Number of independent specimens that would fix the mean as well, for the variance ratio in use.
    freedom : array
        Degrees of freedom of ``sd``.
    between_share : array
        Share of the variance that lies between lots, as estimated (not below 0).
    """

    limit: Array
    factor: Array
    mean: Array
    sd: Array
    effective_n: Array
    freedom: Array
    between_share: Array


def lot_limit(
    means: ArrayLike,
    sizes: ArrayLike,
    within_sd: ArrayLike,
    fractile: float,
    confidence: float,
) -> LotLimit:
    """Return the limit of a fractile of normal specimens of a random lot, normal lots (one-way random effects).

    Parameters
    ----------
    means : array_like, shape (..., lots)
        Mean of each lot; at least two lots.
    sizes : array_like, shape (lots,)
        Specimens of each lot; at least one lot has more than one.
    within_sd : array_like, shape (...)
        Pooled within lots, with ``sum(sizes) - lots`` degrees of freedom.
    fractile, confidence : float
        Between 0 and 1; the limit of a lower fractile is a lower limit, of one above 0.5 an upper limit.

    Raises
    ------
    InputError
        The lots are too few or have one specimen each, or there is no scatter at all.

    Notes
    -----
    The variance of a specimen is estimated by B + (1 - 1/h) W: B, the variance of the lot means; W, the pooled variance
    within lots; h, the harmonic mean of the sizes. Satterthwaite's degrees of freedom for it and the effective n of the
    mean depend on the ratio of the variances; an upper confidence limit of that ratio is put in their place [1]_.
    Unequal lots enter by their unweighted means and h [2]_, which is exact for equal sizes and approximate otherwise.
    By simulation (normal, 2 to 10 lots of 1 to 30 specimens) the coverage is the stated one where lots differ much, and
    exceeds it the more, the fewer and the more alike they are: with five lots of four that are all alike 0.75 becomes
    0.80 and 0.95 becomes 0.98.

    References
    ----------
    .. [1] R. W. Mee, D. B. Owen, Improved factors for one-sided tolerance limits for balanced one-way ANOVA random
       model, J. Am. Stat. Assoc. 78 (1983) 901-905 (from memory).
    .. [2] J. D. Thomas, R. A. Hultquist, Interval estimation for the unbalanced case of the one-way random effects
       model, Ann. Stat. 6 (1978) 582-587 (from memory).
    """
    m, size = np.asarray(means, dtype=np.float64), np.asarray(sizes, dtype=np.float64)
    p, c = float(inside_unit(fractile, "The fractile")), float(inside_unit(confidence, "The confidence"))
    if size.ndim != 1 or size.size < 2:
        raise InputError(
            f"A limit over lots needs at least two lots; there is {'one' if size.size else 'none'}."
        )
    if m.ndim < 1 or m.shape[-1] != size.size:
        raise InputError(f"There are {size.size} sizes of lots but means of shape {m.shape}.")
    lots, spare = size.size, float(np.sum(size)) - size.size
    if np.any(size < 1) or not spare > 0.0:
        raise InputError(
            Problem(
                "A limit over lots needs at least one lot with two specimens, and none that is empty.",
                suggestion="If every lot has one specimen, they are a simple sample of the population.",
            )
        )
    inverse = float(np.mean(1.0 / size))
    between, within = np.var(m, axis=-1, ddof=1), np.square(np.asarray(within_sd, dtype=np.float64))
    total = between + (1.0 - inverse) * within
    if not np.all(total > 0.0):
        raise InputError("All values are equal, so the lots have no scatter to estimate.")
    level = float(np.interp(c, _CONFIDENCES, _RATIO_LEVELS))
    share = _share(between, within, inverse, float(special.fdtri(spare, lots - 1.0, level)))
    of_mean = share + (1.0 - share) * inverse
    freedom = 1.0 / (of_mean**2 / (lots - 1.0) + ((1.0 - share) * (1.0 - inverse)) ** 2 / spare)
    k = general_tolerance_factor(lots / of_mean, freedom, p, c)
    sd = np.asarray(np.sqrt(total))
    mean = np.asarray(np.mean(m, axis=-1))
    return LotLimit(
        limit=np.asarray(mean + (-k if p <= 0.5 else k) * sd),
        factor=k,
        mean=mean,
        sd=sd,
        effective_n=np.asarray(lots / of_mean),
        freedom=np.asarray(freedom),
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
    if np.ptp(values) == 0.0:
        raise InputError("All values are equal, so the lots have no scatter to estimate.")
    names, index = np.unique(np.asarray(lots), return_inverse=True)
    sizes = np.bincount(index)
    means = np.bincount(index, weights=y) / sizes
    spare = max(int(values.size - names.size), 1)
    within = math.sqrt(float(np.sum((y - means[index]) ** 2)) / spare)
    p, c = request.fractile, request.confidence
    found = lot_limit(means, sizes, within, p, c)
    mean, own, k = float(found.mean), float(found.sd), float(found.factor)
    used = own
    if least_cov is not None:
        used = max(own, math.sqrt(math.log1p(least_cov**2)) if of_logs else least_cov * abs(mean))

    def natural(number: float) -> float:
        return centre * math.exp(number) if of_logs else number

    doubts = []
    if names.size < FEW_LOTS:
        message = f"Only {names.size} lots: what lies between lots is hardly known; the limit allows for it."
        doubts.append(Doubt("few-lots", message, request.where))
    z = -float(special.ndtri(min(p, 1.0 - p)))
    extra = f"specimen of a random lot, {names.size} lots"
    if used > own:
        extra += f", cov raised to {least_cov:g}"
    note = (
        f"{100.0 * float(found.between_share):.0f} % of the variance lies between lots. The mean counts as that of "
        f"{float(found.effective_n):.1f} independent specimens, the sd has {float(found.freedom):.1f} degrees of "
        "freedom."
    )
    return request.answer(
        values,
        value=natural(mean + request.sign * k * used),
        factor=k,
        point_estimate=natural(mean + request.sign * z * own),
        cov_used=math.sqrt(math.expm1(used**2)) if of_logs else used / (abs(mean) or math.nan),
        floored=used > own,
        statement=request.statement(values.size, k, extra),
        notes=(note,),
        doubts=tuple(doubts),
    )


def _share(between: Array, within: Array, inverse: float, quantile: float) -> Array:
    """Return the share of the variance between lots at which B/(W/h) would have this F quantile."""
    scatters = np.greater(within, 0.0)
    ratio = np.clip(between / np.where(scatters, within, 1.0) * quantile - inverse, 0.0, 1e300)
    return np.where(scatters, ratio / (1.0 + ratio), 1.0)
