"""Failure modes as competing risks: each mode's strength fitted by itself, and the weakest of them together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.fitting.fits import fit_family
from calibrate.fitting.result import Fit
from calibrate.records.screening import FailureMode

LEAST = 3
"""Failures in a mode below which it is not fitted."""


@dataclass(frozen=True, slots=True, eq=False)
class ModeFit:
    """One failure mode.

    Attributes
    ----------
    name : str
    failures, survivors : int
        Specimens that failed in this mode, and that are right-censored for it.
    fit : Fit or None
        None with fewer than `LEAST` failures.
    """

    name: str
    failures: int
    survivors: int
    fit: Fit | None


def fit_modes(modes: Sequence[FailureMode], family: str) -> tuple[ModeFit, ...]:
    """Fit each mode by the likelihood in which failures in other modes are survivors of this one.

    Parameters
    ----------
    modes : sequence of FailureMode
    family : str
    """
    found = []
    for mode in modes:
        fit = fit_family(mode.observations, family) if len(mode.specimens) >= LEAST else None
        survivors = int(mode.observations.right.sum())
        found.append(ModeFit(mode.name, len(mode.specimens), survivors, fit))
    return tuple(found)


def weakest_below(modes: Sequence[ModeFit], x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the probability that the weakest of independent modes lies below x.

    Parameters
    ----------
    modes : sequence of ModeFit
        Those without a fit are left out.
    x : array
    """
    log_sf = np.zeros(np.shape(x))
    for mode in modes:
        if mode.fit is not None and mode.fit.distribution is not None:
            log_sf = log_sf + mode.fit.distribution.logsf(x)
    return np.asarray(-np.expm1(log_sf))
