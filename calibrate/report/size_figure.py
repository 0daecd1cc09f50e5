"""How much the proposed factors change the sizes: the cost of the proposal, and who bears it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style, symbols

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.report.outcome import SizeChange

_NICE = (0.1, 0.2, 0.25, 0.5, 1.0, 2.0, 2.5, 5.0, 10.0, 20.0, 50.0, 100.0)
_WIDTH, _HEIGHT, _PANEL = 172.0, 50.0, 31.0
_COLUMNS = 2


def change_bins(percent: NDArray[np.float64], most: int = 24) -> NDArray[np.float64]:
    """Return edges of bins of a round width for changes in percent; zero is an edge or outside."""
    low, high = float(percent.min()), float(percent.max())
    width = next((w for w in _NICE if (high - low) / w <= most - 1), (high - low) / most or 1.0)
    first, last = np.floor(low / width + 1e-9), np.ceil(high / width - 1e-9)
    return np.arange(first, max(last, first + 1) + 1) * width


def size_change(changes: list[SizeChange]) -> Figure:
    """Return one weighted histogram of the change of size per rule, over common bins."""
    percent = [100.0 * (c.ratio - 1.0) for c in changes]
    edges = change_bins(np.asarray(np.round(np.concatenate(percent), 9), dtype=np.float64))
    rows = -(-len(changes) // _COLUMNS)
    height = 2.0 + rows * _HEIGHT
    figure = style.figure(_WIDTH, height)
    width = 70.0 if len(changes) > 1 else 150.0
    top = 0.0
    panels = []
    for k, (change, values) in enumerate(zip(changes, percent, strict=True)):
        left = 13.0 + (k % _COLUMNS) * (width + 17.0)
        bottom = height - 2.0 - (k // _COLUMNS) * _HEIGHT - _PANEL - 7.0
        axes = style.panel(figure, left, bottom, width, _PANEL)
        share, _ = np.histogram(values, edges, weights=100.0 * change.weight)
        seen = share > 0.0
        colours = [style.OCHRE if e >= -1e-12 else style.BLUE for e in edges[:-1][seen]]
        style.bars(
            axes,
            edges[:-1][seen],
            0.0 * share[seen],
            np.diff(edges)[seen],
            share[seen],
            colours,
            "white",
            0.6,
        )
        axes.axvline(0.0, color=style.INK, linewidth=0.9)
        mean = 100.0 * (change.mean - 1.0)
        axes.axvline(mean, color=style.INK, linewidth=0.9, linestyle=(0, (4, 2)))
        axes.set_title(change.rule)
        axes.text(
            1.0, 1.03, f"mean {numbers.change(change.mean)}", transform=axes.transAxes, ha="right", size=7
        )
        axes.set_xlabel(f"change of {symbols.drawn(change.size)} (%)", parse_math=True)
        axes.set_ylabel("share of weight (%)")
        axes.grid(visible=True, axis="y")
        axes.set_xlim(
            min(edges[0], 0.0) - 0.5 * edges_width(edges), max(edges[-1], 0.0) + 0.5 * edges_width(edges)
        )
        axes.locator_params(axis="y", nbins=5)
        top = max(top, axes.get_ylim()[1])
        panels.append(axes)
    for axes in panels:
        axes.set_ylim(0.0, top)
    return figure


def edges_width(edges: NDArray[np.float64]) -> float:
    """Return the width of the bins."""
    return float(edges[1] - edges[0])
