"""The exact maximum of a sum of pulse processes (Ferry Borges and Castanheta), as a distribution."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.actions.combination import Action
from calibrate.actions.intermittent import Intermittent
from calibrate.actions.pulse_sum import KNOTS, NODES, REACH, WEIGHTS, PulseSum, pulse_sum, zeros_u
from calibrate.distributions.normal_tails import u_from_log_tails
from calibrate.errors import InputError

Array = npt.NDArray[np.float64]

MOST_ACTIONS = 3
"""Nested quadrature over more actions would take minutes."""

_AFTER_ZERO = np.array([0.05, 0.2, 0.5])
_FARTHEST = 20.0


@dataclass(frozen=True, slots=True, eq=False)
class CombinedMaximum:
    """Largest value of the sum of pulse processes in the reference period; made by :func:`fbc_maximum`.

    Parameters
    ----------
    actions : tuple of Action
        In the order of rising repetitions.
    """

    actions: tuple[Action, ...]
    pulses: PulseSum

    def _sum_tails(self, x: Array) -> tuple[Array, Array]:
        low, high = self.pulses.tails(x.ravel())
        return low.reshape(x.shape), high.reshape(x.shape)

    def _tails(self, x: npt.ArrayLike) -> tuple[Array, Array]:
        values = np.asarray(x, dtype=np.float64)
        finite = np.isfinite(values)
        with np.errstate(all="ignore"):
            low, high = self._sum_tails(np.where(finite, values, 0.0))
        zero, nothing = np.zeros(()), np.full((), -np.inf)
        ends = np.where(np.isnan(values), np.nan, np.where(values > 0.0, zero, nothing))
        other = np.where(np.isnan(values), np.nan, np.where(values > 0.0, nothing, zero))
        return np.where(finite, low, ends), np.where(finite, high, other)

    def logcdf(self, x: npt.ArrayLike) -> Array:
        """Return ln F(x)."""
        return self._tails(x)[0]

    def logsf(self, x: npt.ArrayLike) -> Array:
        """Return ln(1 - F(x))."""
        return self._tails(x)[1]

    def cdf(self, x: npt.ArrayLike) -> Array:
        """Return F(x)."""
        return np.exp(self.logcdf(x))

    def sf(self, x: npt.ArrayLike) -> Array:
        """Return 1 - F(x) with small relative error."""
        return np.exp(self.logsf(x))

    def u(self, x: npt.ArrayLike) -> Array:
        """Return the standard normal value of x."""
        return u_from_log_tails(*self._tails(x))

    def x(self, u: npt.ArrayLike) -> Array:
        """Return the value at standard normal u, |u| <= 20; NaN beyond."""
        from scipy.optimize import elementwise

        u = np.asarray(u, dtype=np.float64)

        def excess(w: Array, wanted: Array) -> Array:
            u = u_from_log_tails(*self._sum_tails(self.pulses.scale(w)[0]))
            return np.clip(u, -REACH, REACH) - wanted

        usable = np.abs(u) <= _FARTHEST
        wanted = np.where(usable, u, 0.0)
        at_zero = np.zeros(u.shape, dtype=np.bool_)
        if all(isinstance(d, Intermittent) for d in self.pulses.maxima):
            at_zero = wanted <= self.u(0.0)
            wanted = np.where(at_zero, _FARTHEST, wanted)
        ends = (np.full(u.shape, -REACH + 1e-9), np.full(u.shape, REACH - 1e-9))
        with np.errstate(all="ignore"):
            found = elementwise.find_root(
                excess, ends, args=(wanted,), tolerances={"xatol": 1e-11, "xrtol": 1e-12}
            )
            x = self.pulses.scale(np.asarray(found.x))[0]
        return np.where(usable, np.where(at_zero, 0.0, x), np.nan)

    def ppf(self, p: npt.ArrayLike) -> Array:
        """Return the quantile of non-exceedance probability p; NaN where p is not inside (0, 1)."""
        return self.x(special.ndtri(np.asarray(p, dtype=np.float64)))

    def isf(self, q: npt.ArrayLike) -> Array:
        """Return the quantile of exceedance probability q; NaN where q is not inside (0, 1)."""
        return self.x(-special.ndtri(np.asarray(q, dtype=np.float64)))

    def moments(self) -> tuple[float, float]:
        """Return mean and standard deviation; inf or NaN where those of an action are.

        Notes
        -----
        With c any value, E(X - c) is the integral of 1 - F above c less that of F below it, and E(X - c)**2 is twice
        the integral of |x - c| times the same.
        """
        sds = [float(d.sd) for d in self.pulses.maxima]
        if not np.isfinite(sds).all():
            return float(sum(float(d.mean) for d in self.pulses.maxima)), float(sum(sds))
        with np.errstate(all="ignore"):
            x, width = self._pieces()
            low, high = (np.exp(t) for t in self._tails(x))
        centre = float(self.pulses.scale(np.zeros(()))[0])
        above = x > centre
        each = width * np.where(above, high, low)
        # Where no probability is left, the values may have run out of range.
        each, offset = np.where(each > 0.0, each, 0.0), np.where(each > 0.0, x - centre, 0.0)
        mean = float(np.sum(np.where(above, each, -each)))
        square = float(2.0 * np.sum(np.abs(offset) * each))
        return centre + mean, float(np.sqrt(square - mean**2))

    def _pieces(self) -> tuple[Array, Array]:
        """Return nodes and weights for integrals over x, in pieces of standard normal space.

        Above a probability of zero the quantile begins with an infinite slope, so there x itself runs, in squares.
        """
        zeros = np.setdiff1d(zeros_u(self.pulses.maxima), KNOTS)
        knots = np.union1d(self._dense_knots(np.union1d(KNOTS, zeros)), zeros[:, None] + _AFTER_ZERO)
        half = 0.5 * np.diff(knots)[:, None]
        t = 1.0 + NODES
        x, slope = self.pulses.scale(knots[:-1, None] + half * t)
        width = half * slope * WEIGHTS
        begins = np.isin(knots[:-1], zeros)
        ends = self.pulses.scale(knots)[0]
        length = (np.diff(ends)[begins])[:, None]
        x[begins] = ends[:-1][begins][:, None] + length * (0.5 * t) ** 2
        width[begins] = length * 0.5 * t * WEIGHTS
        return x.ravel(), width.ravel()

    def _dense_knots(self, w: Array) -> Array:
        """Return values of w between which neither the quantiles of the maxima nor the sum moves far."""
        if len(self.actions) == 1:
            return w
        u = u_from_log_tails(*self._sum_tails(self.pulses.scale(w)[0]))
        counts = np.maximum(1, np.ceil(np.diff(np.clip(u, -12.0, 12.0))))
        parts = [
            np.linspace(low, high, int(n), endpoint=False)
            for low, high, n in zip(w[:-1], w[1:], counts, strict=True)
        ]
        return np.append(np.concatenate(parts), w[-1])

    @property
    def mean(self) -> float:
        """Mean."""
        return self.moments()[0]

    @property
    def sd(self) -> float:
        """Standard deviation."""
        return self.moments()[1]


def fbc_maximum(actions: Sequence[Action]) -> CombinedMaximum:
    """Return the distribution of the largest sum of one to three actions in the reference period.

    Parameters
    ----------
    actions : sequence of Action
        In any order, distributions of shape (). Coefficients of the actions are taken in by
        ``distribution.scaled(coefficient)``.

    Raises
    ------
    InputError
        There are no actions or more than three, or one has parameters for several situations.

    Notes
    -----
    J. Ferry Borges and M. Castanheta, "Structural safety" (1971, from memory). Exact where the number of repetitions
    of each action is a whole multiple of that of the one before; otherwise its smooth continuation. An interval of
    one value within the next is taken as independent of all others.
    """
    if not 1 <= len(actions) <= MOST_ACTIONS:
        raise InputError(
            f"The exact combination takes 1 to {MOST_ACTIONS} variable actions; got {len(actions)}."
        )
    for action in actions:
        if action.distribution.shape:
            raise InputError(f"{action.name}: the exact combination takes one situation at a time.")
    ordered = tuple(sorted(actions, key=lambda a: a.repetitions))
    with np.errstate(all="ignore"):
        return CombinedMaximum(ordered, pulse_sum(ordered))


def fbc_maximum_cdf(actions: Sequence[Action], x: npt.ArrayLike) -> Array:
    """Return F_max(x) of the largest sum in the reference period; see :func:`fbc_maximum`."""
    return fbc_maximum(actions).cdf(x)
