"""The figures of a result: reliability by axis and its distribution, change of size, sensitivity."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import partial
from typing import TYPE_CHECKING

import numpy as np

from calibrate.engine import run_tasks
from calibrate.report import numbers, style, symbols
from calibrate.report.axis_figure import beta_by_axis, panel_axes
from calibrate.report.distribution_figure import beta_distribution
from calibrate.report.outcome import size_changes
from calibrate.report.required_figure import drawn_factors, required_factors
from calibrate.report.resistance_figures import resistance_figures
from calibrate.report.sensitivities import sensitivities
from calibrate.report.sensitivity_figure import sensitivity
from calibrate.report.size_figure import size_change
from calibrate.report.verification_figure import verification_figure
from calibrate.units import format_unit

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.records import Sample
    from calibrate.report.style import Rendered
    from calibrate.study.maxima import BlockMaxima
    from calibrate.study.result import Result


MATTERS = 0.05
"""Weighted mean of alpha squared below which the tail of a variable is not drawn."""


def figures(result: Result, meanwhile: Callable[[], None] | None = None) -> dict[str, Rendered]:
    """Return the figures of a result by name, in the order of the report.

    ``meanwhile`` is done in this process while another one draws its share.


    ``beta_by_<axis>`` for every axis that varies (``beta_by_rule`` where none does), ``beta_distribution``,
    ``verification_<set of factors>``, ``required_factors`` where a factor is free, ``size_change`` where a rule has a
    size, ``sensitivity`` where a beta was found, ``sample_<records>`` for samples that need a look,
    ``probability_<variable>`` for every fitted variable, ``tail_<variable>`` for those that matter,
    ``return_levels_<variable>`` for block maxima, ``threshold_<variable>`` and ``return_levels_<variable>`` for
    exceedances; of component tests ``tests_<resistance>``, ``errors_<resistance>``, ``error_<resistance>_<covariate>``
    and ``clusters_<resistance>``.
    """
    with style.context():
        makers = dict(_all(result))
        tasks: list[Callable[[], Rendered | None]] = [partial(_drawn, make) for make in makers.values()]
        # The first task stays in this process.
        _, *drawn = run_tasks([meanwhile or _nothing, *tasks])
        return {name: figure for name, figure in zip(makers, drawn, strict=True) if figure is not None}


Maker = Callable[[], "Figure"]


def _nothing() -> None:
    pass


def _drawn(make: Maker) -> Rendered:
    return style.render(make())


def _all(result: Result) -> Iterator[tuple[str, Maker]]:
    """Yield what makes each figure; a figure is made where it is drawn, and only there."""
    for axis in panel_axes(result):
        yield f"beta_by_{axis}", partial(beta_by_axis, result, axis)
    yield "beta_distribution", partial(beta_distribution, result)
    for kind in result.verifications:
        yield f"verification_{kind}", partial(verification_figure, result, kind)
    if names := drawn_factors(result):
        yield "required_factors", partial(required_factors, result, names)
    if changes := size_changes(result):
        yield "size_change", partial(size_change, changes)
    if found := sensitivities(result):
        yield "sensitivity", partial(sensitivity, result, found)
    yield from _probability(result)
    yield from _exceedances(result)
    yield from resistance_figures(result.resistances)


def _probability(result: Result) -> Iterator[tuple[str, Maker]]:
    from calibrate.report.probability_paper import probability_figure
    from calibrate.report.sample_figure import sample_figure
    from calibrate.report.tail_figure import tail_figure

    for name in drawn_samples(result):
        sample, screening = result.study.records[name], result.screenings[name]
        label = symbols.literal(name.replace("_", " "))
        yield f"sample_{name}", partial(sample_figure, sample, screening, label=label, unit=_unit(sample))
    for name, fitted in result.fitted.items():
        record = result.study.records[result.study.variables[name].records or ""]
        label, unit = symbols.drawn(name), _unit(record)
        chosen = [fitted.fit, *(c for c in fitted.comparison.candidates if c.family in fitted.tests)]
        shown = list(dict.fromkeys(chosen))
        yield f"probability_{name}", partial(probability_figure, fitted.fit, label=label, unit=unit)
        if fitted.maxima is not None:
            yield f"return_levels_{name}", partial(_return_levels, fitted.maxima, label=label, unit=unit)
        side = tail_of(result, name)
        if side is not None and matters(result, name):
            yield (
                f"tail_{name}",
                partial(
                    tail_figure,
                    shown,
                    lower=side == "lower",
                    label=label,
                    unit=unit,
                    design=_design_range(result, name),
                ),
            )


def _return_levels(found: BlockMaxima, *, label: str, unit: str) -> Figure:
    from calibrate.report.return_figure import return_figure

    maxima = found.maxima
    title = f"{maxima.fit.family}, {maxima.blocks} blocks"
    return return_figure(found.levels, found.empirical, maxima.years, title=title, label=label, unit=unit)


def _exceedances(result: Result) -> Iterator[tuple[str, Maker]]:
    from calibrate.report.return_figure import return_figure
    from calibrate.report.threshold_figure import threshold_figure

    for name, found in result.exceedances.items():
        record = result.study.records[result.study.variables[name].records or ""]
        label, unit = symbols.drawn(name), _unit(record)
        yield f"threshold_{name}", partial(threshold_figure, found, label=label, unit=unit)
        if not found.levels.years.size:
            continue
        title = f"{found.family}, {numbers.count(found.n, 'event')}"
        drawn = partial(return_figure, found.levels, found.empirical, found.fit.years)
        yield f"return_levels_{name}", partial(drawn, title=title, label=label, unit=unit)


def drawn_samples(result: Result) -> list[str]:
    """Return the records worth a look at single specimens: with lots, bounds, something left out, or findings.

    Component tests by cluster have a figure of their own.
    """
    clustered = {n for n, r in result.resistances.items() if r.records.tests.cluster is not None}
    return [
        name
        for name, screening in result.screenings.items()
        if name not in clustered
        if screening.findings
        or result.study.records[name].excluded
        or "lot" in result.study.records[name].labels
        or not result.study.records[name].observations.complete
    ]


def matters(result: Result, name: str) -> bool:
    """Whether a variable takes a share of the reliability that makes its tail worth a figure."""
    frame = result.situations
    if f"alpha_{name}" not in frame:
        return False
    alpha, weight = frame[f"alpha_{name}"].to_numpy(float), frame["weight"].to_numpy(float)
    there = np.isfinite(alpha) & (weight > 0)
    return bool(there.any() and np.average(alpha[there] ** 2, weights=weight[there]) > MATTERS)


def _unit(sample: Sample) -> str:
    return format_unit(sample.unit.text) if sample.unit.text else ""


def tail_of(result: Result, name: str) -> str | None:
    """Return the tail of a variable that decides: by its role, else by the sign of its sensitivity factors."""
    if result.study.variables[name].tail:
        return result.study.variables[name].tail
    role = result.study.variables[name].role
    if role in ("resistance", "action"):
        return "lower" if role == "resistance" else "upper"
    alpha = (
        result.situations[f"alpha_{name}"].to_numpy(float) if f"alpha_{name}" in result.situations else None
    )
    if alpha is None or not np.isfinite(alpha).any():
        return None
    return "lower" if np.nansum(alpha) >= 0.0 else "upper"


def _design_range(result: Result, name: str) -> tuple[float, float] | None:
    """Return the smallest and largest distance |u| of the design points of a variable, over situations with weight."""
    frame = result.situations
    alpha, beta = frame[f"alpha_{name}"].to_numpy(float), frame["beta_proposed"].to_numpy(float)
    found = np.abs(alpha * beta)[np.isfinite(alpha) & (frame["weight"].to_numpy(float) > 0)]
    return (float(found.min()), float(found.max())) if found.size else None
