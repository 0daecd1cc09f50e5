"""Suspected outliers, and what each specimen does to the result."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.records.observations import Array
from calibrate.records.screening.groups import coded

Scale = Literal["raw", "logarithmic"]

LEVEL = 0.05
MOST = 10
_LEAST_IN_LOT = 5
_Z05 = -1.6448536269514722
"""5 % fractile of the standard normal distribution."""


@dataclass(frozen=True, slots=True)
class EsdStep:
    """One step of the test: the value farthest from the mean of those that are left.

    Attributes
    ----------
    specimen : int
        Position in the sample, from 0.
    value : float
        As in the sample, on either scale.
    distance : float
        ``R_i``, in standard deviations; within lots, a studentised residual.
    critical : float
        ``lambda_i``.
    chance : float or None
        Of named outliers: that the lowest value of a Weibull sample, or the
        highest of a Gumbel sample, of this size lies as far out, with the
        moments of the values that are not named. Normal populations are not
        the only ordinary ones.
    """

    specimen: int
    value: float
    distance: float
    critical: float
    chance: float | None = None


@dataclass(frozen=True, slots=True)
class Esd:
    """Generalised extreme studentised deviate test.

    Attributes
    ----------
    scale : {"raw", "logarithmic"}
    within_lots : bool
        Whether distances are those from the mean of the lot.
    steps : tuple of EsdStep
        All that were tried, in order.
    n_outliers : int
        The last step whose distance exceeds the critical one; every step up
        to it names an outlier.
    """

    scale: Scale
    within_lots: bool
    steps: tuple[EsdStep, ...]
    n_outliers: int

    @property
    def specimens(self) -> tuple[int, ...]:
        """Positions of the outliers, the farthest first."""
        return tuple(s.specimen for s in self.named)

    @property
    def named(self) -> tuple[EsdStep, ...]:
        """Steps that name an outlier."""
        return self.steps[: self.n_outliers]


@dataclass(frozen=True, slots=True)
class Influence:
    """What leaving out one specimen changes.

    Attributes
    ----------
    specimen : int
        Position in the sample, from 0.
    value : float
    cov, cov_without : float or None
        Coefficient of variation with all specimens and without this one.
    normal_fractile, normal_fractile_without : float
        ``mean - 1.645 sd``: point estimate of the 5 % fractile.
    lognormal_fractile, lognormal_fractile_without : float or None
        The same on the logarithmic scale; None where a value is not positive.
    """

    specimen: int
    value: float
    cov: float | None
    cov_without: float | None
    normal_fractile: float
    normal_fractile_without: float
    lognormal_fractile: float | None
    lognormal_fractile_without: float | None


def generalised_esd(
    values: ArrayLike, *, logarithmic: bool = False, level: float = LEVEL, most: int | None = None
) -> Esd:
    """Test for outliers on both sides.

    Parameters
    ----------
    values : array_like, shape (n,)
        Positive for the logarithmic scale.
    logarithmic : bool
        Test the logarithms: outliers of a lognormal population.
    level : float
        Chance of naming any outlier in a normal sample; the approximation is
        good from about 25 values and fair from 15.
    most : int, optional
        Outliers to try; at most 10 or a quarter of the sample by default.

    References
    ----------
    .. [1] B. Rosner, Percentage points for a generalized ESD many-outlier
       procedure, Technometrics 25 (1983) 165-172; formulas as in the NIST
       e-Handbook 1.3.5.17.3 (from memory, recomputed).
    """
    x = np.asarray(values, dtype=np.float64)
    one_lot = np.zeros(x.size, dtype=np.int64)
    return _esd(x, one_lot, "logarithmic" if logarithmic else "raw", level, most, within_lots=False)


def esd_within_lots(
    values: ArrayLike, lots: Sequence[str | None], *, level: float = LEVEL
) -> tuple[Esd, ...]:
    """Test the distances of values from the mean of their lot: lots may differ, specimens of one lot may not.

    Parameters
    ----------
    values : array_like, shape (n,)
    lots : sequence of str or None, length n
        Lots of fewer than five specimens, or with a mean that is not
        positive, and specimens without a lot take no part.
    level : float
        As in `generalised_esd`.

    Returns
    -------
    tuple of Esd
        On the raw scale (ratios to the lot's mean) and, where all values that
        take part are positive, on the logarithmic one. Empty where fewer than
        two lots take part. Distances are studentised residuals of the lots'
        means, which are computed anew when a value has been taken out.
    """
    x = np.asarray(values, dtype=np.float64)
    names, codes = coded(lots)
    sizes = np.bincount(codes + 1, minlength=len(names) + 1)[1:]
    means = np.bincount(codes + 1, weights=x, minlength=len(names) + 1)[1:] / np.maximum(sizes, 1)
    fit = (sizes >= _LEAST_IN_LOT) & (means > 0.0)
    if np.count_nonzero(fit) < 2:
        return ()
    at = np.flatnonzero(np.append(fit, False)[codes])
    ratio = x[at] / means[codes[at]]
    lot = np.unique(codes[at], return_inverse=True)[1].astype(np.int64)
    scales: tuple[Scale, ...] = ("raw", "logarithmic") if ratio.min() > 0.0 else ("raw",)
    tests = (_esd(ratio, lot, scale, level, None, within_lots=True) for scale in scales)
    return tuple(
        replace(
            t,
            steps=tuple(
                replace(s, specimen=int(at[s.specimen]), value=float(x[at[s.specimen]])) for s in t.steps
            ),
        )
        for t in tests
    )


def _esd(
    x: Array, lot: NDArray[np.int64], scale: Scale, level: float, most: int | None, *, within_lots: bool
) -> Esd:
    y = np.log(x) if scale == "logarithmic" else x
    n = int(y.size)
    most = min(MOST, n // 4) if most is None else most
    left = np.ones(n, dtype=np.bool_)
    taken: list[int] = []
    steps: list[EsdStep] = []
    found = 0
    for i in range(1, min(most, n - 2) + 1):
        residual, size = _residuals(y, lot, left)
        freedom = n - i + 1 - np.unique(lot[left]).size
        scatter = math.sqrt(float(residual[left] @ residual[left]) / freedom)
        if scatter <= 1e-14 * float(np.abs(y[left]).max()):
            break  # the rest is equal to rounding: no scale to measure by
        # The one lot of the plain test is measured in standard deviations, as its author does.
        unit = np.sqrt(1.0 - 1.0 / size) if within_lots else np.ones(n)
        distance = np.divide(np.abs(residual), scatter * unit, out=np.zeros(n), where=left & (size > 1))
        j = int(np.argmax(distance))
        critical = critical_residual(n - i + 1, freedom, level) if within_lots else critical_esd(n, i, level)
        taken.append(j)
        steps.append(EsdStep(j, float(x[j]), float(distance[j]), critical))
        if distance[j] > critical:
            found = i
        left[j] = False
    left = np.ones(n, dtype=np.bool_)
    left[taken[:found]] = False
    centred = _residuals(y, lot, left)[0] + float(y[left].mean())
    level_values = np.exp(centred) if scale == "logarithmic" else centred
    for k in range(found):
        chance = _extreme_chance(level_values[left], float(level_values[taken[k]]), n)
        steps[k] = replace(steps[k], chance=chance)
    return Esd(scale, within_lots, tuple(steps), found)


def _residuals(y: Array, lot: NDArray[np.int64], left: NDArray[np.bool_]) -> tuple[Array, Array]:
    """Return distances from the mean of what is left of each lot, and how many are left there, shape (n,)."""
    groups = int(lot.max()) + 1
    sizes = np.maximum(np.bincount(lot[left], minlength=groups), 1)
    centre = y[left].mean()  # first, so that no digits are lost in the sums
    means = np.bincount(lot[left], weights=y[left] - centre, minlength=groups) / sizes
    return (y - centre) - means[lot], sizes[lot].astype(np.float64)


def critical_esd(n: int, i: int, level: float = LEVEL) -> float:
    """Return the critical distance of step i in a sample of n, in standard deviations."""
    m = n - i + 1
    return critical_residual(m, m - 1, level) * math.sqrt((m - 1) / m)


def critical_residual(n: int, freedom: int, level: float = LEVEL) -> float:
    """Return the critical largest studentised residual of n with so many degrees of freedom (Bonferroni).

    References
    ----------
    .. [1] R. E. Lund, Tables for an approximate test for outliers in linear
       models, Technometrics 17 (1975) 473-476 (from memory, recomputed).
    """
    t = float(special.stdtrit(freedom - 1, 1.0 - level / (2.0 * n)))
    return t * math.sqrt(freedom / (freedom - 1 + t * t))


def _extreme_chance(rest: Array, value: float, n: int) -> float:
    """Return the chance that one of n lies as far out as a value: below, Weibull; above, Gumbel."""
    low = value < float(rest.mean())
    if low and value > 0.0 and rest.min() > 0.0:
        rest, value = (
            np.log(rest),
            math.log(value),
        )  # the logarithms of a Weibull sample are of the Gumbel kind
    scale = float(rest.std(ddof=1)) * math.sqrt(6.0) / math.pi
    if scale == 0.0:
        return 0.0
    outwards = abs(value - float(rest.mean())) / scale + np.euler_gamma
    return -math.expm1(-n * math.exp(-outwards))


def influence(values: ArrayLike, specimen: int) -> Influence:
    """Return what leaving out one specimen changes; three values at least."""
    x = np.asarray(values, dtype=np.float64)
    rest = np.delete(x, specimen)
    return Influence(
        specimen=int(specimen),
        value=float(x[specimen]),
        cov=_cov(x),
        cov_without=_cov(rest),
        normal_fractile=_fractile(x),
        normal_fractile_without=_fractile(rest),
        lognormal_fractile=_log_fractile(x),
        lognormal_fractile_without=_log_fractile(rest),
    )


def most_influential(values: ArrayLike) -> int:
    """Return the position of the specimen whose absence changes the coefficient of variation most.

    Of samples with mean zero, or when all values are equal, the one farthest
    from the mean.

    Parameters
    ----------
    values : array_like, shape (n,)
        Three at least.
    """
    x = np.asarray(values, dtype=np.float64)
    n = x.size
    mean = float(x.mean())
    d = x - mean
    squares = float(d @ d)
    without = np.sqrt(np.maximum(squares - n / (n - 1.0) * d**2, 0.0) / (n - 2))
    mean_without = mean - d / (n - 1.0)
    if mean == 0.0 or (mean_without == 0.0).any() or squares == 0.0:
        return int(np.argmax(np.abs(d)))
    cov = math.sqrt(squares / (n - 1)) / abs(mean)
    return int(np.argmax(np.abs(without / np.abs(mean_without) - cov)))


def _cov(x: Array) -> float | None:
    mean = float(x.mean())
    return None if mean == 0.0 else float(x.std(ddof=1)) / abs(mean)


def _fractile(x: Array) -> float:
    return float(x.mean() + _Z05 * x.std(ddof=1))


def _log_fractile(x: Array) -> float | None:
    return math.exp(_fractile(np.log(x))) if x.min() > 0.0 else None
