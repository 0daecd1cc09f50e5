"""A sample and its fitted distribution on probability paper: where the fit holds, the points follow the line.

Ordered values are drawn at Hazen's positions (i − 1/2)/n. The band holds each ordered value with probability 0.9
if the fitted distribution is true: the i-th of n uniform values follows a beta distribution with i and n − i + 1.
It shows the scatter of order statistics, not the uncertainty of the fitted parameters.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy.special import betaincinv, ndtri

from calibrate.distributions import Distribution
from calibrate.fitting import Fit, plotting_positions
from calibrate.fitting.paper import positions
from calibrate.records import Observations
from calibrate.report import style

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Array = npt.NDArray[np.float64]

CAPTION = (
    "Ordered values at Hazen positions, fitted distribution (line) and the band that holds each ordered value with "
    "probability 0.9 if the fit is true. With bounds in the sample: product-limit positions, the bounds along the "
    "lower edge, and no band."
)
BAND = 0.9
MOST_POINTS = 500
END_POINTS = 60
_TICKS = (
    1e-6, 1e-5, 1e-4, 0.001, 0.01, 0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95, 0.99, 0.999, 0.9999, 0.99999, 0.999999,
)  # fmt: skip
# Those that a crowded axis keeps first.
_PREFERRED = (0.5, 0.1, 0.9, 0.01, 0.99, 0.001, 0.999, 0.05, 0.95, 0.25, 0.75)


@dataclass(frozen=True, slots=True)
class Paper:
    """How a family's paper is ruled.

    Attributes
    ----------
    ordinate : callable
        Height on the paper of a probability, as a function of its two tails.
    log : bool
        Whether values are drawn on a logarithmic axis.
    """

    ordinate: Callable[[Array, Array], Array]
    log: bool = False


def _normal(lower: Array, upper: Array) -> Array:
    return np.where(lower < 0.5, ndtri(lower), -ndtri(upper))


def _maxima(lower: Array, upper: Array) -> Array:
    return -np.log(np.where(lower < 0.5, -np.log(lower), -np.log1p(-upper)))


def _minima(lower: Array, upper: Array) -> Array:
    return -_maxima(upper, lower)


def _exponential(lower: Array, upper: Array) -> Array:
    return np.where(lower < 0.5, -np.log1p(-lower), -np.log(upper))


_PAPERS = {
    "normal": Paper(_normal),
    "lognormal": Paper(_normal, log=True),
    "gumbel": Paper(_maxima),
    "gumbel_min": Paper(_minima),
    "weibull": Paper(_minima, log=True),
    "frechet": Paper(_maxima, log=True),
    "exponential": Paper(_exponential),
}


def _paper(distribution: Distribution) -> Paper:
    """Return the family's own paper, or one ruled by the fitted quantiles where it has none."""

    def quantiles(lower: Array, upper: Array) -> Array:
        return np.where(lower < 0.5, distribution.ppf(lower), distribution.isf(upper))

    return _PAPERS.get(distribution.family.name, Paper(quantiles))


def probability_figure(
    fit: Fit,
    *,
    label: str,
    unit: str,
    width_mm: float = 84.0,
    height_mm: float = 66.0,
    fractile: float | None = None,
) -> Figure:
    """Return the probability paper of a converged fit; use it inside ``style.context()``.

    Parameters
    ----------
    fit : Fit
        Converged.
    label : str
        Name of the quantity, as it is shown; between dollar signs it is a formula.
    unit : str
        Its unit, as it is shown; empty for a dimensionless quantity.
    width_mm, height_mm : float
        Size on paper.
    fractile : float, optional
        Probability at which a thin line is drawn, such as 0.05.
    """
    assert fit.distribution is not None, "a failed fit has no line"
    seen = fit.observations
    title = f"{fit.family}, n = {seen.n}"
    return paper_figure(
        fit.distribution,
        seen,
        label=label,
        unit=unit,
        title=title + (f", {seen.n - seen.n_exact} known by bounds" if seen.censored else ""),
        width_mm=width_mm,
        height_mm=height_mm,
        fractile=fractile,
    )


def paper_figure(
    distribution: Distribution,
    seen: Observations,
    *,
    label: str,
    unit: str,
    title: str,
    width_mm: float = 84.0,
    height_mm: float = 66.0,
    fractile: float | None = None,
) -> Figure:
    """Return a sample on the paper of a distribution, fitted or not; use it inside ``style.context()``.

    Parameters
    ----------
    distribution : Distribution
        The line.
    seen : Observations
        The sample, in the unit of the distribution.
    label, unit, width_mm, height_mm, fractile
        As in `probability_figure`.
    title : str
        Above the figure.
    """
    paper = _paper(distribution)
    values, at = positions(seen)
    n = seen.n
    shown = _shown(values.size)
    lower, upper = at[shown], 1.0 - at[shown]
    if seen.complete:
        upper = plotting_positions(n)[::-1][shown]
    drawn = style.figure(width_mm, height_mm)
    axes = style.panel(drawn, 17.0, 10.5, width_mm - 20.0, height_mm - 15.5)
    if paper.log:
        axes.set_xscale("log")
    heights = paper.ordinate(lower, upper)
    if seen.complete:
        _draw_band(axes, distribution, heights, np.asarray(shown + 1.0, dtype=np.float64), n)
    _draw_line(axes, distribution, paper, 0.4 / n)
    _draw_bounds(axes, seen)
    _draw_points(axes, values[shown], heights, n)
    _rule(axes, paper, 0.4 / n)
    _limit(axes, _extent(np.sort(seen.values), distribution, 0.4 / n), paper.log)
    if fractile is not None:
        at = paper.ordinate(np.array([fractile]), np.array([1.0 - fractile]))[0]
        axes.axhline(at, color=style.PLUM, linewidth=0.7, linestyle=(0, (4, 2)))
    axes.set_xlabel(f"{label} ({unit})" if unit else label, parse_math=True)
    axes.set_ylabel("probability of not being exceeded")
    axes.set_title(title)
    return drawn


def _shown(n: int) -> npt.NDArray[np.intp]:
    """Return the ordered values that are drawn: all, or both ends and an even sample of the rest."""
    if n <= MOST_POINTS:
        return np.arange(n)
    middle = np.linspace(END_POINTS, n - 1 - END_POINTS, MOST_POINTS - 2 * END_POINTS).round().astype(np.intp)
    ends = np.arange(END_POINTS)
    return np.unique(np.concatenate([ends, middle, n - 1 - ends]))


def _draw_band(axes: Axes, distribution: Distribution, heights: Array, rank: Array, n: int) -> None:
    tail = 0.5 * (1.0 - BAND)
    low = distribution.ppf(betaincinv(rank, n - rank + 1.0, tail))
    high = distribution.isf(betaincinv(n - rank + 1.0, rank, tail))
    axes.fill_betweenx(heights, low, high, color=style.PALE, linewidth=0.0, zorder=1)


def _draw_line(axes: Axes, distribution: Distribution, paper: Paper, smallest: float) -> None:
    half = np.geomspace(smallest, 0.5, 60)
    lower = np.concatenate([half, 1.0 - half[-2::-1]])
    upper = np.concatenate([1.0 - half, half[-2::-1]])
    x = np.where(lower < 0.5, distribution.ppf(lower), distribution.isf(upper))
    axes.plot(x, paper.ordinate(lower, upper), color=style.BLUE, linewidth=1.1, zorder=2)


def _draw_points(axes: Axes, values: Array, heights: Array, n: int) -> None:
    size = 3.4 if n <= 60 else 2.6 if n <= 400 else 1.6
    axes.plot(
        values,
        heights,
        linestyle="none",
        marker="o",
        markersize=size,
        markerfacecolor="white",
        markeredgecolor=style.INK,
        markeredgewidth=0.7 if n <= 400 else 0.4,
        zorder=3,
    )


def _draw_bounds(axes: Axes, seen: Observations) -> None:
    """Mark specimens that are known by a bound along the lower edge: they have no height of their own."""
    for mask, mark in ((seen.right, ">"), (seen.left, "<"), (seen.interval, "|")):
        if mask.any():
            axes.plot(
                seen.values[mask], np.full(int(mask.sum()), 0.03), transform=axes.get_xaxis_transform(),
                linestyle="none", marker=mark, markersize=3.5, color=style.OCHRE, zorder=3,
            )  # fmt: skip


def _rule(axes: Axes, paper: Paper, smallest: float) -> None:
    """Rule the paper at round probabilities, as many as are legible."""
    inside = [p for p in _TICKS if smallest <= p <= 1.0 - smallest]
    ordered = sorted(inside, key=lambda p: (_PREFERRED.index(p) if p in _PREFERRED else len(_PREFERRED), p))
    ends = np.array([smallest, 1.0 - smallest])
    low, high = paper.ordinate(ends, ends[::-1])
    kept: list[tuple[float, float]] = []
    for p in ordered:
        at = float(paper.ordinate(np.array([p]), np.array([1.0 - p]))[0])
        if np.isfinite(at) and all(abs(at - other) > 0.05 * (high - low) for other, _ in kept):
            kept.append((at, p))
    kept.sort()
    axes.set_yticks([at for at, _ in kept], labels=[f"{p:.6f}".rstrip("0") for _, p in kept])
    axes.set_ylim(low, high)
    axes.grid(visible=True, which="major")


def _extent(values: Array, distribution: Distribution, smallest: float) -> tuple[float, float]:
    """Return the values between which the paper reaches: those of the sample and of the line."""
    low, high = float(distribution.ppf(smallest)), float(distribution.isf(smallest))
    width = float(values[-1] - values[0])
    return max(min(low, values[0]), values[0] - 0.5 * width), min(
        max(high, values[-1]), values[-1] + 0.5 * width
    )


def _limit(axes: Axes, extent: tuple[float, float], log: bool) -> None:
    low, high = extent
    if log:
        from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullFormatter

        low = max(low, 1e-3 * high)
        room = (high / low) ** 0.08
        axes.set_xlim(low / room, high * room)
        wide = high / low > 20.0
        axes.xaxis.set_major_locator(LogLocator() if wide else MaxNLocator(5))
        axes.xaxis.set_major_formatter(FuncFormatter(lambda x, _: f"{x:.4g}"))
        axes.xaxis.set_minor_formatter(NullFormatter())
        if not wide:
            axes.minorticks_off()
        return
    room = 0.06 * (high - low)
    axes.set_xlim(low - room, high + room)
