"""All checks of one sample. Nothing is removed: what is found is told."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import Doubt, InputError
from calibrate.records.observations import Array, Observations
from calibrate.records.screening import findings as tell
from calibrate.records.screening.censored_normal import censored_normal
from calibrate.records.screening.findings import Finding
from calibrate.records.screening.modes import FailureMode, failure_modes
from calibrate.records.screening.moments import Moments, moments
from calibrate.records.screening.outliers import (
    Esd,
    Influence,
    esd_within_lots,
    generalised_esd,
    influence,
    most_influential,
)
from calibrate.records.screening.repeats import Repeats, repeats
from calibrate.records.screening.tail import Tail, lower_tail
from calibrate.records.screening.trend import Trend, trend
from calibrate.records.screening.unit_slips import Slip, lot_slips, sample_slip


@dataclass(frozen=True, slots=True, eq=False)
class Screening:
    """What screening found in one sample.

    Attributes
    ----------
    n, n_exact, n_right, n_left, n_interval : int
        Specimens, and how they are known.
    moments : Moments or None
        Of the exact values; None without any.
    repeats : Repeats or None
        Likewise; None below two.
    slips : tuple of Slip
        Of lots, then of the whole sample.
    esd : tuple of Esd
        Outlier tests of the exact values on the raw scale and, where all are
        positive, on the logarithmic one; then within lots where there are
        some. Empty below three values.
    influences : tuple of Influence
        Of the suspects, and of the specimen that weighs most.
    trend : Trend or None
        None where no order is given or it cannot be tested.
    modes : tuple of FailureMode
        Empty where no modes are given.
    tail : Tail or None
        Only of samples that are exact and not truncated.
    findings : tuple of Finding

    Notes
    -----
    ``repeats``, ``esd``, ``influences``, ``trend`` and ``tail`` leave out
    lots that are suspected of another unit, which would hide all else; ``esd``
    and ``influences`` also specimens that share one load suspiciously.
    """

    n: int
    n_exact: int
    n_right: int
    n_left: int
    n_interval: int
    moments: Moments | None
    repeats: Repeats | None
    slips: tuple[Slip, ...]
    esd: tuple[Esd, ...]
    influences: tuple[Influence, ...]
    trend: Trend | None
    modes: tuple[FailureMode, ...]
    tail: Tail | None
    findings: tuple[Finding, ...]

    def doubts(self, where: str) -> tuple[Doubt, ...]:
        """Return the findings that are doubts, as recorded beside numbers."""
        return tuple(Doubt(f.code, f.message, where) for f in self.findings if f.level == "doubt")


def screen(
    values: ArrayLike | Observations,
    *,
    lots: Sequence[str | None] | None = None,
    order: ArrayLike | None = None,
    modes: Sequence[str | None] | None = None,
    declared_range: tuple[float, float] | None = None,
    nominal: float | None = None,
    resistance: bool = False,
    unit: str = "",
    names: Sequence[str] | None = None,
    seed: int = 0,
) -> Screening:
    """Screen one sample.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        In the unit in which they were recorded: conversion hides rounding.
    lots, modes : sequence of str or None, length n, optional
        Lot and failure mode of each specimen.
    order : array_like, shape (n,), optional
        Rank, time or date of testing. The order of the sample is not taken
        for it.
    declared_range : (low, high), optional
        Within which values are expected.
    nominal : float, optional
        Nominal value of the quantity.
    resistance : bool
        Whether a nominal value above the mean is odd.
    unit : str
        Written after values in messages.
    names : sequence of str, length n, optional
        Of the specimens in messages; their numbers from 1 by default.
    seed : int
        Of simulated null distributions.

    Raises
    ------
    InputError
        No values, values that are not finite, labels of another length, or a
        declared range in the wrong order.

    Notes
    -----
    Each test that ends in a doubt has a level of 5 % (1 % for equal values):
    of many ordinary samples one in twenty alarms in each check.
    """
    observations = values if isinstance(values, Observations) else _observations(values)
    n = observations.n
    _check(n, declared_range, {"lots": lots, "orders": order, "modes": modes, "names": names})
    x = observations.values[observations.exact]

    def name(i: int) -> str:
        return str(i + 1) if names is None else str(names[i])

    found: list[Finding] = []
    summary = moments(x) if x.size else None
    slips = lot_slips(observations.values, lots) if lots is not None else ()
    found.extend(tell.slip_findings(slips, unit, ""))
    whole = sample_slip(observations.values, declared_range=declared_range, nominal=nominal)
    if whole is not None:
        against = "the middle of the declared range" if declared_range is not None else "the nominal value"
        found.extend(tell.slip_findings([whole], unit, against))

    # Specimens in another unit would hide everything else: the other checks look at the rest.
    at = np.setdiff1d(np.arange(n), [i for slip in slips for i in slip.specimens])
    rest = observations.taken(at)
    sure = at[rest.exact]
    x = observations.values[sure]
    repeated = None
    if x.size > 1:
        repeated = _relocated_ties(repeats(rest), at)
        found.extend(tell.tie_findings(repeated, unit))
    if x.size:
        found.extend(_censoring(rest, at, float(x.mean())))
        outside = () if whole is not None else _outside(observations, at, declared_range)
        expected = nominal if whole is None and resistance else None
        found.extend(tell.declared_findings(float(x.mean()), outside, expected, unit, name))

    tied = () if repeated is None else tuple(i for tie in repeated.ties for i in tie.specimens)
    # A sample that begins at a threshold or a proof load is no normal or lognormal one, which the tests ask about.
    tested = np.setdiff1d(sure, tied) if not observations.truncated else sure[:0]
    esd, influences = _outliers(observations.values, tested, lots)
    found.extend(tell.outlier_findings(esd, influences, name))
    drift = trend(x, np.asarray(order)[sure]) if order is not None else None
    if drift is not None:
        found.extend(tell.trend_findings(drift, unit, lots=lots is not None))
    by_mode = failure_modes(observations, modes) if modes is not None else ()
    found.extend(tell.mode_findings(by_mode))
    tail = lower_tail(x, seed=seed) if rest.complete else None
    if tail is not None:
        found.extend(tell.tail_findings(tail, unit))

    return Screening(
        n=n,
        n_exact=observations.n_exact,
        n_right=int(np.count_nonzero(observations.right)),
        n_left=int(np.count_nonzero(observations.left)),
        n_interval=int(np.count_nonzero(observations.interval)),
        moments=summary,
        repeats=repeated,
        slips=slips if whole is None else (*slips, whole),
        esd=esd,
        influences=influences,
        trend=drift,
        modes=by_mode,
        tail=tail,
        findings=tuple(found),
    )


def _observations(values: ArrayLike) -> Observations:
    x = np.asarray(values, dtype=np.float64)
    if x.ndim != 1 or not np.isfinite(x).all():
        raise InputError("Screening takes a list of finite numbers.")
    return Observations.of(x)


def _check(n: int, declared_range: tuple[float, float] | None, labels: dict[str, Any]) -> None:
    if n == 0:
        raise InputError("There are no values to screen.")
    for what, given in labels.items():
        if given is not None and len(given) != n:
            raise InputError(f"There are {n} specimens but {len(given)} {what}.")
    if declared_range is not None and not declared_range[0] <= declared_range[1]:
        raise InputError(
            f"The declared range from {declared_range[0]:g} to {declared_range[1]:g} is in the wrong order."
        )


def _outside(
    observations: Observations, at: NDArray[np.int64], declared_range: tuple[float, float] | None
) -> tuple[int, ...]:
    if declared_range is None:
        return ()
    out = (observations.upper < declared_range[0]) | (observations.lower > declared_range[1])
    return tuple(int(i) for i in at[out[at]])


def _outliers(
    values: Array, at: NDArray[np.int64], lots: Sequence[str | None] | None
) -> tuple[tuple[Esd, ...], tuple[Influence, ...]]:
    """Test some of the specimens; positions in the results are those in the whole sample."""
    x = values[at]
    if x.size < 3:
        return (), ()
    scales = (False, True) if x.min() > 0.0 else (False,)
    tests = [generalised_esd(x, logarithmic=s) for s in scales]
    if lots is not None:
        tests.extend(esd_within_lots(x, [lots[i] for i in at]))
    weighty = dict.fromkeys([*(i for t in tests for i in t.specimens), most_influential(x)])
    influences = tuple(replace(influence(x, i), specimen=int(at[i])) for i in weighty)
    moved = tuple(
        replace(t, steps=tuple(replace(s, specimen=int(at[s.specimen])) for s in t.steps)) for t in tests
    )
    return moved, influences


def _relocated_ties(found: Repeats, at: NDArray[np.int64]) -> Repeats:
    ties = tuple(replace(t, specimens=tuple(int(at[i]) for i in t.specimens)) for t in found.ties)
    return replace(found, ties=ties)


def _censoring(rest: Observations, at: NDArray[np.int64], mean: float) -> Iterator[Finding]:
    """Tell how many are known by a bound, and what they do to the mean."""
    right, left = rest.right, rest.left
    if not (right.any() or left.any()):
        return
    counts = [
        f"{int(np.count_nonzero(m))} {kind}" for m, kind in ((right, "right"), (left, "left")) if m.any()
    ]
    text = f"Of {rest.n} specimens {' and '.join(counts)}-censored ones are known by a bound only."
    estimate = censored_normal(rest)
    if estimate is not None:
        text += (
            f" The mean is {tell.number(mean)} without them and {tell.number(estimate[0])} "
            "with them (normal likelihood)."
        )
    yield Finding("censored", "note", text, tuple(int(i) for i in at[right | left]))
