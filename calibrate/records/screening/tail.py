"""Whether the lower tail bends away from the line of the other values on probability paper."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from calibrate.engine.streams import stream
from calibrate.records.observations import Array

LEVEL = 0.05
LEAST = 12
"""Fewer values show no branch."""

_POSITIONS = 100
_REPLICATES = 999
_LEAST_IN_BRANCH = 3
_LARGEST_BRANCH = 0.5
_MATERIAL = 1.25

_PAPERS: dict[str, tuple[Callable[[Array], Array], Callable[[Array], Array]]] = {
    "normal": (special.ndtri, lambda p: np.exp(-0.5 * special.ndtri(p) ** 2) / math.sqrt(2.0 * math.pi)),
    "lognormal": (special.ndtri, lambda p: np.exp(-0.5 * special.ndtri(p) ** 2) / math.sqrt(2.0 * math.pi)),
    "weibull": (lambda p: np.log(-np.log1p(-p)), lambda p: -(1.0 - p) * np.log1p(-p)),
    "gumbel": (lambda p: -np.log(-np.log(p)), lambda p: -p * np.log(p)),
}
"""Standard quantile at p and the standard density there."""

_LOGARITHMIC = ("lognormal", "weibull")


@dataclass(frozen=True, slots=True)
class Knee:
    """One straight line against two that meet, on one kind of paper.

    Attributes
    ----------
    paper : {"normal", "lognormal", "weibull", "gumbel"}
    share : float
        Share of the sample below the knee.
    value : float
        Where the two lines meet.
    slope_ratio : float
        Scatter that the lower line shows to that of the upper one; above 1
        the low values lie farther out than the others suggest. Negative when
        the lower line even falls.
    aic_gain : float
        Akaike's criterion of one line less that of two (two parameters more).
    p_value : float
        Share of simulated samples of the paper's family that gain as much.
    """

    paper: str
    share: float
    value: float
    slope_ratio: float
    aic_gain: float
    p_value: float


@dataclass(frozen=True, slots=True)
class Tail:
    """The lower tail on all papers.

    Attributes
    ----------
    knees : tuple of Knee
        One for each paper that can hold the sample.
    bent : bool
        Whether each of them prefers two lines at level 0.05, all in the same
        direction and with slopes that differ by a quarter at least. Samples
        of any of these families are called bent in 5 % of the cases at most.
    straightest : Knee
        The one with the largest p-value.
    """

    knees: tuple[Knee, ...]
    bent: bool
    straightest: Knee


def lower_tail(values: ArrayLike, *, seed: int = 0) -> Tail | None:
    """Compare one line with two on normal, lognormal, Weibull and Gumbel paper.

    Parameters
    ----------
    values : array_like, shape (n,)
        All exact.
    seed : int
        Of the simulated null distribution.

    Returns
    -------
    Tail or None
        None below 12 values or where they are all equal.

    Notes
    -----
    Values, or their logarithms, are regressed on the quantiles of Hazen's
    positions, with and without a bend at one of the ordered values; the lower
    branch has at least three points and at most half of them. Ordered values
    are strongly correlated, so that plain least squares would take chance
    for a bend and a mixture for noise; differences of the values times the
    density of the family are nearly independent (the quantile process is a
    Brownian bridge over the density), and least squares of those is
    used. The gain of a bend over the squared scale is twice a log-likelihood
    ratio. As each family is one of location and scale on its paper, the
    largest gain has a distribution that depends on n alone; it is simulated
    with 999 samples. Above 100 values, 100 evenly spaced ordered values take
    part. Own construction after the two-line plots that are common practice
    for brittle materials.
    """
    x = np.sort(np.asarray(values, dtype=np.float64))
    if x.size < LEAST or x[0] == x[-1]:
        return None
    knees = tuple(_knee(x, paper, seed) for paper in _PAPERS if paper not in _LOGARITHMIC or x[0] > 0.0)
    straightest = max(knees, key=lambda k: k.p_value)
    rejected = all(k.p_value < LEVEL for k in knees)
    bent = rejected and (
        all(k.slope_ratio > _MATERIAL for k in knees) or all(k.slope_ratio < 1.0 / _MATERIAL for k in knees)
    )
    return Tail(knees, bent, straightest)


def _chosen(n: int) -> np.ndarray:
    """Return the ordered values that take part, from 0."""
    if n <= _POSITIONS:
        return np.arange(n)
    return np.asarray((n * (np.arange(_POSITIONS) + 0.5) / _POSITIONS).astype(np.int64))


def _knee(x: Array, paper: str, seed: int) -> Knee:
    chosen = _chosen(x.size)
    y = x[chosen]
    if paper in _LOGARITHMIC:
        y = np.log(y)
    sheet = _sheet(x.size, paper)
    shift, scale = float(y[y.size // 2]), float(np.ptp(y))
    gains = sheet.gains((y[:, None] - shift) / scale)[:, 0]
    best = int(np.argmax(gains))
    at = best + _LEAST_IN_BRANCH - 1
    middle, upper, extra = np.linalg.lstsq(
        sheet.two_lines(at), sheet.whitened((y - shift) / scale), rcond=None
    )[0]
    meeting = shift + scale * float(middle)
    null = _null(x.size, paper, seed)
    return Knee(
        paper=paper,
        share=(int(chosen[at]) + 0.5) / x.size,
        value=math.exp(meeting) if paper in _LOGARITHMIC else meeting,
        slope_ratio=float((upper + extra) / upper) if upper > 0.0 else math.inf,
        aic_gain=float(gains[best]) - 4.0,
        p_value=(1.0 + float(np.count_nonzero(null >= gains[best] * (1.0 - 1e-12)))) / (1.0 + null.size),
    )


class _Sheet:
    """One kind of paper for one sample size: what depends on the positions alone."""

    def __init__(self, n: int, paper: str) -> None:
        quantile, density = _PAPERS[paper]
        self.p = (_chosen(n) + 0.5) / n
        self.z = quantile(self.p)
        self._density = density(self.p)
        self._weight = np.sqrt(n / np.diff(np.concatenate([[0.0], self.p, [1.0]])))
        at = np.arange(_LEAST_IN_BRANCH - 1, max(int(_LARGEST_BRANCH * self.z.size), _LEAST_IN_BRANCH))
        self._line = self.whitened(np.stack([np.ones_like(self.z), self.z], axis=1))
        bends = self.whitened(np.minimum(self.z[:, None] - self.z[at], 0.0))
        orthogonal = np.linalg.qr(self._line)[0]
        bends -= orthogonal @ (orthogonal.T @ bends)
        self._bends = (bends / np.linalg.norm(bends, axis=0)).T

    def whitened(self, y: Array) -> Array:
        """Return combinations of ordered values that are nearly independent with the scale as deviation."""
        padded = np.zeros((y.shape[0] + 2, *y.shape[1:]))
        padded[1:-1] = (self._density * y.T).T
        return np.asarray((self._weight * np.diff(padded, axis=0).T).T)

    def two_lines(self, at: int) -> Array:
        """Return the regressors of two lines that meet at one of the values."""
        return self.whitened(
            np.stack(
                [np.ones_like(self.z), self.z - self.z[at], np.minimum(self.z - self.z[at], 0.0)], axis=1
            )
        )

    def gains(self, y: Array) -> Array:
        """Return what each bend takes off the squares, over the scale squared, shape (bends, samples)."""
        w = self.whitened(y)
        slope = np.linalg.lstsq(self._line, w, rcond=None)[0][1]
        return np.asarray((self._bends @ w / slope) ** 2)


@lru_cache(maxsize=64)
def _sheet(n: int, paper: str) -> _Sheet:
    return _Sheet(n, paper)


@lru_cache(maxsize=64)
def _null(n: int, paper: str, seed: int) -> Array:
    """Return the largest gains of simulated samples of the paper's family."""
    # Ordered uniform values at the chosen places only: partial sums of gamma variates over their total.
    rng = stream(seed, "screening", "tail", n)
    gaps = np.diff(np.concatenate([[0], _chosen(n) + 1, [n + 1]])).astype(np.float64)
    sums = np.cumsum(rng.standard_gamma(np.broadcast_to(gaps, (_REPLICATES, gaps.size))), axis=1)
    uniform = np.ascontiguousarray((sums[:, :-1] / sums[:, -1:]).T)
    null = _sheet(n, paper).gains(_PAPERS[paper][0](uniform)).max(axis=0)
    null.setflags(write=False)
    return np.asarray(null)
