"""What the analysis of lots yields."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from calibrate.errors import Doubt
from calibrate.fitting.lots.grouping import Array, Scale

Interval = tuple[float, float]


@dataclass(frozen=True, slots=True)
class LotShare:
    """One lot, for a table or a figure; all on the scale of the analysis (x or ln x).

    Attributes
    ----------
    name : str
    size : int
    mean, lowest, highest : float
    sd : float
        NaN for a single specimen.
    shrunken_mean : float
        Best linear unbiased prediction of the lot's own mean: the lot's average drawn towards the mean of all
        lots, the more the fewer specimens it has and the less lots scatter. NaN where between and within cannot
        be separated.
    """

    name: str
    size: int
    mean: float
    sd: float
    lowest: float
    highest: float
    shrunken_mean: float


@dataclass(frozen=True, slots=True)
class AnovaScatter:
    """The same two variances from the analysis of variance, as a second opinion.

    Attributes
    ----------
    between_mean_square, within_mean_square : float
        NaN without a degree of freedom.
    mean_size : float
        n0 = (n - sum n_i²/n)/(k - 1): what takes the place of the lot size where sizes differ.
    between_sd : float
        0 where ``between_variance`` is negative.
    within_sd : float
    between_variance : float
        (between - within mean square)/n0, with its sign.
    """

    between_mean_square: float
    within_mean_square: float
    mean_size: float
    between_sd: float
    within_sd: float
    between_variance: float


@dataclass(frozen=True, slots=True, eq=False)
class LotScatter:
    """Scatter between and within lots by restricted maximum likelihood.

    Attributes
    ----------
    scale : {"as measured", "logarithmic"}
        On the logarithmic scale mean and sds are of ln x.
    mean : float
        Of the population of lots; lots are weighted, not specimens.
    between_sd, within_sd, total_sd : float
        ``total² = between² + within²``. NaN where the sample cannot tell: between and total with one lot,
        between and within where every lot has one specimen.
    intraclass : float
        Share of the variance that is between lots; 0: a pooled fit.
    shares : tuple of LotShare
        The lots in order of first appearance.
    effective_n : float
        Number of independent specimens with the same total variance that would give the mean with the same
        variance; between number of lots and n. NaN with one lot.
    se_mean : float
        Standard error of the mean for the population of lots. NaN with one lot.
    level : float
        Nominal coverage of the intervals.
    between_interval, within_interval, intraclass_interval : tuple of float
        From the profile of the restricted likelihood.
    log_likelihood : float
        Of n - 1 orthonormal contrasts; infinite where no lot has any scatter.
    anova : AnovaScatter
    doubts : tuple of Doubt
    """

    scale: Scale
    mean: float
    between_sd: float
    within_sd: float
    total_sd: float
    intraclass: float
    shares: tuple[LotShare, ...]
    effective_n: float
    se_mean: float
    level: float
    between_interval: Interval
    within_interval: Interval
    intraclass_interval: Interval
    log_likelihood: float
    anova: AnovaScatter
    doubts: tuple[Doubt, ...]

    @property
    def lots(self) -> tuple[str, ...]:
        """Names of the lots."""
        return tuple(s.name for s in self.shares)

    @property
    def sizes(self) -> tuple[int, ...]:
        """Number of specimens of each lot."""
        return tuple(s.size for s in self.shares)

    @property
    def lot_means(self) -> Array:
        """Average of each lot, shape (k,)."""
        return np.array([s.mean for s in self.shares])

    @property
    def n(self) -> int:
        """Number of specimens."""
        return sum(self.sizes)

    @property
    def between_cov(self) -> float:
        """Coefficient of variation of the lot means."""
        return self._cov(self.between_sd)

    @property
    def within_cov(self) -> float:
        """Coefficient of variation of specimens of one lot, relative to the mean of all lots."""
        return self._cov(self.within_sd)

    @property
    def total_cov(self) -> float:
        """Coefficient of variation of a specimen of a random lot."""
        return self._cov(self.total_sd)

    def _cov(self, sd: float) -> float:
        if self.scale == "logarithmic":
            return math.sqrt(math.expm1(sd * sd))
        return sd / abs(self.mean) if self.mean else math.nan
