"""Return levels against the return period, with the interval that the record gives them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.actions.return_levels import ReturnLevels

CAPTION = (
    "Return levels: fitted (line), 95 % interval by profile likelihood (band), ordered maxima (marks). Right of the "
    "dotted line the return period is longer than the record."
)
CAPTION_OF_EVENTS = CAPTION.replace("ordered maxima", "ordered events")
_WIDTH, _HEIGHT = 84.0, 60.0


def return_figure(
    levels: ReturnLevels,
    observed: tuple[NDArray[np.float64], NDArray[np.float64]],
    record: float,
    *,
    title: str,
    label: str,
    unit: str,
) -> Figure:
    """Return the return-level plot; use it inside ``style.context()``.

    Parameters
    ----------
    levels : ReturnLevels
    observed : (array, array)
        Return periods in years and values of the ordered observations.
    record : float
        Length of the record in years.
    title, label, unit : str
    """
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 15.0, 10.5, _WIDTH - 18.0, _HEIGHT - 15.5)
    years, values = observed
    there = np.isfinite(levels.lower) & np.isfinite(levels.upper)
    axes.fill_between(
        levels.years[there],
        levels.lower[there],
        levels.upper[there],
        color=style.PALE,
        linewidth=0.0,
        zorder=1,
    )
    axes.plot(levels.years, levels.levels, color=style.BLUE, linewidth=1.2, zorder=2)
    shown = years >= levels.years[0] * 0.95
    axes.plot(
        years[shown], values[shown], linestyle="none", marker="o", markersize=3.0, markerfacecolor="white",
        markeredgecolor=style.INK, markeredgewidth=0.7, zorder=3,
    )  # fmt: skip
    axes.axvline(record, color=style.INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=1.5)
    axes.set_xscale("log")
    ticks = [t for t in (2, 5, 10, 50, 100, 500, 1000) if levels.years[0] <= t <= levels.years[-1]]
    axes.set_xticks(ticks, [numbers.whole(t) for t in ticks])
    axes.minorticks_off()
    axes.set_xlim(levels.years[0] * 0.9, levels.years[-1] * 1.15)
    axes.set_xlabel("return period (years)")
    axes.set_ylabel(f"{label} ({unit})" if unit else label, parse_math=True)
    axes.set_title(title)
    axes.grid(visible=True, which="major")
    return figure
