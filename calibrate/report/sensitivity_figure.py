"""Which basic variable matters: squared sensitivity factors stacked along the first axis."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import style, symbols
from calibrate.report.axis_figure import BY_RULE, axis_label, panel_axes, scale

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.report.outcome import Sensitivity
    from calibrate.study.result import Result

Array = NDArray[np.float64]

_WIDTH, _HEIGHT, _PANEL = 172.0, 64.0, 46.0
_COLUMNS = 2
# From dark to light, so that neighbours differ in grey; resistances cold, actions warm.
_COLD = ("#173a68", "#7fb0dc", "#33679f", "#bcd6ec", "#4f8fae")
_WARM = ("#f3d9a8", "#c27812", "#e8b65c", "#8a4f0a", "#f7e9cd")
_LEAST_LABEL = 0.01


def sensitivity(result: Result, found: list[Sensitivity]) -> Figure:
    """Return one panel per rule: bars of mean α² along the first axis, resistances below, actions above."""
    axis = panel_axes(result)[0]
    rows = -(-len(found) // _COLUMNS)
    figure = style.figure(_WIDTH, rows * _HEIGHT)
    for k, rule in enumerate(found):
        left = 13.0 + (k % _COLUMNS) * 84.0
        bottom = rows * _HEIGHT - (k // _COLUMNS) * _HEIGHT - _PANEL - 7.0
        axes = style.panel(figure, left, bottom, 56.0 if len(found) > 1 else 136.0, _PANEL)
        axes.set_title(rule.rule)
        axes.set_ylabel("mean α² (%)")
        _bars(axes, result, rule, axis)
    return figure


def _bars(axes: Axes, result: Result, rule: Sensitivity, axis: str) -> None:
    values = result.situations[BY_RULE if axis == BY_RULE else axis].to_numpy()[rule.rows]
    ruler = scale(values)
    if axis == BY_RULE or ruler.levels is None:
        labels: tuple[str, ...] = ("all situations",)
        shares = rule.shares[:, None]
    else:
        present = [np.isclose(ruler.position, level) for level in ruler.levels]
        labels = ruler.labels
        shares = np.stack([_mean_square(rule, rows) for rows in present], axis=1)
        axes.set_xlabel(axis_label(result, axis))
    order = _order(rule)
    bottom = np.zeros(shares.shape[1])
    at = np.arange(shares.shape[1], dtype=float)
    edges = []
    cold = warm = 0
    for i in order:
        resists = rule.mean[i] >= 0
        colour = _COLD[cold % len(_COLD)] if resists else _WARM[warm % len(_WARM)]
        cold, warm = cold + resists, warm + (not resists)
        axes.bar(at, 100.0 * shares[i], 0.86, bottom=bottom, color=colour, edgecolor="white", linewidth=0.5)
        edges.append((bottom[-1], 100.0 * shares[i][-1], rule.variables[i], colour))
        bottom = bottom + 100.0 * shares[i]
    _boundary(axes, rule, shares, at)
    axes.set_xticks(at, labels)
    if sum(len(t) + 1 for t in labels) * 1.25 > 60.0:
        axes.tick_params(axis="x", labelrotation=25)
    axes.set_xlim(-0.55, at[-1] + 0.55)
    axes.set_ylim(0.0, 100.0)
    _labels(axes, edges)


def _mean_square(rule: Sensitivity, rows: NDArray[np.bool_]) -> Array:
    if not rows.any():
        return np.zeros(len(rule.variables))
    return np.asarray(rule.alpha[:, rows] ** 2 @ (rule.weight[rows] / rule.weight[rows].sum()))


def _order(rule: Sensitivity) -> list[int]:
    """Resistances first, each side from the largest share outwards to the boundary between them."""
    mean, share = rule.mean, rule.shares
    cold = sorted((i for i in range(len(mean)) if mean[i] >= 0), key=lambda i: -share[i])
    warm = sorted((i for i in range(len(mean)) if mean[i] < 0), key=lambda i: share[i])
    return cold + warm


def _boundary(axes: Axes, rule: Sensitivity, shares: Array, at: Array) -> None:
    """Draw the line between resistances and actions."""
    level = 100.0 * shares[rule.mean >= 0].sum(axis=0)
    axes.hlines(level, at - 0.43, at + 0.43, color=style.INK, linewidth=1.2)


def _labels(axes: Axes, edges: list[tuple[float, float, str, str]]) -> None:
    """Name the variables beside the last bar, pushed apart where they would overlap."""
    named = [
        (low + 0.5 * height, name, colour)
        for low, height, name, colour in edges
        if height >= 100 * _LEAST_LABEL
    ]
    apart = 7.2
    places = [p for p, *_ in named]
    for i in range(1, len(places)):
        places[i] = max(places[i], places[i - 1] + apart)
    over = places[-1] - 99.0 if places else 0.0
    if over > 0:
        places[-1] -= over
        for i in range(len(places) - 2, -1, -1):
            places[i] = min(places[i], places[i + 1] - apart)
    right = axes.get_xlim()[1]
    width = right - axes.get_xlim()[0]
    for (middle, name, colour), y in zip(named, places, strict=True):
        axes.plot(
            [right - 0.12 * min(width / 10, 1), right + 0.03 * width],
            [middle, y],
            color=style.GREY,
            linewidth=0.5,
            clip_on=False,
        )
        axes.plot(
            right + 0.055 * width, y, "s", markersize=4.5, color=colour, clip_on=False,
            markeredgecolor=style.GREY, markeredgewidth=0.3,
        )  # fmt: skip
        axes.text(right + 0.085 * width, y, symbols.plain(name), va="center", ha="left", fontsize=7)
