"""Medians that are off by the ratio of two units."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.records.observations import Array
from calibrate.records.screening.groups import coded, group_medians
from calibrate.records.screening.moments import robust_sd

FACTORS: tuple[tuple[float, str], ...] = (
    (4.4482216152605, "lbf or N (kip or kN)"),
    (6.894757293168361, "ksi or MPa (psi or kPa)"),
    (9.80665, "kgf or N (tf or kN)"),
    (10.0, "cm or mm"),
    (25.4, "in or mm"),
    (100.0, "m or cm"),
    (1000.0 / 9.80665, "kN or kgf"),
    (145.03773773020923, "MPa or psi"),
    (224.80894309971046, "kN or lbf"),
    (304.8, "ft or mm"),
    (1000.0, "kN or N (MPa or kPa, m or mm)"),
    (1e6, "MPa or Pa"),
)
"""Ratios of units that are taken for each other. 1 kgf = 9.80665 N, 1 lb = 0.45359237 kg, 1 in = 25.4 mm: exact by
definition, the others follow."""

_STANDARD_ERRORS = 5.0
_LEAST_TOLERANCE = 0.3
_MOST_TOLERANCE = 0.4
_NOMINAL_SPAN = 1.5
_LEAST_DISTANCE = math.log(2.5)
_MEDIAN_EFFICIENCY = math.pi / 2.0


@dataclass(frozen=True, slots=True)
class Slip:
    """A median that is off by about the ratio of two units.

    Attributes
    ----------
    lot : str or None
        None when it is the whole sample.
    median : float
    reference : float
        Median of the other lots, nominal value, or geometric middle of the
        declared range.
    ratio : float
        ``median/reference``.
    factors : tuple of float
        Ratios of units within the scatter, the nearest first, all above 1;
        ``ratio`` is near one of them or near its inverse.
    units : tuple of str
        What each ratio means.
    specimens : tuple of int
        Positions in the sample, from 0.
    """

    lot: str | None
    median: float
    reference: float
    ratio: float
    factors: tuple[float, ...]
    units: tuple[str, ...]
    specimens: tuple[int, ...]


def lot_slips(values: ArrayLike, lots: Sequence[str | None]) -> tuple[Slip, ...]:
    """Return the lots whose median is off from that of the others by a ratio of units.

    Parameters
    ----------
    values : array_like, shape (n,)
    lots : sequence of str or None, length n
        Specimens without a lot are left out.

    Notes
    -----
    Suspects are left out and the others judged again, until none is suspect;
    where half of the lots or more are, only the farthest is left out, of two
    equally far ones the smaller, then the later one. The span of the others
    is that of their medians, without those that are off by three. With s the
    robust coefficient of variation within lots, the log-median of a lot has an
    error of ``se^2 = pi/2 s^2 (1/n_lot + 1/n_others)`` against the others. A
    suspect lies beyond their span by a factor of 2.5, by 5 se and by the span
    itself, and comes to lie in it, give or take 3 se or the span (30 % at
    least and 40 % at most), when divided by a ratio of units: lots that differ by thickness
    or grade stay in peace. The limits are a choice.
    """
    x = np.asarray(values, dtype=np.float64)
    names, codes = coded(lots)
    medians, _ = group_medians(x, codes, len(names))
    codes = np.where(codes >= 0, np.where(np.append(medians, -1.0)[codes] > 0.0, codes, -1), -1)
    found: list[Slip] = []
    while (remaining := np.unique(codes[codes >= 0])).size > 1:
        suspects = _suspects(x, names, codes)
        if 2 * len(suspects) >= remaining.size:  # so many that the reference itself may be off: one at a time
            suspects = suspects[:1]
        if not suspects:
            break
        found.extend(suspects)
        for slip in suspects:
            codes[list(slip.specimens)] = -1
    return tuple(found)


def _suspects(x: Array, names: Sequence[str], codes: NDArray[np.int64]) -> list[Slip]:
    """Return the lots that are off against all others, the farthest first."""
    medians, sizes = group_medians(x, codes, len(names))
    labelled = np.flatnonzero(codes >= 0)
    order = labelled[np.argsort(x[labelled], kind="stable")]
    ordered, owner, n = x[order], codes[order], order.size
    within = robust_sd(x[labelled] / medians[codes[labelled]])
    # Without the lot, the others' median lies between these two at least.
    low, high = ordered[(n - sizes - 1) // 2], ordered[np.minimum((n - sizes) // 2 + sizes, n - 1)]
    least = math.exp(_LEAST_DISTANCE)
    found: list[tuple[tuple[float, int, int], Slip]] = []
    for i in np.flatnonzero((sizes > 0) & ((medians >= least * low) | (least * medians <= high))):
        reference = _median_without(ordered, np.flatnonzero(owner == i))
        if reference <= 0.0:
            continue
        error = math.sqrt(_MEDIAN_EFFICIENCY * within**2 * (1.0 / sizes[i] + 1.0 / (n - sizes[i])))
        low_end, high_end = _span(np.delete(medians, i)[np.delete(sizes, i) > 0], reference)
        median = math.log(float(medians[i]))
        beyond = max(median - high_end, low_end - median)
        if beyond < max(_LEAST_DISTANCE, _STANDARD_ERRORS * error, high_end - low_end):
            continue
        tolerance = min(max(3.0 * error, high_end - low_end, _LEAST_TOLERANCE), _MOST_TOLERANCE)
        near = _near(median, low_end - tolerance, high_end + tolerance, math.log(reference))
        if near:
            at = tuple(int(j) for j in np.flatnonzero(codes == i))
            ratio = float(medians[i]) / reference
            slip = Slip(names[int(i)], float(medians[i]), reference, ratio, *_told(near), at)
            found.append(((-round(beyond, 9), len(at), -int(i)), slip))
    return [slip for _, slip in sorted(found, key=lambda f: f[0])]


def _span(medians: Array, reference: float) -> tuple[float, float]:
    """Return the logarithms between which lots lie that are not themselves far off."""
    logs = np.log(medians[(medians < 3.0 * reference) & (3.0 * medians > reference)])
    middle = math.log(reference)
    return min([middle, *logs]), max([middle, *logs])


def _median_without(ordered: Array, ranks: NDArray[np.int64]) -> float:
    """Return the median of ordered values without those at some ranks, themselves in order."""
    n = ordered.size - ranks.size
    middle = np.array([(n - 1) // 2, n // 2])
    shift = np.searchsorted(ranks - np.arange(ranks.size), middle, side="right")
    return float(ordered[middle + shift].mean())


def sample_slip(
    values: ArrayLike, *, declared_range: tuple[float, float] | None = None, nominal: float | None = None
) -> Slip | None:
    """Return whether the sample's median is off from what was declared by a ratio of units.

    Parameters
    ----------
    values : array_like, shape (n,)
    declared_range : (low, high), optional
        Within which the values are expected, both positive.
    nominal : float, optional
        Positive; taken as a range from 1/1.5 to 1.5 times the value, since a
        mean may well differ from a nominal value. Used where no range is
        declared.

    Notes
    -----
    The median has to lie beyond 2.5 times the nearer end of the range, and
    by more than five standard errors; divided by a factor it has to come to
    lie in the range.
    """
    x = np.asarray(values, dtype=np.float64)
    if declared_range is None:
        if nominal is None:
            return None
        declared_range = (nominal / _NOMINAL_SPAN, nominal * _NOMINAL_SPAN)
    low, high = declared_range
    median = float(np.median(x))
    if not (0.0 < low <= high and median > 0.0):
        return None  # logarithms need a positive quantity
    error = math.sqrt(_MEDIAN_EFFICIENCY / x.size) * robust_sd(x) / median
    beyond = max(math.log(median / high), math.log(low / median))
    if beyond < max(_LEAST_DISTANCE, _STANDARD_ERRORS * error):
        return None
    reference = math.sqrt(low) * math.sqrt(high)
    allowance = max(3.0 * error, 0.02)
    near = _near(math.log(median), math.log(low) - allowance, math.log(high) + allowance, math.log(reference))
    if not near:
        return None
    return Slip(None, median, reference, median / reference, *_told(near), tuple(range(x.size)))


def _near(median: float, low: float, high: float, middle: float) -> list[tuple[float, str]]:
    """Return the factors that bring a median into the span, that which brings it nearest to the middle first."""
    sign = 1.0 if median > middle else -1.0
    moved = [(median - sign * math.log(factor), (factor, text)) for factor, text in FACTORS]
    return [f for _, f in sorted((abs(m - middle), f) for m, f in moved if low <= m <= high)]


def _told(near: list[tuple[float, str]]) -> tuple[tuple[float, ...], tuple[str, ...]]:
    return tuple(f for f, _ in near), tuple(text for _, text in near)
