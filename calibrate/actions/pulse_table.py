"""A sum of pulses at many values, interpolated in standard normal space, where it is nearly linear."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.actions.slopes import Slopes
from calibrate.distributions.normal_tails import log_ndtr, log_phi

Array = npt.NDArray[np.float64]
Columns = npt.NDArray[np.intp]


@dataclass(frozen=True, slots=True, eq=False)
class PulseTable:
    """A sum at many values, interpolated in standard normal space where it is nearly linear.

    Cubic by value and slope. Rows of ``value`` rise; columns are situations. ``by_weight`` is per slope by value.
    """

    value: Array
    u: Array
    by_value: Array
    by_weight: Array
    from_zero: bool

    def __call__(self, x: Array, columns: Columns, *, slopes: bool) -> Slopes:
        """Return the tails, and their slopes if wanted, at x, each in its column."""
        j = np.clip(np.sum(self.value[:, columns] <= x, axis=0) - 1, 0, self.value.shape[0] - 2)
        left, right = self.value[j, columns], self.value[j + 1, columns]
        width = np.where(right > left, right - left, 1.0)
        t = (x - left) / width
        inside = (t >= 0.0) & (t <= 1.0)
        t = np.clip(t, 0.0, 1.0)
        u, slope = _hermite(t, width, _pair(self.u, j, columns), _pair(self.by_value, j, columns))
        # Beyond the ends of the table straight on; they are at 36 standard deviations.
        beyond = np.where(x < left, x - left, np.maximum(x - right, 0.0))
        u = np.where(inside, u, u + slope * beyond)
        low, high = log_ndtr(u), log_ndtr(-u)
        if self.from_zero:
            low, high = np.where(x < 0.0, -np.inf, low), np.where(x < 0.0, 0.0, high)
        if not slopes:
            return Slopes(low, high, low, low[None])
        hazard = np.where(np.isneginf(low), 0.0, np.exp(log_phi(u) - low))
        bends = [_mean_slopes(self.value, row) for row in self.by_weight]
        by_weight = [
            _hermite(t, width, _pair(row, j, columns), _pair(bend, j, columns))[0]
            for row, bend in zip(self.by_weight, bends, strict=True)
        ]
        return Slopes(low, high, hazard * slope, hazard * slope * np.array(by_weight))


def _pair(rows: Array, j: Columns, columns: Columns) -> tuple[Array, Array]:
    return rows[j, columns], rows[j + 1, columns]


def _hermite(
    t: Array, width: Array, ends: tuple[Array, Array], slopes: tuple[Array, Array]
) -> tuple[Array, Array]:
    """Return value and slope of the cubic with these values and slopes at t = 0 and 1, width apart."""
    (y0, y1), (s0, s1) = ends, (width * slopes[0], width * slopes[1])
    rise = y1 - y0
    bend, twist = 3.0 * rise - 2.0 * s0 - s1, s0 + s1 - 2.0 * rise
    return y0 + t * (s0 + t * (bend + t * twist)), (s0 + t * (2.0 * bend + t * 3.0 * twist)) / width


def _mean_slopes(x: Array, y: Array) -> Array:
    """Return the slope of the parabola through each value and its neighbours; rows rise along the first axis."""
    width = np.diff(x, axis=0)
    secant = np.where(width > 0.0, np.diff(y, axis=0) / np.where(width > 0.0, width, 1.0), 0.0)
    left, right = width[:-1], width[1:]
    inner = (secant[:-1] * right + secant[1:] * left) / np.where(left + right > 0.0, left + right, 1.0)
    return np.concatenate((secant[:1], inner, secant[-1:]))


def interpolated(wanted: Array, u: Array, w: Array) -> Array:
    """Return the w at which u takes the wanted values, about; u and w of shape (j, k) rise along the first axis."""
    j = np.clip(np.sum(u[:, None] <= wanted[:, None], axis=0) - 1, 0, u.shape[0] - 2)
    left, right = (np.take_along_axis(u, i, axis=0) for i in (j, j + 1))
    w_left, w_right = (np.take_along_axis(w, i, axis=0) for i in (j, j + 1))
    share = (wanted[:, None] - left) / np.where(right > left, right - left, 1.0)
    return np.asarray(w_left + np.clip(share, 0.0, 1.0) * (w_right - w_left))
