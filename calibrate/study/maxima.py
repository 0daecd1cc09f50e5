"""Variables fitted to block maxima: how long the record is, and what its return levels are."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.maxima import LEAST_COVERAGE, MaximaFit, fit_maxima
from calibrate.actions.return_levels import YEARS, ReturnLevels, empirical_return_periods, return_levels
from calibrate.errors import Doubt, InputError
from calibrate.fitting import Fit, fit_family
from calibrate.records import Sample
from calibrate.records.observations import Observations
from calibrate.study.model import Variable

FAMILIES = ("gumbel", "gev", "frechet", "lognormal")
"""Families whose fits are looked at as maxima."""


@dataclass(frozen=True, slots=True, eq=False)
class BlockMaxima:
    """A fit to block maxima with its return levels, in the unit of the records.

    Attributes
    ----------
    maxima : MaximaFit
    levels : ReturnLevels
    empirical : (array, array)
        Return periods in years and values of the ordered maxima.
    """

    maxima: MaximaFit
    levels: ReturnLevels
    empirical: tuple[NDArray[np.float64], NDArray[np.float64]]


@dataclass(frozen=True, slots=True, eq=False)
class ObservedBlocks:
    """The blocks of a record that count.

    Attributes
    ----------
    observations : Observations
        Of these blocks.
    coverage : array or None
        Part of each of them that was observed; None where nothing is said.
    expected : int or None
        Blocks between begin and end of the record; None where they are as many as have a maximum.
    """

    observations: Observations
    coverage: NDArray[np.float64] | None
    expected: int | None


def observed_blocks(sample: Sample, declared: int | None) -> ObservedBlocks:
    """Return the blocks of a sample that were observed long enough; those left out count as missing.

    Raises
    ------
    InputError
        No block was.
    """
    if sample.coverage is None:
        return ObservedBlocks(sample.observations, None, declared)
    enough = sample.coverage >= LEAST_COVERAGE
    if not enough.any():
        raise InputError(f"No block was observed for at least {100.0 * LEAST_COVERAGE:g} % of its length.")
    return ObservedBlocks(
        sample.observations.taken(enough), sample.coverage[enough], sample.n if declared is None else declared
    )


def block_maxima(
    variable: Variable, fit: Fit, blocks: ObservedBlocks
) -> tuple[BlockMaxima | None, tuple[Doubt, ...]]:
    """Look at a fitted action with a period as maxima of blocks of that length.

    Parameters
    ----------
    variable : Variable
    fit : Fit
        As chosen.
    blocks : ObservedBlocks

    Raises
    ------
    InputError
        Fewer blocks are declared than there are maxima.
    """
    if variable.period is None or fit.family not in FAMILIES or fit.method not in ("likelihood", "l_moments"):
        return None, ()
    shape = fit.fixed.get("shape") if fit.family == "gev" else None
    maxima = fit_maxima(
        fit.observations,
        fit.family,
        method=fit.method,
        shape=shape,
        block_years=variable.period,
        blocks_expected=blocks.expected,
        coverage=blocks.coverage,
    )
    years = [t for t in YEARS if t > variable.period]
    levels = return_levels(maxima, years)
    where = f"variables.{variable.name}"
    known = {d.code for d in fit.doubts}
    doubts = [
        Doubt(d.code, d.message, where) for d in (*maxima.doubts, *levels.doubts) if d.code not in known
    ]
    return BlockMaxima(maxima, levels, empirical_return_periods(maxima)), (
        *doubts,
        *bounded_tail(maxima, variable.period, where),
    )


def bounded_tail(maxima: MaximaFit, block_years: float, where: str) -> tuple[Doubt, ...]:
    """Doubt a family without upper end where the sample speaks for one.

    The sample speaks for an upper end where the interval of the shape of generalised extreme values is negative.
    """
    if maxima.fit.family == "gev" or maxima.fit.method != "likelihood":
        return ()
    rough = fit_family(maxima.fit.observations, "gev")
    if not rough.converged or not rough.parameters["shape"] + rough.standard_errors["shape"] < 0.0:
        return ()  # far from it, whatever the interval by likelihood
    try:
        free = fit_maxima(maxima.fit.observations, "gev", block_years=block_years)
    except InputError:
        return ()
    if free.shape_interval is None or not free.shape_interval[1] < 0.0:
        return ()
    p = free.fit.parameters
    end = p["location"] - p["scale"] / p["shape"]
    text = (
        f"The family {maxima.fit.family} has no upper end, but the sample speaks for one: as generalised extreme "
        f"values its shape is {free.shape_interval[0]:.2g} to {free.shape_interval[1]:.2g} (95 %), the end about "
        f"{end:.4g} in the unit of the records. Is the action bounded?"
    )
    return (Doubt("bounded-action", text, where),)
