"""The exact maximum of a sum of pulse processes (Ferry Borges and Castanheta) by nested quadrature.

With the actions in the order of rising repetitions r1 <= r2 <= ..., one interval of the first contains r2/r1
intervals of the second, and so on:

    F_max(x) = [ integral of G(x - q) dF1(q) ]**r1,   G = distribution of the maximum of the others in that interval.

Both tails are integrated, so that small probabilities of either side keep their relative accuracy.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.actions.combination import Action
from calibrate.actions.intermittent import Intermittent
from calibrate.distributions import Distribution
from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.normal_tails import log_phi, u_from_log_tails
from calibrate.errors import InputError

Array = npt.NDArray[np.float64]
Tails = Callable[[Array], tuple[Array, Array]]

MOST_ACTIONS = 3
"""Nested quadrature over more actions would take minutes."""

_REACH = 36.0
# Pieces of standard normal space within which neither factor of an integrand bends much.
_KNOTS = np.array(
    [-_REACH, -24.0, -16.0, -12.0, -10.0, *np.arange(-8.0, 8.5), 10.0, 12.0, 16.0, 24.0, _REACH]
)
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(8)
_AFTER_ZERO = np.array([0.05, 0.2, 0.5])
_FARTHEST = 20.0
_NEGLIGIBLE = 1e-15
_AT_ONCE = 200_000


@dataclass(frozen=True, slots=True, eq=False)
class _Level:
    """The maximum of one action, or of the sum of several, over an interval.

    Attributes
    ----------
    tails : callable
        x -> ln F, ln(1 - F).
    maxima : tuple of Distribution
        The maxima r1, r2/r1, r3/r2, ... of the single actions. They are reached together at some time, so that the
        sum of their quantiles at w = -36 lies below all that matters of the maximum of the sum, and that at 36 above.
    """

    tails: Tails
    maxima: tuple[Distribution, ...]

    def scale(self, w: Array) -> tuple[Array, Array]:
        """Return the sum of the quantiles at the standard normal value w, and its slope."""
        pairs = [d.x_slope(w) for d in self.maxima]
        return np.asarray(sum(x for x, _ in pairs)), np.asarray(sum(s for _, s in pairs))

    def u(self, w: Array) -> Array:
        """Return the standard normal value of the sum at w."""
        return np.clip(u_from_log_tails(*self.tails(self.scale(w)[0])), -_REACH, _REACH)

    def knots(self) -> Array:
        """Return values of w between which neither the scale nor the maximum of the sum moves far."""
        w = _knots_u(self.maxima)
        if len(self.maxima) == 1:
            return w
        u = self.u(w)
        counts = np.maximum(1, np.ceil(np.diff(np.clip(u, -12.0, 12.0))))
        parts = [
            np.linspace(low, high, int(n), endpoint=False)
            for low, high, n in zip(w[:-1], w[1:], counts, strict=True)
        ]
        return np.append(np.concatenate(parts), w[-1])


def _knots_u(distributions: Sequence[Distribution]) -> Array:
    zeros = [d.u_of_zero for d in distributions if isinstance(d, Intermittent)]
    return np.sort(np.concatenate((_KNOTS, np.clip(np.array(zeros, dtype=np.float64), -_REACH, _REACH))))


def _single_tails(action: Action, repetitions: float, x: Array) -> tuple[Array, Array]:
    """Return ln F and ln(1 - F) of the maximum of an action's repetitions."""
    base, p = action.distribution, action.presence
    if p == 1.0:
        low = repetitions * base.logcdf(x)
    else:
        low = np.where(x < 0.0, -np.inf, repetitions * log1mexp(np.log(p) + base.logsf(x)))
    return low, log1mexp(low)


def _sum_tails(
    first: Action, rest: _Level, knots: Array, repetitions: float, x: Array
) -> tuple[Array, Array]:
    """Return ln F and ln(1 - F) of the maximum of ``repetitions`` sums, x of shape (P,).

    ``knots`` are values of the rest between which its tails bend little.
    """
    base, p = first.distribution, first.presence
    own = _KNOTS if p == 1.0 else np.append(_KNOTS, np.clip(base.u(0.0), -_REACH, _REACH))
    other = np.clip(np.nan_to_num(base.u(x - knots[:, None])), -_REACH, _REACH)
    ends = np.sort(np.concatenate((np.broadcast_to(own[:, None], (own.size, x.size)), other)), axis=0)

    def log_tails_at(v: Array, at: Array) -> tuple[Array, Array]:
        value = base.x(v)
        return rest.tails(at - (value if p == 1.0 else np.maximum(value, 0.0)))

    # The tails are monotonic, so their values at the ends enclose what each piece adds.
    share = _share(ends)
    low, high = (np.exp(t) for t in log_tails_at(ends, x[None, :]))
    most_low, least_low = share * low[:-1], share * low[1:]
    most_high, least_high = share * high[1:], share * high[:-1]
    # The tail that seems smaller is integrated: its relative error is small, and so is that of its complement.
    use_low = np.sum(most_low + least_low, axis=0) < np.sum(most_high + least_high, axis=0)
    most, least = (np.where(use_low, *pair) for pair in ((most_low, most_high), (least_low, least_high)))
    piece, column = np.nonzero(most > _NEGLIGIBLE * np.sum(least, axis=0))
    half = 0.5 * (ends[piece + 1, column] - ends[piece, column])[:, None]
    v = ends[piece, column][:, None] + half * (1.0 + _NODES)
    tails = log_tails_at(v, x[column][:, None])
    terms = half * _WEIGHTS * np.exp(log_phi(v) + np.where(use_low[column][:, None], *tails))
    smaller: Array = np.bincount(column, weights=np.sum(terms, axis=1), minlength=x.size).astype(np.float64)
    if p < 1.0:
        smaller = p * smaller + (1.0 - p) * np.exp(np.where(use_low, *rest.tails(x)))
    smaller = np.minimum(smaller, 1.0)
    log_max = repetitions * np.where(use_low, np.log(smaller), np.log1p(-smaller))
    return log_max, log1mexp(log_max)


def _share(ends: Array) -> Array:
    """Return the probabilities between successive values, from whichever tail is smaller."""
    upper = ends[:-1] > 0.0
    below, above = special.ndtr(ends), special.ndtr(-ends)
    return np.where(upper, above[:-1] - above[1:], below[1:] - below[:-1])


def _level(actions: Sequence[Action], within: float) -> _Level:
    """Return the maximum of the sum over an interval of which the reference period holds ``within``."""
    first, *others = actions
    repetitions = first.repetitions / within
    own = first.maximum(repetitions)
    if not others:
        return _Level(lambda x: _single_tails(first, repetitions, x), (own,))
    rest = _level(others, first.repetitions)
    knots = rest.scale(rest.knots())[0]
    size = max(1, _AT_ONCE // (2 * _KNOTS.size * _NODES.size))

    def tails(x: Array) -> tuple[Array, Array]:
        flat = x.ravel()
        if flat.size == 0:
            return x, x
        parts = [
            _sum_tails(first, rest, knots, repetitions, flat[i : i + size]) for i in range(0, flat.size, size)
        ]
        low, high = (np.concatenate(p).reshape(x.shape) for p in zip(*parts, strict=True))
        return low, high

    return _Level(tails, (own, *rest.maxima))


@dataclass(frozen=True, slots=True, eq=False)
class CombinedMaximum:
    """Largest value of the sum of pulse processes in the reference period; made by :func:`fbc_maximum`.

    Parameters
    ----------
    actions : tuple of Action
        In the order of rising repetitions.
    """

    actions: tuple[Action, ...]
    level: _Level

    def _tails(self, x: npt.ArrayLike) -> tuple[Array, Array]:
        values = np.asarray(x, dtype=np.float64)
        finite = np.isfinite(values)
        with np.errstate(all="ignore"):
            low, high = self.level.tails(np.where(finite, values, 0.0))
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
            return self.level.u(w) - wanted

        usable = np.abs(u) <= _FARTHEST
        wanted = np.where(usable, u, 0.0)
        at_zero = np.zeros(u.shape, dtype=np.bool_)
        if all(isinstance(d, Intermittent) for d in self.level.maxima):
            at_zero = wanted <= self.u(0.0)
            wanted = np.where(at_zero, _FARTHEST, wanted)
        ends = (np.full(u.shape, -_REACH + 1e-9), np.full(u.shape, _REACH - 1e-9))
        with np.errstate(all="ignore"):
            found = elementwise.find_root(
                excess, ends, args=(wanted,), tolerances={"xatol": 1e-11, "xrtol": 1e-12}
            )
            x = self.level.scale(np.asarray(found.x))[0]
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
        sds = [float(d.sd) for d in self.level.maxima]
        if not np.isfinite(sds).all():
            return float(sum(float(d.mean) for d in self.level.maxima)), float(sum(sds))
        with np.errstate(all="ignore"):
            x, width = self._pieces()
            low, high = (np.exp(t) for t in self._tails(x))
        centre = float(self.level.scale(np.zeros(()))[0])
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
        zeros = np.setdiff1d(_knots_u(self.level.maxima), _KNOTS)
        knots = np.union1d(self.level.knots(), zeros[:, None] + _AFTER_ZERO)
        half = 0.5 * np.diff(knots)[:, None]
        t = 1.0 + _NODES
        x, slope = self.level.scale(knots[:-1, None] + half * t)
        width = half * slope * _WEIGHTS
        begins = np.isin(knots[:-1], zeros)
        ends = self.level.scale(knots)[0]
        length = (np.diff(ends)[begins])[:, None]
        x[begins] = ends[:-1][begins][:, None] + length * (0.5 * t) ** 2
        width[begins] = length * 0.5 * t * _WEIGHTS
        return x.ravel(), width.ravel()

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
        return CombinedMaximum(ordered, _level(ordered, 1.0))


def fbc_maximum_cdf(actions: Sequence[Action], x: npt.ArrayLike) -> Array:
    """Return F_max(x) of the largest sum in the reference period; see :func:`fbc_maximum`."""
    return fbc_maximum(actions).cdf(x)
