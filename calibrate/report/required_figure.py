"""Which value of a factor each design situation alone would require: how far one value can serve all."""

from __future__ import annotations

from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from calibrate.report import numbers, style, symbols
from calibrate.report.axis_figure import (
    BY_RULE,
    axis_label,
    level_ticks,
    panel_axes,
    rule_legend,
    scale,
    scatter_by_rule,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.study.result import Result

MOST_PANELS = 6
_WIDTH, _PANEL_WIDTH, _PANEL_HEIGHT = 172.0, 53.0, 42.0
_LEFT, _GAP, _TOP, _BOTTOM, _LEGEND = 15.0, 33.0, 7.0, 11.0, 5.0


def drawn_factors(result: Result) -> list[str]:
    """Return the free factors that have a required value in some situation with weight."""
    weight = result.situations["weight"].to_numpy(float)
    names = [f.name for f in result.study.factors if not f.held]
    found = [
        n for n in names if np.isfinite(result.required[f"required_{n}"].to_numpy(float)[weight > 0]).any()
    ]
    return found[:MOST_PANELS]


def required_factors(result: Result, names: list[str]) -> Figure:
    """Return one panel per free factor: required values by the first axis, present and proposed values as lines."""
    axis = panel_axes(result)[0]
    ruler = scale(result.situations["rule" if axis == BY_RULE else axis].to_numpy())
    weight = result.situations["weight"].to_numpy(float)
    rows = -(-len(names) // 2)
    down, _ = ruler.slant(_PANEL_WIDTH)
    below = _BOTTOM + max(down - 2.0, 0.0)
    pitch = _TOP + _PANEL_HEIGHT + below
    figure = style.figure(_WIDTH, rows * pitch + _LEGEND)
    steps = {f.name: f.step for f in result.study.factors}
    for k, name in enumerate(names):
        shown = partial(numbers.factor, step=steps[name])
        left = _LEFT + (k % 2) * (_PANEL_WIDTH + _GAP)
        bottom = _LEGEND + (rows - 1 - k // 2) * pitch + below
        axes = style.panel(figure, left, bottom, _PANEL_WIDTH, _PANEL_HEIGHT)
        required = result.required[f"required_{name}"].to_numpy(float)
        part = np.isfinite(required) & (weight > 0)
        scatter_by_rule(axes, result, required, part, ruler, by_rule=axis == BY_RULE)
        sets = result.calibration
        present, proposed = sets.present.factors[name], sets.proposed.factors[name]
        if present == proposed:
            _line(axes, proposed, f"kept {shown(proposed)}", "-", "center")
        else:
            above, below_it = ("bottom", "top") if proposed > present else ("top", "bottom")
            _line(axes, present, f"present {shown(present)}", (0, (4, 2)), below_it)
            _line(axes, proposed, f"proposed {shown(proposed)}", "-", above)
        axes.margins(y=0.12)
        axes.set_title(symbols.drawn(name), parse_math=True)
        axes.set_xlabel(axis_label(result, axis), parse_math=True)
        if k % 2 == 0:
            axes.set_ylabel("required value")
        axes.grid(visible=True, axis="y")
        level_ticks(axes, ruler, _PANEL_WIDTH)
    if axis != BY_RULE and len(result.study.judged) > 1:
        rule_legend(figure, result, 0.5, min(len(result.study.judged), 4))
    return figure


def _line(axes: Axes, value: float, text: str, dash: Any, align: str) -> None:
    axes.axhline(value, color=style.INK, linewidth=0.9, linestyle=dash, zorder=1.5)
    axes.annotate(
        text,
        (1.0, value),
        (3, 0),
        xycoords=("axes fraction", "data"),
        textcoords="offset points",
        va=align,
        fontsize=6.5,
        annotation_clip=False,
    )
