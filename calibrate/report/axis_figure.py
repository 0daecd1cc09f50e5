"""Beta of every design situation against one axis: present factors on the left, proposed on the right."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style, symbols
from calibrate.report.outcome import column_unit, taking_part, varying_columns

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.study.result import Result

Array = NDArray[np.float64]

MOST_PANELS = 6
MOST_LEVELS = 14
"""Up to so many different values an axis has levels, with a mean at each; beyond, it is continuous."""
BY_RULE = "rule"
MANY_POINTS = 1500
"""From so many points on they are drawn small, see-through, and as pixels inside the SVG."""

WIDTH, PANEL_WIDTH, PANEL_HEIGHT = 172.0, 68.0, 54.0
_CHARACTER = 1.35
"""Width of a character of a label in millimetres."""
_LEFT, _GAP, _TOP, _BOTTOM, _LEGEND_ROW = 12.0, 5.5, 7.0, 11.0, 4.5
TITLES = {"present": "Present factors", "proposed": "Proposed factors"}


def panel_axes(result: Result) -> list[str]:
    """Return the columns that deserve a figure: those that vary, text only with few values, six at most.

    Where none does, the rules themselves are the axis.
    """
    frame = result.situations
    names = [
        name
        for name in varying_columns(result)
        if frame[name].dtype.kind in "fiu" or frame[name].nunique() <= MOST_LEVELS
    ]
    return names[:MOST_PANELS] or [BY_RULE]


@dataclass(frozen=True, slots=True)
class Scale:
    """Where the values of an axis are drawn; ``levels`` (positions) is None for a continuous axis.

    ``ordered`` is false for text, whose neighbours have nothing in common.
    """

    position: Array
    levels: Array | None
    labels: tuple[str, ...]
    gap: float
    ordered: bool = True

    def slant(self, width: float) -> tuple[float, float]:
        """Return the room in millimetres that labels need below and to the left, 0 where they stand level."""
        longest = _CHARACTER * max(map(len, self.labels), default=0)
        if self.ordered or len(self.labels) * (longest + _CHARACTER) <= width:
            return 0.0, 0.0
        reach = longest * math.sqrt(0.5)
        return reach, max(reach - 0.5 * width / len(self.labels), 0.0)


def scale(values: NDArray[np.generic]) -> Scale:
    """Return the positions of numbers, levels or text on an axis."""
    if values.dtype.kind in "fiu":
        numeric = values.astype(float)
        levels = np.unique(numeric[np.isfinite(numeric)])
        if levels.size > MOST_LEVELS or not levels.size:
            return Scale(numeric, None, (), 0.0)
        labels = tuple(numbers.column(levels))
        gaps = np.diff(levels)
        if not gaps.size:
            return Scale(numeric, levels, labels, 1.0)
        if gaps.min() >= 0.04 * (levels[-1] - levels[0]):
            return Scale(numeric, levels, labels, float(gaps.min()))
        # Levels that would crowd together stand side by side instead.
        return Scale(
            np.searchsorted(levels, numeric).astype(float), np.arange(levels.size, dtype=float), labels, 1.0
        )
    order = {text: float(i) for i, text in enumerate(dict.fromkeys(map(str, values)))}
    position = np.array([order[str(v)] for v in values])
    return Scale(
        position, np.array(list(order.values())), tuple(shorten(t) for t in order), 1.0, ordered=False
    )


def shorten(text: str, most: int = 18) -> str:
    """Return a label that is not too long for a tick."""
    return text if len(text) <= most else text[: most - 1] + "…"


def beta_by_axis(result: Result, axis: str) -> Figure:
    """Return the figure of one axis; both panels share the scale of beta."""
    frame = result.situations
    ruler = scale(frame["rule" if axis == BY_RULE else axis].to_numpy())
    rules = list(result.study.judged)
    columns = max(1, min(len(rules), int(PANEL_WIDTH * 2 // (10 + 1.5 * max(map(len, rules))))))
    legend = _LEGEND_ROW * -(-len(rules) // columns) + 1.0 if axis != BY_RULE and len(rules) > 1 else 0.0
    down, sideways = ruler.slant(PANEL_WIDTH)
    first = max(_LEFT, sideways + 1.0)
    width = PANEL_WIDTH - 0.5 * (first - _LEFT)
    below = _BOTTOM + legend + max(down - 2.0, 0.0)
    figure = style.figure(WIDTH, _TOP + PANEL_HEIGHT + below)
    limits = beta_limits(result)
    for k, kind in enumerate(TITLES):
        axes = style.panel(figure, first + k * (width + _GAP), below, width, PANEL_HEIGHT)
        axes.set_ylim(*limits)
        axes.set_title(TITLES[kind])
        axes.grid(visible=True, axis="y")
        _points(axes, result, kind, ruler, by_rule=axis == BY_RULE)
        target_lines(axes, result, label=k == len(TITLES) - 1)
        level_ticks(axes, ruler, width)
        axes.set_xlabel(axis_label(result, axis), parse_math=True)
        if k:
            axes.tick_params(labelleft=False)
        else:
            axes.set_ylabel("reliability index β")
    if legend:
        rule_legend(figure, result, (first + width + _GAP / 2) / WIDTH, columns)
    return figure


def rule_legend(figure: Figure, result: Result, middle: float, columns: int) -> None:
    """Name the marks of the rules at the foot of a figure, also those that have no point in a panel.

    What is reported only, without weight, is drawn nowhere.
    """
    from matplotlib.lines import Line2D

    handles = []
    for i, (rule, weight) in enumerate(zip(result.study.judged, result.study.weights, strict=True)):
        if not weight:
            continue
        colour = style.colour(i)
        handles.append(
            Line2D(
                [], [], linestyle="none", marker=style.mark(i), markersize=4.5, markeredgecolor=colour,
                markerfacecolor=colour if style.filled(i) else "white", markeredgewidth=0.8, label=rule,
            )
        )  # fmt: skip
    figure.legend(handles=handles, loc="lower center", bbox_to_anchor=(middle, 0.0), ncols=columns)


def axis_label(result: Result, axis: str) -> str:
    """Return name and unit of an axis, with its description where the study gives one; formulas between dollars."""
    if axis == BY_RULE:
        return "rule"
    unit = column_unit(result, axis)
    text = symbols.drawn(axis) + (f" ({unit})" if unit else "")
    description = result.study.axis_descriptions.get(axis, "")
    return f"{text}: {symbols.literal(shorten(description, 44))}" if description else text


def beta_limits(result: Result) -> tuple[float, float]:
    """Return limits of the scale of beta that hold present and proposed values, target and floor."""
    shown = [result.situations[f"beta_{kind}"].to_numpy(float)[taking_part(result, kind)] for kind in TITLES]
    marks = [result.study.target_beta]
    if result.study.objective.floor is not None:
        marks.append(result.study.objective.floor)
    every = np.concatenate([*shown, np.array(marks)])
    low, high = float(every.min()), float(every.max())
    margin = max(0.07 * (high - low), 0.08)
    return low - margin, high + margin


def target_lines(axes: Axes, result: Result, *, label: bool) -> None:
    """Draw the target and the floor across a panel, named beside it."""
    target, floor = result.study.target_beta, result.study.objective.floor
    lines: list[tuple[float, str, Any]] = [(target, "target", "-")]
    if floor is not None and floor != target:
        lines.append((floor, "floor", (0, (4, 2))))
    low, high = axes.get_ylim()
    close = floor is not None and abs(target - floor) < 0.05 * (high - low)
    for value, name, dash in lines:
        axes.axhline(value, color=style.INK, linewidth=0.9, linestyle=dash, zorder=1.5)
        if label:
            align = "center" if not close else ("bottom" if value == max(v for v, *_ in lines) else "top")
            axes.annotate(
                f"{name} {numbers.significant(value)}",
                (1.0, value),
                (4, 0),
                xycoords=("axes fraction", "data"),
                textcoords="offset points",
                va=align,
                fontsize=7,
                annotation_clip=False,
            )


def _points(axes: Axes, result: Result, kind: str, ruler: Scale, *, by_rule: bool) -> None:
    beta, part = result.situations[f"beta_{kind}"].to_numpy(float), taking_part(result, kind)
    scatter_by_rule(axes, result, beta, part, ruler, by_rule=by_rule)
    if not part.any():
        axes.text(0.5, 0.5, "no β", transform=axes.transAxes, ha="center", color=style.GREY)


def scatter_by_rule(
    axes: Axes,
    result: Result,
    values: Array,
    part: NDArray[np.bool_],
    ruler: Scale,
    *,
    by_rule: bool = False,
) -> None:
    """Draw one value of every situation that takes part, marked by rule, with weighted means at levels of the axis."""
    frame = result.situations
    rule_of, weight = frame["rule"].to_numpy(), frame["weight"].to_numpy(float)
    rules = list(result.study.judged)
    many = int(part.sum()) > MANY_POINTS
    alone = len(varying_columns(result)) == 1
    reach = min(0.22, 0.08 * (len(rules) - 1)) * ruler.gap
    shifts = np.linspace(-reach, reach, len(rules)) if len(rules) > 1 and not by_rule else [0.0] * len(rules)
    heaviest = weight.max() if weight.size else 1.0
    for i, (rule, shift) in enumerate(zip(rules, shifts, strict=True)):
        rows = part & (rule_of == rule) & np.isfinite(ruler.position)
        x, y, own = ruler.position[rows] + shift, values[rows], weight[rows]
        colour = style.colour(i)
        if ruler.levels is not None and ruler.levels.size > 1 and not by_rule and x.size:
            at, mean = _means(x, y, own)
            shared = at.size < x.size
            # A line through single situations that differ in other columns as well would show a trend that is none.
            if ruler.ordered and (shared or alone):
                axes.plot(at, mean, color=colour, linewidth=1.0, zorder=2)
            elif shared:
                axes.plot(at, mean, "_", color=colour, markersize=9, zorder=2)
        axes.scatter(
            x,
            y,
            s=4.0 if many else 5.0 + 13.0 * own / heaviest,
            marker=style.mark(i),
            facecolors=colour if style.filled(i) else "white",
            edgecolors=colour,
            linewidths=0.4 if many else 0.8,
            alpha=0.45 if many else 0.9,
            zorder=3,
            rasterized=many,
        )


def _means(x: Array, y: Array, weight: Array) -> tuple[Array, Array]:
    """Return the weighted mean of y at each value of x."""
    at, group = np.unique(x, return_inverse=True)
    total = np.bincount(group, weights=weight, minlength=at.size)
    return at, np.bincount(group, weights=weight * y, minlength=at.size) / total


def level_ticks(axes: Axes, ruler: Scale, width: float) -> None:
    """Set ticks at the levels of an axis."""
    if ruler.levels is None:
        return
    every = 1
    longest = max(map(len, ruler.labels), default=1)
    if ruler.ordered and ruler.levels.size * (longest + 1) * _CHARACTER > width:
        every = 2
    axes.set_xticks(ruler.levels[::every], ruler.labels[::every])
    pad = 0.6 * ruler.gap if ruler.ordered and ruler.gap < 1.0 else 0.5 * ruler.gap
    axes.set_xlim(ruler.levels[0] - pad, ruler.levels[-1] + pad)
    if ruler.slant(PANEL_WIDTH)[0]:
        slant_labels(axes)


def slant_labels(axes: Axes) -> None:
    """Set the labels of the horizontal axis aslant, ending at their ticks."""
    for label in axes.get_xticklabels():
        label.set(
            rotation=45, rotation_mode="anchor", horizontalalignment="right", verticalalignment="center"
        )
