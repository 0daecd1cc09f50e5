"""Variables fitted to block maxima: how long the record is, and what its return levels are."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.maxima import MaximaFit, fit_maxima
from calibrate.actions.return_levels import YEARS, ReturnLevels, empirical_return_periods, return_levels
from calibrate.errors import Doubt
from calibrate.fitting import Fit
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


def block_maxima(
    variable: Variable, fit: Fit, blocks: int | None
) -> tuple[BlockMaxima | None, tuple[Doubt, ...]]:
    """Look at a fitted action with a period as maxima of blocks of that length.

    Parameters
    ----------
    variable : Variable
    fit : Fit
        As chosen.
    blocks : int or None
        Blocks between begin and end of the record, those without a maximum included.

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
        blocks_expected=blocks,
    )
    years = [t for t in YEARS if t > variable.period]
    levels = return_levels(maxima, years)
    where = f"variables.{variable.name}"
    known = {d.code for d in fit.doubts}
    doubts = [
        Doubt(d.code, d.message, where) for d in (*maxima.doubts, *levels.doubts) if d.code not in known
    ]
    return BlockMaxima(maxima, levels, empirical_return_periods(maxima)), tuple(doubts)
