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
        ``R_i``, in standard deviations.
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
        Whether values were divided by the mean of their lot.
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
    scale: Scale = "logarithmic" if logarithmic else "raw"
    return _esd(_Tested(x, np.arange(x.size), scale, within_lots=False), x, level, most)


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
        two lots take part.

    Notes
    -----
    Distances in a lot of m are enlarged by ``sqrt(m/(m-1))``, so that all have
    the same variance in spite of the estimated mean.
    """
    x = np.asarray(values, dtype=np.float64)
    names, codes = coded(lots)
    means, sizes = _group_means(x, codes, len(names))
    fit = (sizes >= _LEAST_IN_LOT) & (means > 0.0)
    if np.count_nonzero(fit) < 2:
        return ()
    at = np.flatnonzero(np.append(fit, False)[codes])
    lot = codes[at]
    larger = np.sqrt(sizes[lot] / (sizes[lot] - 1.0))
    ratio = 1.0 + larger * (x[at] / means[lot] - 1.0)
    tests = [_esd(_Tested(ratio, at, "raw", within_lots=True), x, level, None)]
    if x[at].min() > 0.0:
        logs = np.zeros(x.size)
        logs[at] = np.log(x[at])
        ratio = np.exp(larger * (logs[at] - _group_means(logs, codes, len(names))[0][lot]))
        tests.append(_esd(_Tested(ratio, at, "logarithmic", within_lots=True), x, level, None))
    return tuple(tests)


def _group_means(x: Array, codes: NDArray[np.int64], groups: int) -> tuple[Array, NDArray[np.int64]]:
    sizes = np.bincount(codes + 1, minlength=groups + 1)[1:]
    sums = np.bincount(codes + 1, weights=x, minlength=groups + 1)[1:]
    return np.asarray(sums / np.maximum(sizes, 1)), sizes.astype(np.int64)


@dataclass(frozen=True, slots=True)
class _Tested:
    """Values under test on the raw scale, and the specimens to which they belong."""

    values: Array
    at: NDArray[np.int64]
    scale: Scale
    within_lots: bool


def _esd(tested: _Tested, x: Array, level: float, most: int | None) -> Esd:
    y = np.log(tested.values) if tested.scale == "logarithmic" else tested.values
    n = int(y.size)
    most = min(MOST, n // 4) if most is None else most
    left = np.arange(n)
    taken: list[int] = []
    steps: list[EsdStep] = []
    found = 0
    for i in range(1, min(most, n - 2) + 1):
        d = y[left] - y[left].mean()
        sd = float(d.std(ddof=1))
        if sd <= 1e-14 * float(np.abs(y[left]).max()):
            break  # the rest is equal to rounding: no scale to measure by
        j = int(np.argmax(np.abs(d)))
        taken.append(int(left[j]))
        specimen = int(tested.at[taken[-1]])
        steps.append(EsdStep(specimen, float(x[specimen]), float(abs(d[j])) / sd, critical_esd(n, i, level)))
        if steps[-1].distance > steps[-1].critical:
            found = i
        left = np.delete(left, j)
    rest = np.delete(tested.values, taken[:found])
    named = [
        replace(s, chance=_extreme_chance(rest, float(tested.values[j]), n))
        for s, j in zip(steps[:found], taken, strict=False)
    ]
    return Esd(tested.scale, tested.within_lots, (*named, *steps[found:]), found)


def _extreme_chance(rest: Array, value: float, n: int) -> float:
    """Return the chance that one of n lies as far out as a value: below, Weibull; above, Gumbel."""
    low = value < float(rest.mean())
    if low and value > 0.0 and rest.min() > 0.0:
        rest, value = (
            np.log(rest),
            math.log(value),
        )  # the logarithms of a Weibull sample are of the Gumbel kind
    scale = float(rest.std(ddof=1)) * math.sqrt(6.0) / math.pi
    outwards = abs(value - float(rest.mean())) / scale + np.euler_gamma
    return -math.expm1(-n * math.exp(-outwards))


def critical_esd(n: int, i: int, level: float = LEVEL) -> float:
    """Return the critical distance of step i in a sample of n."""
    m = n - i
    t = float(special.stdtrit(m - 1, 1.0 - level / (2.0 * (m + 1))))
    return m * t / math.sqrt((m - 1 + t * t) * (m + 1))


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
