"""Exact derivatives of beta at the design points."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.reliability.limit_state import LimitState
from calibrate.reliability.result import Reliability

Array = npt.NDArray[np.float64]


def beta_slope(reliability: Reliability, g_slope: npt.ArrayLike) -> Array:
    """Return d beta/d p from dg/dp at the design point with u held fixed.

    Parameters
    ----------
    reliability : Reliability
        Of n situations.
    g_slope : array
        dg/dp, in units of g per unit of p; shape () or (..., n).

    Notes
    -----
    As the design point is the nearest one, its own movement changes beta in second order only:
    d beta/d p = (dg/dp at fixed u*) / |grad_u g| (M. Hohenbichler and R. Rackwitz, "Sensitivity and importance
    measures in structural reliability", Civil Engineering Systems 3, 1986).
    """
    return np.asarray(g_slope, dtype=np.float64) / reliability.gradient_norm


def parameter_slopes(
    reliability: Reliability, limit_state: LimitState, distributions: Sequence[Distribution]
) -> dict[str, dict[str, Array]]:
    """Return d beta/d p for every own parameter p of every basic variable.

    Parameters
    ----------
    reliability : Reliability
        Of n situations.
    limit_state : LimitState
        The one it belongs to.
    distributions : sequence of Distribution
        In the order of ``reliability.variables``.

    Returns
    -------
    dict
        ``{variable: {parameter: array (n,)}}``; NaN where there is no design point. Parameters of an
        extreme of a distribution are those of its base.
    """
    u, x = reliability.u, reliability.x
    slopes = [d.x_slope(row)[1] for d, row in zip(distributions, u, strict=True)]
    with np.errstate(all="ignore"):
        _, by_x = limit_state.gradient(x, None, slopes)
        return {
            name: {
                parameter: np.broadcast_to(beta_slope(reliability, by * dx), (reliability.n,))
                for parameter, dx in distribution.parameter_slopes(row).items()
            }
            for name, distribution, row, by in zip(reliability.variables, distributions, u, by_x, strict=True)
        }
