"""Suspected outliers, and what each specimen does to the result."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.records.observations import Array
from calibrate.records.screening.groups import coded, group_medians

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
    """

    specimen: int
    value: float
    distance: float
    critical: float


@dataclass(frozen=True, slots=True)
class Esd:
    """Generalised extreme studentised deviate test.

    Attributes
    ----------
    scale : {"raw", "logarithmic"}
    within_lots : bool
        Whether the values were divided by the median of their lot.
    steps : tuple of EsdStep
        All that were tried, in order.
    n_outliers : int
        The last step whose distance exceeds the critical one; every step up
        to it names an outlier.
    """

    scale: Literal["raw", "logarithmic"]
    within_lots: bool
    steps: tuple[EsdStep, ...]
    n_outliers: int

    @property
    def specimens(self) -> tuple[int, ...]:
        """Positions of the outliers, the farthest first."""
        return tuple(s.specimen for s in self.steps[: self.n_outliers])


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
    y = np.log(x) if logarithmic else x
    return _esd(
        x, y, np.arange(x.size), "logarithmic" if logarithmic else "raw", level, most, within_lots=False
    )


def esd_within_lots(
    values: ArrayLike, lots: Sequence[str | None], *, level: float = LEVEL
) -> tuple[Esd, ...]:
    """Test the ratios of values to the median of their lot: lots may differ, specimens of one lot may not.

    Parameters
    ----------
    values : array_like, shape (n,)
    lots : sequence of str or None, length n
        Lots of fewer than five specimens, or with a median that is not
        positive, and specimens without a lot take no part.
    level : float
        As in `generalised_esd`.

    Returns
    -------
    tuple of Esd
        On the raw scale and, where all values that take part are positive, on
        the logarithmic one. Empty where fewer than two lots take part.
    """
    x = np.asarray(values, dtype=np.float64)
    names, codes = coded(lots)
    medians, sizes = group_medians(x, codes, len(names))
    fit = (sizes >= _LEAST_IN_LOT) & (medians > 0.0)
    if np.count_nonzero(fit) < 2:
        return ()
    at = np.flatnonzero(np.append(fit, False)[codes])
    ratio = x[at] / medians[codes[at]]
    tests = [_esd(x, ratio, at, "raw", level, None, within_lots=True)]
    if ratio.min() > 0.0:
        tests.append(_esd(x, np.log(ratio), at, "logarithmic", level, None, within_lots=True))
    return tuple(tests)


def _esd(
    x: Array,
    y: Array,
    at: NDArray[np.int64],
    scale: Literal["raw", "logarithmic"],
    level: float,
    most: int | None,
    *,
    within_lots: bool,
) -> Esd:
    """Test y, which stands for the specimens ``at`` of x."""
    n = int(y.size)
    most = min(MOST, n // 4) if most is None else most
    left = np.arange(n)
    steps: list[EsdStep] = []
    found = 0
    for i in range(1, min(most, n - 2) + 1):
        d = y[left] - y[left].mean()
        sd = float(d.std(ddof=1))
        if sd <= 1e-14 * float(np.abs(y[left]).max()):
            break  # the rest is equal to rounding: no scale to measure by
        j = int(np.argmax(np.abs(d)))
        specimen = int(at[left[j]])
        steps.append(EsdStep(specimen, float(x[specimen]), float(abs(d[j])) / sd, critical_esd(n, i, level)))
        if steps[-1].distance > steps[-1].critical:
            found = i
        left = np.delete(left, j)
    return Esd(scale, within_lots, tuple(steps), found)


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
