"""How beta is distributed over the weighted design situations, before and after."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style
from calibrate.report.axis_figure import TITLES, beta_limits
from calibrate.report.outcome import taking_part

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.study.result import Result

Array = NDArray[np.float64]

_NICE = (0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0)
_WIDTH, _HEIGHT = 172.0, 68.5


def beta_bins(low: float, high: float, most: int = 36) -> Array:
    """Return edges of bins of a round width that cover a range of beta."""
    width = next((w for w in _NICE if (high - low) / w <= most), (high - low) / most)
    first, last = np.floor(low / width + 1e-9), np.ceil(high / width - 1e-9)
    return np.arange(first, max(last, first + 1) + 1) * width


def beta_distribution(result: Result) -> Figure:
    """Return two weighted histograms over the same bins, one above the other."""
    edges = beta_bins(*beta_limits(result))
    figure = style.figure(_WIDTH, _HEIGHT)
    panels: list[Axes] = []
    for k, kind in enumerate(TITLES):
        axes = style.panel(figure, 12, 40 - 30 * k, 141, 23)
        rows = taking_part(result, kind)
        weight = result.situations["weight"].to_numpy(float)[rows]
        share, _ = np.histogram(
            result.situations[f"beta_{kind}"].to_numpy(float)[rows],
            edges,
            weights=100.0 * weight / max(weight.sum(), 1e-300),
        )
        new = kind == "proposed"
        colour, edge = (style.BLUE, "white") if new else (style.PALE, style.GREY)
        seen = share > 0.0
        style.bars(
            axes, edges[:-1][seen], 0.0 * share[seen], np.diff(edges)[seen], share[seen], colour, edge, 0.6
        )
        axes.set_xlim(edges[0], edges[-1])
        axes.grid(visible=True, axis="y")
        axes.set_title(TITLES[kind])
        panels.append(axes)
    top = max(a.get_ylim()[1] for a in panels)
    for axes in panels:
        axes.set_ylim(0, 1.16 * top)
        _lines(axes, result, label=axes is panels[0])
    panels[0].tick_params(labelbottom=False)
    panels[1].set_xlabel("reliability index β")
    figure.text(2.2 / _WIDTH, 0.55, "share of weight (%)", rotation=90, va="center", ha="left")
    return figure


def _lines(axes: Axes, result: Result, *, label: bool) -> None:
    target, floor = result.study.target_beta, result.study.objective.floor
    lines = [("target", target, "-")] + ([("floor", floor, (0, (4, 2)))] if floor is not None else [])
    for name, value, dash in lines:
        axes.axvline(value, color=style.INK, linewidth=0.9, linestyle=dash)
        if label:
            side = "left" if name == "target" else "right"
            axes.annotate(
                f"{name} {numbers.significant(value)}",
                (value, 1.0),
                (3 if side == "left" else -3, -1),
                xycoords=("data", "axes fraction"),
                textcoords="offset points",
                ha=side,
                va="top",
                fontsize=7,
                annotation_clip=False,
            )
