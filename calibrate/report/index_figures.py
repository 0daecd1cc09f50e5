"""Pictures of the limit state of one situation in standard normal space."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style, symbols
from calibrate.report.index_curve_figure import curve_figure, varied_label
from calibrate.units import format_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.reliability import Problem
    from calibrate.study.index_curve import Curve
    from calibrate.study.one_situation import Analysis, OneSituation

Array = NDArray[np.float64]

_WIDTH, _HEIGHT, _SIDE, _LEFT, _BOTTOM = 172.0, 112.0, 98.0, 14.5, 11.0
_GRID = 181
_FAMILY = 5
_DASHED, _DOTTED, _BROKEN = (0, (4, 2)), (0, (1, 1.5)), (0, (6, 2, 1, 2))
_APART = 0.035
"""Points of the iteration that are nearer to one another, as a part of the picture, share a number."""
_SHADE = "#eceff2"
_BESIDE, _ENTRY = 1.05, 4.7
"""Where legend and caption begin, as a part of the width of the picture; height of an entry of the legend in mm."""


def index_figures(found: OneSituation) -> dict[str, style.Rendered]:
    """Return the figures of a situation by name: what there is of ``limit_state``, ``family`` and ``curve``."""
    drawn: dict[str, style.Rendered] = {}
    analysis, curve = found.analysis, found.curve
    with style.context():
        if analysis is not None and analysis.reliability.converged[0]:
            random = analysis.problem.random
            if len(random) == 2:
                drawn["limit_state"] = style.render(plane_figure(found, analysis))
            elif len(random) > 2 and np.isfinite(analysis.second_order.curvatures).all():
                drawn["limit_state"] = style.render(section_figure(found, analysis))
            if curve is not None and curve.answer is not None and len(random) == 2:
                drawn["family"] = style.render(family_figure(found, analysis, curve))
        if curve is not None:
            drawn["curve"] = style.render(curve_figure(found, curve))
    return drawn


# ------------------------------------------------------------ two random variables


def plane_figure(found: OneSituation, analysis: Analysis) -> Figure:
    """Return the limit state over two random variables, the way of the iteration and the design points."""
    rows = analysis.problem.random
    beta = abs(float(analysis.reliability.beta[0]))
    steps = analysis.trace.u[:, rows]
    reach = _reach(beta, np.abs(steps).max())
    figure, axes = _frame(reach)
    grid = np.linspace(-reach, reach, _GRID)
    first, second = np.meshgrid(grid, grid)
    g = _values(analysis.problem, rows, first, second)
    _failure(axes, grid, grid, g)
    _circle(axes, beta)
    _way(axes, steps, reach)
    _points(axes, analysis, rows)
    _axis_names(axes, found, rows)
    caption = [
        f"{_place(found)}: the limit state in standard normal space. Shaded: failure.",
        f"Circle: radius |β| = {numbers.fixed(beta, 4)} around the origin.",
        "Numbers: points of the iteration, from the medians (0).",
        f"Star: design point{_further(analysis)}; the arrow is α, the unit gradient there.",
    ]
    if found.dependent:
        caption.append("The axes are independent variables behind the basic ones, in the order of the study.")
    _caption(axes, caption)
    return figure


def family_figure(found: OneSituation, analysis: Analysis, curve: Curve) -> Figure:
    """Return the lines g = 0 for a few values of what is varied."""
    answer = curve.answer
    assert answer is not None
    rows = analysis.problem.random
    picks = np.unique(np.linspace(0, answer.model.n - 1, _FAMILY).round().astype(np.intp))
    shown = [j for j in picks if np.isfinite(answer.beta[j])]
    # The window holds the origin and the design points.
    points = np.stack([np.zeros(2), *(answer.found.reliability.u[list(rows), j] for j in shown)])
    middle = 0.5 * (points.min(axis=0) + points.max(axis=0))
    reach = 0.5 * float(np.ptp(points, axis=0).max()) + 1.3
    figure, axes = _frame(reach, middle)
    across, along = (np.linspace(c - reach, c + reach, _GRID) for c in middle)
    first, second = np.meshgrid(across, along)
    what = curve.varied
    unit = f" {format_unit(what.unit.text)}" if what.unit.text else ""
    for k, j in enumerate(shown):
        problem = answer.found.problems[int(answer.found.governing[j])]
        g = _values(problem, rows, first, second, int(j))
        colour, dash = style.colour(k), ("-", _DASHED, _DOTTED, _BROKEN, "-")[k % _FAMILY]
        if (g < 0.0).any() and (g > 0.0).any():
            axes.contour(across, along, g, levels=[0.0], colors=[colour], linestyles=[dash], linewidths=1.1)
        value = numbers.significant(float(curve.values[curve.rows[j]]) / what.unit.factor, 4)
        axes.plot(
            *points[k + 1],
            style.mark(k),
            color=colour,
            markerfacecolor=colour if style.filled(k) else "white",
            markersize=5.0,
            linestyle="none",
            label=f"{value}{unit}: β = {numbers.fixed(float(answer.beta[j]), 3)}",
            zorder=4,
        )
    axes.plot(0.0, 0.0, "+", color=style.INK, markersize=7.0)
    _axis_names(axes, found, rows)
    axes.text(_BESIDE, 1.0, varied_label(what), transform=axes.transAxes, va="top", parse_math=True)
    _legend(axes, above=6.0)
    _caption(
        axes,
        [
            f"{_place(found)}: the limit state g = 0 for several values, with the design point of each.",
            what.note,
        ],
        above=6.0,
    )
    return figure


# ------------------------------------------------------------ more of them


def section_figure(found: OneSituation, analysis: Analysis) -> Figure:
    """Return the limit state in the plane through origin and design point that holds the largest curvature."""
    reliability, second = analysis.reliability, analysis.second_order
    beta = float(reliability.beta[0])
    most = int(np.argmax(np.abs(second.curvatures[:, 0])))
    kappa = float(second.curvatures[most, 0])
    away, aside = -reliability.alpha[:, 0], _signed(second.axes[:, most, 0])
    reach = _reach(abs(beta), 0.0)
    figure, axes = _frame(reach, (0.0, 0.5 * beta))
    across = np.linspace(-reach, reach, _GRID)
    along = across + 0.5 * beta
    t, s = np.meshgrid(across, along)
    u = away[:, None] * s.ravel() + aside[:, None] * t.ravel()
    with np.errstate(all="ignore"):
        g = analysis.problem.take(np.zeros(s.size, dtype=np.intp), s.size).value(u).reshape(s.shape)
    _failure(axes, across, along, g)
    _circle(axes, abs(beta))
    axes.axhline(beta, color=style.TEAL, linewidth=1.0, linestyle=_BROKEN, label="plane of FORM")
    axes.plot(
        across,
        beta + 0.5 * kappa * across**2,
        color=style.OCHRE,
        linewidth=1.2,
        linestyle=_DOTTED,
        label="parabola",
    )
    axes.plot(0.0, beta, "*", color=style.PLUM, markersize=9.0, zorder=5)
    axes.set_xlabel("u along the direction of the largest curvature")
    axes.set_ylabel("u towards the design point, against α")
    _legend(axes)
    parts = sorted(zip(reliability.variables, aside, strict=True), key=lambda pair: -abs(pair[1]))
    named = ", ".join(f"{numbers.fixed(v, 2)} {symbols.plain(n)}" for n, v in parts[:4] if abs(v) >= 0.05)
    caption = [
        f"{_place(found)}: section of standard normal space through origin and design point (star).",
        "It lies along α and along the direction of the largest curvature. Shaded: failure.",
        f"Circle: radius |β| = {numbers.fixed(abs(beta), 4)}.",
        f"Largest of {second.curvatures.shape[0]} curvatures: κ = {numbers.significant(kappa, 3)}.",
        f"Its direction: {named}{' and smaller parts' if len(parts) > 4 else ''}.",
    ]
    if found.dependent:
        caption.append("The directions are those of independent variables behind the basic ones.")
    _caption(axes, caption)
    return figure


def _signed(direction: Array) -> Array:
    """Return an axis with its largest component positive: which way it points has no meaning."""
    return direction if direction[int(np.argmax(np.abs(direction)))] >= 0.0 else -direction


# ------------------------------------------------------------ parts


def _place(found: OneSituation) -> str:
    return f"Rule {found.rule.name}, situation {found.number}"


def _reach(beta: float, farthest: float) -> float:
    """Return the half width of a picture in which the origin and the design point stand."""
    needed = max(beta + 1.3, 2.5)
    return float(max(needed, min(farthest + 0.5, 1.5 * needed)))


def _frame(reach: float, centre: Sequence[float] | Array = (0.0, 0.0)) -> tuple[Figure, Axes]:
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, _LEFT, _BOTTOM, _SIDE, _SIDE)
    axes.set_xlim(centre[0] - reach, centre[0] + reach)
    axes.set_ylim(centre[1] - reach, centre[1] + reach)
    axes.grid(visible=True)
    return figure, axes


def _values(problem: Problem, rows: tuple[int, ...], first: Array, second: Array, column: int = 0) -> Array:
    """Return g of one situation over a plane of two random variables."""
    u = np.zeros((problem.m, first.size))
    u[rows[0]], u[rows[1]] = first.ravel(), second.ravel()
    with np.errstate(all="ignore"):
        wide = problem.take(np.full(first.size, column, dtype=np.intp), first.size)
        return np.asarray(wide.value(u)).reshape(first.shape)


def _failure(axes: Axes, across: Array, along: Array, g: Array) -> None:
    """Shade where g < 0 and draw g = 0."""
    finite = g[np.isfinite(g)]
    if not finite.size:
        return
    low, high = float(finite.min()), float(finite.max())
    masked = np.ma.masked_invalid(g)
    if low < 0.0:
        axes.contourf(across, along, masked, levels=[low, min(0.0, high)], colors=[_SHADE], zorder=0)
    if low < 0.0 < high:
        axes.contour(across, along, masked, levels=[0.0], colors=[style.BLUE], linewidths=1.4)
        axes.plot([], [], color=style.BLUE, linewidth=1.4, label="limit state g = 0")


def _circle(axes: Axes, radius: float) -> None:
    angle = np.linspace(0.0, 2.0 * np.pi, 241)
    axes.plot(
        radius * np.cos(angle), radius * np.sin(angle), color=style.GREY, linewidth=0.8, linestyle=_DASHED,
        label="circle of radius |β|",
    )  # fmt: skip
    axes.plot(0.0, 0.0, "+", color=style.INK, markersize=7.0, zorder=4)


def _way(axes: Axes, steps: Array, reach: float) -> None:
    """Draw the iteration; points that lie together share a number."""
    from matplotlib.patheffects import withStroke

    halo = [withStroke(linewidth=1.8, foreground="white")]
    axes.plot(
        *steps.T, color=style.OCHRE, linewidth=0.9, marker="o", markersize=2.8, zorder=3, label="iteration"
    )
    first = 0
    for k in range(1, len(steps) + 1):
        if k < len(steps) and np.max(np.abs(steps[k] - steps[first])) < 2.0 * _APART * reach:
            continue
        text = str(first) if first == k - 1 else f"{first}–{k - 1}"
        if np.max(np.abs(steps[first])) <= reach:
            axes.annotate(
                text,
                steps[first],
                (5, 4),
                textcoords="offset points",
                fontsize=6.5,
                zorder=6,
                path_effects=halo,
            )
        first = k


def _points(axes: Axes, analysis: Analysis, rows: tuple[int, ...]) -> None:
    several = analysis.further
    for k in range(int(several.count[0])):
        u, alpha = several.u[k, list(rows), 0], several.alpha[k, list(rows), 0]
        start, end = (float(u[0]), float(u[1])), (float(u[0] + alpha[0]), float(u[1] + alpha[1]))
        axes.annotate(
            "", xy=end, xytext=start, zorder=4,
            arrowprops={"arrowstyle": "-|>", "color": style.PLUM, "linewidth": 1.1, "shrinkA": 0, "shrinkB": 0},
        )  # fmt: skip
        size, face = (9.0, style.PLUM) if k == 0 else (8.0, "white")
        axes.plot(*u, "*", color=style.PLUM, markerfacecolor=face, markersize=size, zorder=5)
    _legend(axes)


def _further(analysis: Analysis) -> str:
    return ", open ones the further design points" if analysis.further.count[0] > 1 else ""


def _legend(axes: Axes, above: float = 0.0) -> None:
    """Put the legend beside the picture, ``above`` mm below its top."""
    axes.legend(
        loc="upper left", bbox_to_anchor=(_BESIDE, 1.0 - above / _SIDE), borderaxespad=0.0, handlelength=2.2,
        labelspacing=0.6,
    )  # fmt: skip


def _axis_names(axes: Axes, found: OneSituation, rows: tuple[int, ...]) -> None:
    names = [found.variables[i].name for i in rows]
    texts = [
        f"$u_{i + 1}$" if found.dependent else f"$u$ of {symbols.drawn(n)}"
        for i, n in zip(rows, names, strict=True)
    ]
    axes.set_xlabel(texts[0], parse_math=True)
    axes.set_ylabel(texts[1], parse_math=True)


def _caption(axes: Axes, sentences: list[str], above: float = 0.0) -> None:
    """Write the caption below the legend, one paragraph for each sentence."""
    entries = len(axes.get_legend_handles_labels()[1])
    lines = [line for s in sentences if s for line in (*textwrap.wrap(s, 38), "")]
    axes.text(
        _BESIDE, 1.0 - (above + _ENTRY * entries + 4.0) / _SIDE, "\n".join(lines), transform=axes.transAxes, va="top",
        fontsize=6.8, linespacing=1.35,
    )  # fmt: skip
