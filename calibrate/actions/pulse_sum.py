"""The maximum of a weighted sum of pulse processes, for many situations at once, with exact slopes.

With the actions in the order of rising repetitions r1 <= r2 <= ..., one interval of the first contains r2/r1
intervals of the second, and so on:

    F_max(x) = [ integral of G(x - b1 q) dF1(q) ]**r1,   G = distribution of the maximum of the others meanwhile.

Both tails are integrated, so that small probabilities of either side keep their relative accuracy. The integral runs
over pieces of standard normal space, bounded by fixed values and by those at which G bends; a piece that adds nothing
is left out.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.actions.combination import Action
from calibrate.actions.intermittent import Intermittent
from calibrate.actions.pulse_table import PulseTable, interpolated
from calibrate.actions.slopes import Slopes, standard_normal
from calibrate.distributions import Distribution
from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.normal_tails import log_phi

Array = npt.NDArray[np.float64]
Columns = npt.NDArray[np.intp]

REACH = 36.0
# Pieces of standard normal space within which neither factor of an integrand bends much.
KNOTS = np.array([-REACH, -24.0, -16.0, -12.0, -10.0, *np.arange(-8.0, 8.5), 10.0, 12.0, 16.0, 24.0, REACH])
NODES, WEIGHTS = np.polynomial.legendre.leggauss(8)
# Standard normal values at which a sum within a sum is tabulated.
_TABLE = np.arange(-8.0, 8.1, 0.25)
_NEGLIGIBLE = 1e-15
_AT_ONCE = 4000
"""Values of a sum that are integrated together, each with some hundred nodes."""


@dataclass(frozen=True, slots=True, eq=False)
class PulseSum:
    """The maximum of a weighted sum of actions over one interval of whatever contains it.

    Parameters
    ----------
    actions : tuple of Action
        In the order of rising repetitions; ``repetitions`` are those within one interval of the action before, for
        the first one those within the whole. Distributions of shape () or (k,).
    weights : tuple of array
        Positive coefficients b, shape () or (k,).
    knots : array (j,)
        Standard normal values between which the single maxima and their sum bend little.
    tabulated : bool
        Whether a sum within the sum is interpolated in a table: some ten times faster, standard normal values to about
        1e-5 in place of 1e-9.
    """

    actions: tuple[Action, ...]
    weights: tuple[Array, ...]
    knots: Array
    tabulated: bool = False

    @property
    def maxima(self) -> tuple[Distribution, ...]:
        """Maxima of the single actions, each within an interval of the one before.

        They are reached together at some time, so that the weighted sum of their quantiles at -36 lies below all that
        matters of the maximum of the sum, and that at 36 above.
        """
        return tuple(a.maximum() for a in self.actions)

    @property
    def rest(self) -> PulseSum:
        """The sum of all but the first action, over one interval of it."""
        return PulseSum(self.actions[1:], self.weights[1:], self.knots, self.tabulated)

    def take(self, columns: Any) -> PulseSum:
        """Return the sum for some situations, possibly repeated."""
        actions = tuple(_taken(a, columns) for a in self.actions)
        weights = tuple(b[columns] if b.ndim else b for b in self.weights)
        return PulseSum(actions, weights, self.knots, self.tabulated)

    def scale(self, w: Array) -> tuple[Array, Array]:
        """Return the weighted sum of the quantiles of the maxima at standard normal w, and its slope."""
        pairs = [d.x_slope(w) for d in self.maxima]
        return (
            np.asarray(sum(b * x for b, (x, _) in zip(self.weights, pairs, strict=True))),
            np.asarray(sum(b * s for b, (_, s) in zip(self.weights, pairs, strict=True))),
        )

    def tails(self, x: Array) -> tuple[Array, Array]:
        """Return ln F and ln(1 - F) at x, shape (k,)."""
        with np.errstate(all="ignore"):
            found = self._evaluate(x, slopes=False)
        return found.low, found.high

    def slopes(self, x: Array) -> Slopes:
        """Return the tails at x, shape (k,), with the derivatives of ln F by x and by the weights."""
        with np.errstate(all="ignore"):
            return self._evaluate(x, slopes=True)

    def _evaluate(self, x: Array, *, slopes: bool) -> Slopes:
        if len(self.actions) == 1:
            return _single(self.actions[0], self.weights[0], x, slopes=slopes)
        pieces = [np.arange(at, min(at + _AT_ONCE, x.size)) for at in range(0, max(x.size, 1), _AT_ONCE)]
        parts = [_sum(self.take(piece), x[piece], slopes=slopes) for piece in pieces]
        if len(parts) == 1:
            return parts[0]
        return Slopes(
            *(np.concatenate([getattr(p, name) for p in parts], axis=-1) for name in Slopes.__slots__)
        )


def _taken(action: Action, columns: Any) -> Action:
    if not action.distribution.shape:
        return action
    return Action(
        action.distribution.take(columns), action.repetitions, action.presence, action.name, action.duration
    )


def zeros_u(distributions: Sequence[Distribution]) -> Array:
    """Return the standard normal values up to which intermittent maxima are zero, shape (j, 1) or (j, k)."""
    zeros = [np.atleast_1d(d.u_of_zero) for d in distributions if isinstance(d, Intermittent)]
    if not zeros:
        return np.zeros((0, 1))
    return np.asarray(np.clip(np.array(np.broadcast_arrays(*zeros)), -REACH, REACH))


def _single(action: Action, weight: Array, x: Array, *, slopes: bool) -> Slopes:
    """Return the maximum of the repetitions of one action."""
    base, p, n = action.distribution, action.presence, action.repetitions
    z = x / weight
    if p == 1.0:
        one = base.logcdf(z)
        low = n * one
    else:
        one = log1mexp(np.log(p) + base.logsf(z))
        low = np.where(z < 0.0, -np.inf, n * one)
    high = log1mexp(low)
    if not slopes:
        return Slopes(low, high, low, low[None])
    # Reverse hazard of one repetition, in logarithms so that both parts may be out of range.
    hazard = np.exp(np.log(p) + base.logpdf(z) - one)
    slope = np.where(np.isneginf(low), 0.0, n * hazard) / weight
    return Slopes(low, high, slope, (-z * slope)[None])


def _sum(pulses: PulseSum, x: Array, *, slopes: bool) -> Slopes:
    """Return the maximum of a sum of two or more actions."""
    first, b = pulses.actions[0], pulses.weights[0]
    base, p = first.distribution, first.presence
    rest = _inner(pulses.rest, x.size)
    use_low, piece, column, ends = _where_it_matters(pulses, rest, x)
    half = 0.5 * (ends[piece + 1, column] - ends[piece, column])[:, None]
    v = (ends[piece, column][:, None] + half * (1.0 + NODES)).ravel()
    at = np.repeat(column, NODES.size)
    share = (half * WEIGHTS).ravel() * np.exp(log_phi(v))
    value = base.take(at).x(v) if base.shape else base.x(v)
    value = value if p == 1.0 else np.maximum(value, 0.0)
    inner = rest(x[at] - (b[at] if b.ndim else b) * value, at, slopes=slopes)

    def gathered(terms: Array, when_absent: Array) -> Array:
        total: Array = np.bincount(at, weights=terms, minlength=x.size).astype(np.float64)
        if p < 1.0:
            total = p * total + (1.0 - p) * when_absent
        return total

    every = np.arange(x.size)
    alone = rest(x, every, slopes=slopes) if p < 1.0 else Slopes(x, x, x, np.zeros((0, x.size)))
    smaller = gathered(
        share * np.exp(np.where(use_low[at], inner.low, inner.high)),
        np.exp(np.where(use_low, alone.low, alone.high)),
    )
    smaller = np.minimum(smaller, 1.0)
    log_one = np.where(use_low, np.log(smaller), np.log1p(-smaller))
    low = first.repetitions * log_one
    high = log1mexp(low)
    if not slopes:
        return Slopes(low, high, low, low[None])
    density = share * _product(inner.low, inner.by_value)
    absent = _product(alone.low, alone.by_value) if p < 1.0 else x
    jump = _jump(pulses, rest, x)
    by_value = gathered(density, absent) + jump
    rows = [gathered(-value * density, np.zeros(x.size)) - x / b * jump]
    for k in range(len(pulses.actions) - 1):
        alone_k = _product(alone.low, alone.by_weight[k]) if p < 1.0 else x
        rows.append(gathered(share * _product(inner.low, inner.by_weight[k]), alone_k))
    scale = first.repetitions * np.exp(-log_one)
    return Slopes(low, high, scale * by_value, scale * np.array(rows))


def _jump(pulses: PulseSum, rest: _Inner, x: Array) -> Array:
    """Return what the probability that all other actions are absent adds to the density of the sum."""
    first, *others = pulses.actions
    if any(a.presence == 1.0 for a in others):
        return np.zeros(x.size)
    nothing = np.exp(rest(np.zeros(x.size), np.arange(x.size), slopes=False).low)
    own = first.presence * first.distribution.pdf(x / pulses.weights[0]) / pulses.weights[0]
    return np.where((x > 0.0) | (first.presence == 1.0), nothing * own, 0.0)


def _product(log_f: Array, slope: Array) -> Array:
    """Return F times the derivative of ln F, 0 where F is."""
    return np.where(np.isneginf(log_f), 0.0, np.exp(log_f) * slope)


class _Inner(Protocol):
    """The sum of the other actions at values that belong to given columns."""

    def __call__(self, x: Array, columns: Columns, *, slopes: bool) -> Slopes: ...


def _inner(rest: PulseSum, k: int) -> _Inner:
    """Return what evaluates the rest: itself, or a table of a sum, which is dear."""
    if len(rest.actions) == 1 or not rest.tabulated:
        return lambda x, columns, *, slopes: rest.take(columns)._evaluate(x, slopes=slopes)
    zeros = np.broadcast_to(zeros_u(rest.maxima), (zeros_u(rest.maxima).shape[0], k))
    coarse = np.broadcast_to(KNOTS[:, None], (KNOTS.size, k))
    u = _tabulated(rest, coarse)[1]
    w = np.sort(np.concatenate((coarse, zeros, interpolated(_TABLE, u, coarse))), axis=0)
    from_zero = all(isinstance(d, Intermittent) for d in rest.maxima)
    return PulseTable(*_tabulated(rest, w), from_zero)


def _tabulated(rest: PulseSum, w: Array) -> tuple[Array, Array, Array, Array]:
    """Return the values at which all maxima are at w, shape (j, k), with u there and its slopes."""
    value = np.broadcast_to(rest.scale(w)[0], w.shape)
    columns = np.tile(np.arange(w.shape[1]), w.shape[0])
    found = rest.take(columns)._evaluate(value.ravel(), slopes=True)
    u, by_value, by_weight = (np.nan_to_num(v, posinf=0.0) for v in standard_normal(found))
    # By weight and value: how the quantile moves with a weight, which is smoother than how u does.
    by_weight = np.where(by_value > 0.0, by_weight / np.where(by_value > 0.0, by_value, 1.0), 0.0)
    rising = np.maximum.accumulate(np.clip(u, -REACH, REACH).reshape(w.shape), axis=0)
    return value, rising, by_value.reshape(w.shape), by_weight.reshape(-1, *w.shape)


def _where_it_matters(
    pulses: PulseSum, rest: _Inner, x: Array
) -> tuple[npt.NDArray[np.bool_], npt.NDArray[np.intp], npt.NDArray[np.intp], Array]:
    """Return which tail to integrate, and the pieces (row, column) of the ends, shape (j, k), that add to it."""
    first, others, b = pulses.actions[0], pulses.rest, pulses.weights[0]
    base, p = first.distribution, first.presence
    own = np.broadcast_to(KNOTS[:, None], (KNOTS.size, x.size))
    if p < 1.0:
        zero = np.clip(np.broadcast_to(base.u(0.0), x.shape), -REACH, REACH)
        own = np.concatenate((own, zero[None]))
    zeros = zeros_u(others.maxima)
    w = np.broadcast_to(pulses.knots[:, None], (pulses.knots.size, zeros.shape[1]))
    bends = others.scale(np.concatenate((w, zeros)))[0]
    other = np.clip(np.nan_to_num(base.u((x - bends) / b)), -REACH, REACH)
    ends = np.sort(np.concatenate((own, np.broadcast_to(other, (other.shape[0], x.size)))), axis=0)
    value = base.x(ends) if p == 1.0 else np.maximum(base.x(ends), 0.0)
    columns = np.tile(np.arange(x.size), ends.shape[0])
    found = rest((x - b * value).ravel(), columns, slopes=False)
    # The tails are monotonic, so their values at the ends enclose what each piece adds.
    low, high = (np.exp(t).reshape(ends.shape) for t in (found.low, found.high))
    share = _share(ends)
    most_low, least_low = share * low[:-1], share * low[1:]
    most_high, least_high = share * high[1:], share * high[:-1]
    # The tail that seems smaller is integrated: its relative error is small, and so is that of its complement.
    use_low = np.sum(most_low + least_low, axis=0) < np.sum(most_high + least_high, axis=0)
    most, least = (np.where(use_low, *pair) for pair in ((most_low, most_high), (least_low, least_high)))
    piece, column = np.nonzero(most > _NEGLIGIBLE * np.sum(least, axis=0))
    return use_low, piece, column, ends


def _share(ends: Array) -> Array:
    """Return the probabilities between successive values, from whichever tail is smaller."""
    upper = ends[:-1] > 0.0
    below, above = special.ndtr(ends), special.ndtr(-ends)
    return np.where(upper, above[:-1] - above[1:], below[1:] - below[:-1])


def pulse_sum(
    actions: Sequence[Action], weights: Sequence[npt.ArrayLike] | None = None, *, tabulated: bool = False
) -> PulseSum:
    """Return the maximum of a weighted sum of actions in the reference period.

    Parameters
    ----------
    actions : sequence of Action
        In the order of rising repetitions, distributions of shape () or (k,).
    weights : sequence of array_like, optional
        Positive coefficients, shape () or (k,); default 1.
    tabulated : bool
        See :class:`PulseSum`; for three actions only.

    Notes
    -----
    J. Ferry Borges and M. Castanheta, "Structural safety" (1971, from memory). Exact where the number of repetitions
    of each action is a whole multiple of that of the one before; otherwise its smooth continuation. An interval of
    one value within the next is taken as independent of all others.
    """
    before, chained = 1.0, []
    for action in actions:
        within = action.repetitions / before
        chained.append(Action(action.distribution, within, action.presence, action.name))
        before = action.repetitions
    given = [1.0] * len(chained) if weights is None else weights
    fine = np.union1d(KNOTS, np.arange(-8.0, 8.25, 0.5)) if len(chained) > 2 else KNOTS
    return PulseSum(tuple(chained), tuple(np.asarray(b, dtype=np.float64) for b in given), fine, tabulated)
