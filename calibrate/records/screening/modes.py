"""Failure modes as competing risks: what each mode's own strength is known from."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from calibrate.errors import InputError
from calibrate.records.observations import Array, Observations
from calibrate.records.screening.groups import coded
from calibrate.records.screening.kaplan_meier import KaplanMeier, kaplan_meier

NOT_STATED = "not stated"
"""Name under which failures without a mode are counted."""


@dataclass(frozen=True, slots=True, eq=False)
class FailureMode:
    """One mode among several.

    Attributes
    ----------
    name : str
    specimens : tuple of int
        Those that failed in this mode, positions in the sample from 0.
    observations : Observations
        To fit the mode's strength with: failures in other modes are
        right-censored where they failed.
    left_out : tuple of int
        Specimens of which nothing is known for this mode: they failed in
        another mode at an unknown load below a bound.
    survival : KaplanMeier
        Of the mode's strength, as if it were the only mode.
    incidence : array, shape (k,)
        Share of all specimens that fail in this mode at ``survival.values``
        or below, in the presence of the other modes.
    """

    name: str
    specimens: tuple[int, ...]
    observations: Observations
    left_out: tuple[int, ...]
    survival: KaplanMeier
    incidence: Array


def failure_modes(observations: Observations, modes: Sequence[str | None]) -> tuple[FailureMode, ...]:
    """Separate the modes.

    Parameters
    ----------
    observations : Observations
    modes : sequence of str or None, length n
        Mode of each specimen; of right-censored ones it is ignored. Failures
        without one count as a mode of their own, `NOT_STATED`.

    Returns
    -------
    tuple of FailureMode
        The most frequent first.

    Raises
    ------
    InputError
        Not one mode for each specimen.

    Notes
    -----
    Valid where the strengths in the modes are independent. The cumulative
    incidence is ``sum S(x-) d_mode/n`` over the failures, with S the
    product-limit estimate of all modes together; the incidences of all modes
    and the survival add up to one.

    References
    ----------
    .. [1] J. D. Kalbfleisch, R. L. Prentice, The Statistical Analysis of
       Failure Time Data, 2nd ed. (2002), chapter 8.
    """
    if len(modes) != observations.n:
        raise InputError(f"There are {observations.n} specimens but {len(modes)} failure modes.")
    failed = ~observations.right
    named = [
        (m if m is not None and str(m).strip() else NOT_STATED) if f else None
        for m, f in zip(modes, failed, strict=True)
    ]
    together = kaplan_meier(observations)
    before = np.concatenate([[1.0], together.survival[:-1]])
    found = []
    names, codes = coded(named)
    for i, name in enumerate(names):
        mine = codes == i
        other = failed & ~mine
        unknown = other & observations.left
        own = Observations(
            observations.lower[~unknown],
            np.where(other, np.inf, observations.upper)[~unknown],
            observations.above,
            observations.below,
        )
        survival = kaplan_meier(own)
        step = np.searchsorted(together.values, survival.values)
        share = before[step] * survival.failures / together.at_risk[step]
        found.append(
            FailureMode(
                name=name,
                specimens=tuple(int(j) for j in np.flatnonzero(mine)),
                observations=own,
                left_out=tuple(int(j) for j in np.flatnonzero(unknown)),
                survival=survival,
                incidence=np.cumsum(share),
            )
        )
    return tuple(sorted(found, key=lambda mode: -len(mode.specimens)))
