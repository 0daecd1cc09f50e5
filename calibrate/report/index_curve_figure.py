"""The index of one situation against what is varied."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import numbers, style, symbols
from calibrate.units import format_unit

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.study.index_curve import Curve
    from calibrate.study.index_varied import Varied
    from calibrate.study.one_situation import OneSituation

_WIDTH, _HEIGHT = 172.0, 84.0
_DASHED = (0, (4, 2))


def varied_label(what: Varied) -> str:
    """Return the label of an axis, as a formula of matplotlib: name and unit."""
    name, dot, moment = what.name.partition(".")
    shown = f"{moment} of {symbols.drawn(name)}" if dot else symbols.drawn(name)
    return f"{shown} ({symbols.literal(format_unit(what.unit.text))})" if what.unit.text else shown


def curve_figure(found: OneSituation, curve: Curve) -> Figure:
    """Return beta by FORM and second order, the target, and where the situation stands at present."""
    what = curve.varied
    factor = what.unit.factor
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 14.0, 18.0, 152.0, 62.0)
    x = curve.values / factor
    axes.plot(
        x, curve.beta, color=style.BLUE, linewidth=1.4, marker="o", markersize=2.5, label="FORM", zorder=3
    )
    if np.isfinite(curve.second_order).any():
        axes.plot(
            x,
            curve.second_order,
            color=style.OCHRE,
            linewidth=1.1,
            linestyle=_DASHED,
            label="second order",
            zorder=3,
        )
        doubtful = np.isfinite(curve.second_order) & ~curve.sound
        if doubtful.any():
            axes.plot(
                x[doubtful], curve.second_order[doubtful], "x", color=style.OCHRE, markersize=4.0,
                label="second order doubtful", zorder=3,
            )  # fmt: skip
    target = found.study.target_beta
    axes.axhline(target, color=style.GREY, linewidth=0.9, label=f"target {numbers.significant(target)}")
    present = what.present / factor
    if np.isfinite(present) and x[0] <= present <= x[-1]:
        axes.axvline(present, color=style.GREY, linewidth=0.8, linestyle=(0, (1, 1.5)))
        label = f"present {numbers.significant(present, 5)}"
        if np.isfinite(found.beta):
            label += f", β = {numbers.fixed(found.beta, 3)}"
            axes.plot(present, found.beta, "D", color=style.INK, markersize=5.0, label=label, zorder=4)
        else:
            label += ", no β"
            axes.plot([], [], color=style.GREY, linewidth=0.8, linestyle=(0, (1, 1.5)), label=label)
    required = found.required
    if (
        required is not None
        and required.met
        and required.varied.name == what.name
        and curve.values[0] <= required.value <= curve.values[-1]
    ):
        axes.plot(
            required.value / factor, required.beta, "s", color=style.PLUM, markerfacecolor="white", markersize=5.0,
            label=f"required {numbers.significant(required.value / factor, 5)}", zorder=4,
        )  # fmt: skip
    axes.set_xlim(x[0], x[-1])
    axes.margins(y=0.08)
    axes.grid(visible=True)
    axes.set_xlabel(varied_label(what), parse_math=True)
    axes.set_ylabel("β")
    axes.legend(
        loc="upper center",
        bbox_to_anchor=(0.5, -0.15),
        ncols=6,
        borderaxespad=0.0,
        columnspacing=1.6,
        handlelength=2.2,
    )
    return figure
