"""Which basic variable matters: squared sensitivity factors stacked along the first axis."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import style, symbols
from calibrate.report.axis_figure import BY_RULE, Scale, axis_label, panel_axes, scale, slant_labels

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.report.sensitivities import Sensitivity
    from calibrate.study.result import Result

Array = NDArray[np.float64]

_WIDTH, _HEIGHT, _PANEL = 172.0, 64.0, 46.0
_LEFT, _WIDE, _NARROW = 13.0, 136.0, 56.0
_COLUMNS = 2
# From dark to light, so that neighbours differ in grey; resistances cold, actions warm.
_COLD = ("#173a68", "#7fb0dc", "#33679f", "#bcd6ec", "#4f8fae")
_WARM = ("#f3d9a8", "#c27812", "#e8b65c", "#8a4f0a", "#f7e9cd")
_ALL: tuple[str, ...] = ("all situations",)
_LEAST_LABEL = 0.01


@dataclass(frozen=True, slots=True)
class _Palette:
    """Order and colour of the variables, the same in all panels."""

    rank: dict[str, float]
    colour: dict[str, str]


def sensitivity(result: Result, found: list[Sensitivity]) -> Figure:
    """Return one panel per rule: bars of mean α² along the first axis, resistances below, actions above."""
    axis = panel_axes(result)[0]
    ruler = scale(result.situations[axis].to_numpy())
    palette = _palette(found)
    width = _WIDE if len(found) == 1 else _NARROW
    down, sideways = (0.0, 0.0) if axis == BY_RULE else ruler.slant(width)
    first, height = max(_LEFT, sideways + 1.0), _HEIGHT + max(down - 2.0, 0.0)
    width -= first - _LEFT
    rows = -(-len(found) // _COLUMNS)
    figure = style.figure(_WIDTH, rows * height)
    for k, rule in enumerate(found):
        left = first + (k % _COLUMNS) * 84.0
        bottom = (rows - k // _COLUMNS) * height - _PANEL - 7.0
        axes = style.panel(figure, left, bottom, width, _PANEL)
        axes.set_title(rule.rule)
        axes.set_ylabel("mean α² (%)")
        if axis == BY_RULE or ruler.levels is None:
            labels, shares = _ALL, rule.shares[:, None]
        else:
            labels, shares = ruler.labels, _shares(rule, ruler)
            axes.set_xlabel(axis_label(result, axis), parse_math=True)
        _bars(axes, rule, shares, palette)
        axes.set_xticks(np.arange(len(labels)), labels)
        if down:
            slant_labels(axes)
    return figure


def _palette(found: list[Sensitivity]) -> _Palette:
    """Rank the variables by their shares in all rules; a resistance is cold, an action warm."""
    share: dict[str, float] = {}
    sign: dict[str, float] = {}
    for rule in found:
        for name, square, mean in zip(rule.variables, rule.shares, rule.mean, strict=True):
            share[name] = share.get(name, 0.0) + float(square)
            sign[name] = sign.get(name, 0.0) + float(mean)
    cold = sorted((n for n in share if sign[n] >= 0), key=lambda n: -share[n])
    warm = sorted((n for n in share if sign[n] < 0), key=lambda n: share[n])
    colour = {n: _COLD[i % len(_COLD)] for i, n in enumerate(cold)}
    colour |= {n: _WARM[i % len(_WARM)] for i, n in enumerate(warm)}
    return _Palette(share, colour)


def _shares(rule: Sensitivity, ruler: Scale) -> Array:
    """Return the mean of alpha squared of each variable at each level of the axis."""
    assert ruler.levels is not None, "a continuous axis has no levels"
    position = ruler.position[rule.rows]
    shares = np.zeros((len(rule.variables), ruler.levels.size))
    for k, level in enumerate(ruler.levels):
        rows = np.isclose(position, level)
        if rows.any():
            shares[:, k] = rule.alpha[:, rows] ** 2 @ (rule.weight[rows] / rule.weight[rows].sum())
    return shares


def _bars(axes: Axes, rule: Sensitivity, shares: Array, palette: _Palette) -> None:
    bottom = np.zeros(shares.shape[1])
    at = np.arange(shares.shape[1], dtype=float)
    edges = []
    for i in _order(rule, palette):
        height, colour = 100.0 * shares[i], palette.colour[rule.variables[i]]
        style.bars(axes, at - 0.43, bottom, 0.86, height, colour, "white", 0.5)
        if shares[i].max() >= _LEAST_LABEL:
            edges.append((bottom[-1] + 0.5 * height[-1], rule.variables[i], colour))
        bottom = bottom + height
    level = 100.0 * shares[rule.mean >= 0].sum(axis=0)
    axes.hlines(level, at - 0.43, at + 0.43, color=style.INK, linewidth=1.2)
    axes.set_xlim(-0.55, at[-1] + 0.55)
    axes.set_ylim(0.0, 100.0)
    _labels(axes, edges)


def _order(rule: Sensitivity, palette: _Palette) -> list[int]:
    """Resistances first, each side from the largest share outwards to the boundary between them."""
    rank = [palette.rank[n] for n in rule.variables]
    cold = sorted((i for i, mean in enumerate(rule.mean) if mean >= 0), key=lambda i: -rank[i])
    warm = sorted((i for i, mean in enumerate(rule.mean) if mean < 0), key=lambda i: rank[i])
    return cold + warm


def _labels(axes: Axes, named: list[tuple[float, str, str]]) -> None:
    """Name the variables beside the last bar, pushed apart where they would overlap."""
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
        axes.text(right + 0.085 * width, y, symbols.drawn(name), va="center", fontsize=7, parse_math=True)
