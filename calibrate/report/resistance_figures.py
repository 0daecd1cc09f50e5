"""Component tests as figures: measured against predicted, the error against each input, on paper, and by cluster."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import distribution
from calibrate.records.observations import Observations
from calibrate.report import numbers, style, symbols
from calibrate.report.probability_paper import paper_figure
from calibrate.resistance import CensoredModelFactor
from calibrate.units import format_unit

if TYPE_CHECKING:
    from collections.abc import Callable

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.study.component_tests import ResistanceResult

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

MOST_COVARIATES = 4
MOST_POINTS = 3000
MOST_CLUSTERS = 12
"""Clusters whose names have room below the axis."""
MOST_SUBGROUPS = 5
LOG_FROM = 30.0
"""Ratio of the largest to the smallest prediction from which the axes are logarithmic."""
_WIDTH, _HEIGHT = 84.0, 66.0
# Ochre triangles that point up are survivors; subgroups have other marks and colours.
_SUBGROUPS = (
    (style.BLUE, "o"),
    (style.PLUM, "s"),
    (style.TEAL, "D"),
    (style.INK, "v"),
    (style.SKY, "P"),
)


def resistance_figures(results: Mapping[str, ResistanceResult]) -> Iterator[tuple[str, Callable[[], Figure]]]:
    """Yield the name of each figure and what makes it."""
    named = covariate_figures(results)
    for name, found in results.items():
        yield f"tests_{name}", partial(tests_figure, found)
        yield f"errors_{name}", partial(errors_figure, found)
        for (owner, covariate), figure in named.items():
            if owner == name:
                yield figure, partial(error_figure, found, covariate)
        if found.clusters is not None:
            yield f"clusters_{name}", partial(clusters_figure, found)


def covariate_figures(results: Mapping[str, ResistanceResult]) -> dict[tuple[str, str], str]:
    """Return the figure names of the error against each covariate, by resistance and covariate.

    Columns may have any name; a figure is also the name of a file.
    """
    named: dict[tuple[str, str], str] = {}
    for name, found in results.items():
        for covariate in shown_covariates(found):
            word = re.sub(r"[^A-Za-z0-9_]+", "_", covariate)
            base = f"error_{name}_{word}"
            taken, count = set(named.values()), 1
            while (figure := base if count == 1 else f"{base}_{count}") in taken:
                count += 1
            named[name, covariate] = figure
    return named


def shown_covariates(found: ResistanceResult) -> list[str]:
    """Return the covariates that are drawn, in their order: those with a trend before the others."""
    trends = found.trends
    ranked = sorted(range(len(trends.names)), key=lambda j: (not trends.flagged[j], j))[:MOST_COVARIATES]
    return [trends.names[j] for j in sorted(ranked)]


def tests_figure(found: ResistanceResult) -> Figure:
    """Return measured against predicted resistance with the line b; use it inside ``style.context()``."""
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 15.0, 10.5, _WIDTH - 18.0, _HEIGHT - 15.5)
    tests, unit = found.records.tests, format_unit(found.records.unit.text)
    x, y = tests.predicted, tests.experimental
    log = float(x.max() / x.min()) > LOG_FROM
    low = 0.8 * float(min(x.min(), y.min())) if log else 0.0
    ends = np.array([low, 1.06 * float(x.max())])
    if log:
        axes.set_xscale("log")
        axes.set_yscale("log")
    axes.plot(ends, ends, color=style.GREY, linewidth=0.8, linestyle=(0, (4, 2)), label="1 : 1")
    axes.plot(ends, found.annex.b * ends, color=style.BLUE, label=f"b = {numbers.fixed(found.annex.b, 3)}")
    shown = _shown(tests.n)
    groups = tests.subgroups if 1 < len(tests.subgroups) <= MOST_SUBGROUPS else ()
    if not groups:
        _points(axes, x, y, shown & ~tests.survived)
    for label, (colour, mark) in zip(groups, _SUBGROUPS, strict=False):
        chosen = tests.in_subgroup(label)
        _points(axes, x, y, shown & chosen & ~tests.survived, colour, mark, _short(str(label)))
        if found.subsets is not None and label in found.subsets.subsets:
            axes.plot(ends, found.subsets.subsets[label].b * ends, color=colour, linewidth=0.7, zorder=2)
    _survivors(axes, x, y, shown & tests.survived)
    axes.set_xlim(*ends)
    axes.set_ylim(low, 1.06 * float(max(y.max(), x.max() * min(1.0, found.annex.b))))
    axes.set_xlabel(_with_unit("predicted", unit))
    axes.set_ylabel(_with_unit("measured", unit))
    axes.set_title(_count(found))
    axes.grid(visible=True)
    axes.legend(loc="upper left", handlelength=1.8)
    return figure


def error_figure(found: ResistanceResult, covariate: str) -> Figure:
    """Return the error against the prediction or an input, with the line where there is a trend."""
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 15.0, 10.5, _WIDTH - 18.0, _HEIGHT - 15.5)
    tests, trends = found.records.tests, found.trends
    j = trends.names.index(covariate)
    x, delta = tests.inputs.get(covariate, tests.predicted), tests.ratio / found.annex.b
    if covariate == trends.names[0]:
        x = tests.predicted
    log = bool(np.all(x > 0.0))
    if log:
        axes.set_xscale("log")
    _log_errors(axes, delta)
    shown = _shown(tests.n)
    axes.axhline(1.0, color=style.GREY, linewidth=0.7, zorder=1)
    _points(axes, x, delta, shown & ~tests.survived)
    _survivors(axes, x, delta, shown & tests.survived)
    power = float(trends.slope[j])
    p = f"p {_p_value(float(trends.adjusted_p[j]))}"
    if trends.flagged[j] and math.isfinite(power) and log:
        along = np.geomspace(float(x.min()), float(x.max()), 2)
        line = np.exp(trends.intercept[j] + power * np.log(along)) / found.annex.b
        axes.plot(along, line, color=style.BLUE, linewidth=1.2, zorder=4)
        axes.set_title(f"trend: power {numbers.fixed(power, 2)}, {p}")
    elif trends.flagged[j]:
        axes.set_title(f"trend: Spearman {numbers.fixed(float(trends.spearman[j]), 2)}, {p}")
    else:
        axes.set_title(f"no trend found, {p}" if math.isfinite(trends.adjusted_p[j]) else "not tested")
    if log:
        _few_ticks(axes.xaxis, float(x.min()), float(x.max()))
    stated = found.records.units.get(covariate)
    unit = found.records.unit.text if covariate == trends.names[0] else stated.text if stated else ""
    name = "predicted" if covariate == trends.names[0] else drawn_column(covariate)
    axes.set_xlabel(_with_unit(name, format_unit(unit) if unit else ""), parse_math=True)
    axes.grid(visible=True, axis="y")
    axes.margins(x=0.04)
    return figure


def errors_figure(found: ResistanceResult) -> Figure:
    """Return ln delta on normal paper, with the normal distribution of D.8."""
    model, annex = found.annex.model, found.annex
    tests = found.records.tests
    if isinstance(model, CensoredModelFactor):
        y = np.log(tests.ratio / annex.b)
        seen = Observations(y, np.where(tests.survived, np.inf, y))
        line = distribution("normal", mean=model.log_mean - math.log(annex.b), sd=annex.q_delta)
        title = _count(found)
    else:
        seen = Observations.of(model.log_delta)
        line = distribution("normal", mean=model.log_mean, sd=math.sqrt(model.log_variance))
        title = f"n = {model.n}"
        if (gone := tests.n - model.n) > 0:
            title += f", {gone} stopped left out"
    return paper_figure(line, seen, label=r"$\mathrm{ln}\,\delta$", unit="", title=title)


def clusters_figure(found: ResistanceResult) -> Figure:
    """Return the error by cluster, with the mean of each."""
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 15.0, 10.5, _WIDTH - 18.0, _HEIGHT - 15.5)
    tests = found.records.tests
    assert tests.cluster is not None
    assert found.clusters is not None
    delta = tests.ratio / found.annex.b
    names = list(dict.fromkeys(tests.cluster.tolist()))
    place = np.empty(tests.n)
    _log_errors(axes, delta)
    axes.axhline(1.0, color=style.GREY, linewidth=0.7, zorder=1)
    for k, name in enumerate(names):
        rows = np.flatnonzero(np.array([c == name for c in tests.cluster.tolist()]))
        place[rows] = k + (np.linspace(-0.3, 0.3, rows.size) if rows.size > 1 else 0.0)
        failed = rows[~tests.survived[rows]]
        if failed.size:
            mean = math.exp(float(np.mean(np.log(delta[failed]))))
            axes.plot([k - 0.4, k + 0.4], [mean, mean], color=style.BLUE, linewidth=1.4, zorder=4)
    shown = _shown(tests.n)
    _points(axes, place, delta, shown & ~tests.survived)
    _survivors(axes, place, delta, shown & tests.survived)
    if len(names) <= MOST_CLUSTERS:
        room = 6 if len(names) > 8 else 9
        axes.set_xticks(range(len(names)), [_short(str(c), room) for c in names])
        axes.set_xlabel("cluster")
    else:
        axes.set_xticks([])
        axes.set_xlabel(f"{len(names)} clusters, in the order of the file")
    axes.set_xlim(-0.7, len(names) - 0.3)
    between = found.clusters.share_between
    axes.set_title(
        f"between clusters: {numbers.share(between, 0)} of the variance"
        if math.isfinite(between)
        else _count(found)
    )
    axes.grid(visible=True, axis="y")
    return figure


def drawn_column(name: str) -> str:
    """Return the name of a column for a figure: typeset where it is a name of a formula."""
    return symbols.drawn(name) if re.fullmatch(r"[A-Za-z]\w*", name, re.ASCII) else symbols.literal(name)


def _count(found: ResistanceResult) -> str:
    tests = found.records.tests
    stopped = tests.n - tests.n_failed
    return f"n = {tests.n}" + (f", {stopped} stopped before failure" if stopped else "")


def _with_unit(label: str, unit: str) -> str:
    return f"{label} ({unit})" if unit else label


def _short(text: str, room: int = 16) -> str:
    return text if len(text) <= room else text[: room - 1] + "…"


def _shown(n: int) -> Flags:
    """Return which tests are drawn: all, or every so many of very many."""
    return np.asarray(np.arange(n) % max(1, -(-n // MOST_POINTS)) == 0)


def _size(n: int) -> float:
    return 3.4 if n <= 80 else 2.4 if n <= 400 else 1.3


def _points(
    axes: Axes, x: Array, y: Array, chosen: Flags, colour: str = style.INK, mark: str = "o", label: str = ""
) -> None:
    axes.plot(
        x[chosen], y[chosen], linestyle="none", marker=mark, markersize=_size(x.size), markerfacecolor="white",
        markeredgecolor=colour, markeredgewidth=0.7, zorder=3, label=label or None,
    )  # fmt: skip


def _survivors(axes: Axes, x: Array, y: Array, chosen: Flags) -> None:
    if chosen.any():
        axes.plot(
            x[chosen], y[chosen], linestyle="none", marker="^", markersize=_size(x.size) + 0.4,
            markerfacecolor=style.OCHRE, markeredgecolor=style.OCHRE, markeredgewidth=0.7, zorder=3,
            label="stopped before failure",
        )  # fmt: skip


def _p_value(p: float) -> str:
    return "< 0.001" if p < 0.001 else f"= {numbers.fixed(p, 3)}"


def _log_errors(axes: Axes, delta: Array) -> None:
    axes.set_yscale("log")
    low, high = float(delta.min()), float(delta.max())
    room = (high / low) ** 0.08
    axes.set_ylim(min(low, 1.0) / room, max(high, 1.0) * room)
    axes.set_ylabel(r"error $\delta$", parse_math=True)
    _few_ticks(axes.yaxis, low, high, fine=True)


def _few_ticks(axis: Any, low: float, high: float, *, fine: bool = False) -> None:
    """Rule a logarithmic axis at a few round numbers, written in full."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, Locator, LogLocator, MaxNLocator, NullLocator

    if high / low > 50.0:
        locator: Locator = LogLocator(numticks=6)
    elif high / low < 2.5:
        locator = MaxNLocator(5)
    else:
        first = math.floor(math.log10(low)) - 1
        decades = [10.0 ** (first + k) for k in range(6)]
        steps: tuple[float, ...] = (1.0, 1.5, 2.0, 3.0, 5.0, 7.0)
        if high / low > 6.0:
            steps = (1.0, 2.0, 5.0)
        elif fine:
            steps = (1.0, 1.25, 1.5, 2.0, 2.5, 3.0, 4.0, 6.0, 8.0)
        locator = FixedLocator([d * s for d in decades for s in steps])
    axis.set_major_locator(locator)
    axis.set_minor_locator(NullLocator())
    axis.set_major_formatter(FuncFormatter(lambda v, _: numbers.significant(v, 3)))
