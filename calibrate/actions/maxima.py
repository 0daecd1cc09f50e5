"""Block maxima: the largest value of every block, usually a year, fitted by a family of extremes.

Blocks that are missing are left out, which is right where gaps in the record have nothing to do with the load; blocks
that are mostly missing are treated the same way, and what lesser gaps may hide is told as a shift of the location.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.arguments import positive
from calibrate.distributions import Distribution, maximum_of
from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.fitting import Fit, fit
from calibrate.fitting.fits import checked_values, observed
from calibrate.fitting.intervals import parameter_intervals
from calibrate.records.observations import Observations

Array = NDArray[np.float64]

FAMILIES = ("gumbel", "gev", "frechet", "lognormal")
"""Families of block maxima; the lognormal by custom only, it is no limit of maxima."""

FEW_BLOCKS = 20
"""Number of blocks below which a doubt is recorded (common practice, no source)."""

LEAST_COVERAGE = 0.8
"""Part of a block that must have been observed for its maximum to count (common practice, no source)."""

CONFIDENCE = 0.95


@dataclass(frozen=True, slots=True, eq=False)
class MaximaFit:
    """A distribution of the maximum of one block.

    Attributes
    ----------
    fit : Fit
        In the unit of the maxima.
    blocks : int
        Number of blocks that were used.
    missing : int
        Blocks of the record without a maximum, or with too little observed.
    block_years : float
        Length of a block, which is the period of ``distribution``.
    shape_interval : (float, float) or None
        Of the shape of `gev` where it was estimated, NaN where it is not known.
    doubts : tuple of Doubt
    """

    fit: Fit
    blocks: int
    missing: int
    block_years: float
    shape_interval: tuple[float, float] | None
    doubts: tuple[Doubt, ...]

    @property
    def distribution(self) -> Distribution:
        """Distribution of the maximum of one block."""
        assert self.fit.distribution is not None
        return self.fit.distribution

    @property
    def years(self) -> float:
        """Length of the record that was used, in years."""
        return self.blocks * self.block_years

    def over(self, years: float) -> Distribution:
        """Return the distribution of the maximum of a period, in years, of independent blocks.

        Raises
        ------
        InputError
            The period is not positive.
        """
        positive("A period", years)
        if years == self.block_years:
            return self.distribution
        return maximum_of(self.distribution, years / self.block_years)


def fit_maxima(
    values: ArrayLike | Observations,
    family: str | Sequence[str] = "gumbel",
    *,
    method: str = "likelihood",
    shape: float | None = None,
    block_years: float = 1.0,
    blocks_expected: int | None = None,
    coverage: ArrayLike | None = None,
    least_coverage: float = LEAST_COVERAGE,
) -> MaximaFit:
    """Fit a distribution to the maxima of blocks.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        One maximum for each block; Observations where some are known by bounds (see `with_detection_limit`).
    family : str or sequence of str
        ``gumbel``, ``gev``, ``frechet`` or ``lognormal``; of several that of the smallest AICc.
    method : str
        ``likelihood`` or ``l_moments``, or another estimator of `calibrate.fitting.fit_family`.
    shape : float, optional
        Shape of `gev` where it is known from elsewhere, for example from `calibrate.actions.pooling`; positive is a
        heavy tail.
    block_years : float
        Length of a block.
    blocks_expected : int, optional
        Number of blocks between the begin and the end of the record, with those that left no maximum.
    coverage : array_like, shape (n,), optional
        Part of each block that was observed, in (0, 1].
    least_coverage : float
        Blocks with less are left out and count as missing.

    Raises
    ------
    InputError
        The family is none of maxima, the sample cannot be fitted, or a declaration contradicts the sample.
    """
    names = (family,) if isinstance(family, str) else tuple(family)
    _check_choice(names, shape, block_years)
    seen = observed(values)
    kept, missing, partial = _kept(seen, coverage, least_coverage)
    expected = seen.n if blocks_expected is None else blocks_expected
    if expected < seen.n:
        raise InputError(
            f"The record holds {seen.n} maxima, more than the {expected} blocks that are said to be expected."
        )
    missing += expected - seen.n
    fixed = None if shape is None else {"shape": shape}
    found = fit(kept, names[0] if len(names) == 1 else names, method=method, fixed=fixed)
    where = f"fit.{found.family}"
    interval = _shape_interval(found)
    doubts = [*found.doubts, *few_blocks(kept.n, where), *_missing(missing, expected, where)]
    doubts += _incomplete(found, partial, where) + shape_sign(interval, where)
    return MaximaFit(found, kept.n, missing, float(block_years), interval, tuple(doubts))


def with_detection_limit(values: ArrayLike, limit: float) -> Observations:
    """Return a sample in which values below a limit, and zeros, are known only to lie below it.

    Parameters
    ----------
    values : array_like, shape (n,)
        Whatever stands for a value below the limit must be smaller than the limit.
    limit : float
        In the unit of the values.

    Raises
    ------
    InputError
        The values are no sample, the limit is no number, or no value reaches it.
    """
    x = checked_values(values)
    if not math.isfinite(limit):
        raise InputError(f"A detection limit must be a finite number; got {limit!r}.")
    below = x < limit
    if below.all():
        raise InputError(f"None of the {x.size} values reaches the detection limit {limit:g}.")
    return Observations(np.where(below, -np.inf, x), np.where(below, limit, x))


def checked_confidence(confidence: float) -> float:
    """Return a confidence, or raise InputError for what is none."""
    if not 0.0 < confidence < 1.0:
        raise InputError(f"A confidence must lie between 0 and 1; got {confidence!r}.")
    return confidence


# Doubts ------------------------------


def few_blocks(count: int, where: str) -> list[Doubt]:
    """Return the doubt about a short record, if it is one."""
    if count >= FEW_BLOCKS:
        return []
    message = (
        f"Only {count} blocks, fewer than {FEW_BLOCKS}: the shape of the tail and long return periods rest on the "
        "family more than on this record. A shape pooled over stations may help."
    )
    return [Doubt("few-blocks", message, where)]


def shape_sign(interval: tuple[float, float] | None, where: str) -> list[Doubt]:
    """Return the doubt about a shape interval that spans zero, if it does."""
    if interval is None or not interval[0] < 0.0 < interval[1]:
        return []
    message = (
        f"The {100 * CONFIDENCE:g} % interval of the shape, {interval[0]:.3g} to {interval[1]:.3g}, holds "
        "distributions with a finite upper end as well as heavy tails: the sample does not tell which. Values far "
        "beyond it depend on that choice."
    )
    return [Doubt("shape-sign", message, where)]


def _missing(missing: int, expected: int, where: str) -> list[Doubt]:
    if not missing:
        return []
    message = (
        f"{missing} of {expected} blocks ({100.0 * missing / expected:.3g} %) have no maximum and were left out; the "
        "distribution holds for them only if the gaps have nothing to do with the size of the action."
    )
    return [Doubt("missing-blocks", message, where)]


def _incomplete(found: Fit, partial: Array, where: str) -> list[Doubt]:
    if not partial.size:
        return []
    share = float(np.mean(partial))
    message = (
        f"{partial.size} blocks were observed in part ({100.0 * share:.3g} % on average) and count as whole: their "
        "maxima may be too small"
    )
    if found.family == "gumbel":
        shift = -found.parameters["scale"] * float(np.sum(np.log(partial))) / found.n
        message += f", which lowers the location by about {shift:.3g}"
    return [Doubt("incomplete-blocks", message + ".", where)]


# Pieces ------------------------------


def _check_choice(names: tuple[str, ...], shape: float | None, block_years: float) -> None:
    if not names:
        raise InputError("No family is named.")
    problems = [
        Problem(
            f"The family '{name}' is none of block maxima; use {', '.join(FAMILIES[:-1])} or {FAMILIES[-1]}.",
            suggestion=did_you_mean(name, FAMILIES),
        )
        for name in names
        if name not in FAMILIES
    ]
    if shape is not None and names != ("gev",):
        problems.append(Problem("A shape is given, which only the family 'gev' alone can take."))
    if not (math.isfinite(block_years) and block_years > 0.0):
        problems.append(
            Problem(f"The length of a block must be a positive number of years; got {block_years!r}.")
        )
    if problems:
        raise InputError(problems)


def _kept(seen: Observations, coverage: ArrayLike | None, least: float) -> tuple[Observations, int, Array]:
    """Return the blocks that count, the number of others, and the coverage of those kept that are not whole."""
    if coverage is None:
        return seen, 0, np.zeros(0)
    share = checked_values(coverage)
    if share.size != seen.n:
        raise InputError(f"There are {share.size} values of coverage for {seen.n} maxima.")
    if not 0.0 <= least <= 1.0:
        raise InputError(f"The least coverage must lie between 0 and 1; got {least:g}.")
    wrong = np.flatnonzero((share <= 0.0) | (share > 1.0))
    if wrong.size:
        raise InputError(
            f"Coverage {wrong[0] + 1} is {share[wrong[0]]:g}; it must be more than 0 and at most 1."
        )
    enough = share >= least
    if not enough.any():
        raise InputError(f"No block was observed for at least {100.0 * least:g} % of its length.")
    return seen.taken(enough), int(np.sum(~enough)), share[enough & (share < 1.0)]


def _shape_interval(found: Fit) -> tuple[float, float] | None:
    """Return the interval of an estimated `gev` shape: by profile likelihood, else by its standard error."""
    if found.family != "gev" or "shape" not in found.free:
        return None
    wide = float(special.ndtri(0.5 + 0.5 * CONFIDENCE)) * found.standard_errors["shape"]
    low, high = found.parameters["shape"] - wide, found.parameters["shape"] + wide
    if found.method == "likelihood":
        ends = parameter_intervals(found, CONFIDENCE)["shape"]
        low, high = (e if math.isfinite(e) else rough for e, rough in zip(ends, (low, high), strict=True))
    return low, high
