"""How far the index of FORM is from the verified one, over the index itself."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import style
from calibrate.report.axis_figure import rule_legend
from calibrate.report.verification import counted

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.study.result import Result

_WIDTH, _HEIGHT = 172.0, 66.0
CAPTION = (
    "difference of the verified index to that of FORM in every situation; marks by rule. With bars: simulated, with "
    "its 95 % interval; pale: from the exact probability beyond the paraboloid fitted at the design point. Dashed: "
    "tolerance."
)


def verification_figure(result: Result, kind: str) -> Figure:
    """Return the verified index less that of FORM over the index of FORM, marked by rule."""
    v = result.verifications[kind]
    rules = list(result.study.judged)
    part = counted(result, v) & np.isfinite(v.difference)
    n = result.study.situations.n
    many = len(rules) > 1
    figure = style.figure(_WIDTH, _HEIGHT + (4.0 if many else 0.0))
    axes = style.panel(figure, 16.0, 15.0 if many else 11.0, 150.0, 50.0)
    axes.axhline(0.0, color=style.GREY, linewidth=0.8)
    simulated = part & v.is_simulated
    if simulated.any():
        low, high = v.lower[simulated] - v.form[simulated], v.upper[simulated] - v.form[simulated]
        axes.vlines(v.form[simulated], low, high, color=style.INK, linewidth=0.7)
    for k in range(len(rules)):
        rows = np.zeros(part.size, dtype=np.bool_)
        rows[k * n : (k + 1) * n] = True
        for chosen, alpha in ((part & ~v.is_simulated & rows, 0.4), (simulated & rows, 1.0)):
            face = style.colour(k) if style.filled(k) else "white"
            axes.scatter(
                v.form[chosen],
                v.difference[chosen],
                marker=style.mark(k),
                s=13.0,
                facecolors=face,
                edgecolors=style.colour(k),
                linewidths=0.8,
                alpha=alpha,
                zorder=3,
            )
    axes.margins(x=0.04, y=0.12)
    bottom, top = axes.get_ylim()
    tolerance = v.settings.tolerance
    for level in (-tolerance, tolerance):
        if bottom - 0.3 * tolerance < level < top + 0.3 * tolerance:
            axes.axhline(level, color=style.GREY, linewidth=0.8, linestyle=(0, (4, 2)))
    axes.set_xlabel(f"β by FORM, {kind} factors")
    axes.set_ylabel("verified β less FORM")
    axes.grid(visible=True, axis="y")
    if many:
        rule_legend(figure, result, 0.5, min(len(rules), 4))
    return figure
