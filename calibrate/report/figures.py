"""The figures of a result: reliability by axis and its distribution, change of size, sensitivity."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from calibrate.report import style, symbols
from calibrate.report.axis_figure import beta_by_axis, panel_axes
from calibrate.report.distribution_figure import beta_distribution
from calibrate.report.outcome import sensitivities, size_changes
from calibrate.report.required_figure import drawn_factors, required_factors
from calibrate.report.sensitivity_figure import sensitivity
from calibrate.report.size_figure import size_change
from calibrate.units import format_unit

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calibrate.report.style import Rendered
    from calibrate.study.result import Result


def figures(result: Result) -> dict[str, Rendered]:
    """Return the figures of a result by name, in the order of the report.

    ``beta_by_<axis>`` for every axis that varies (``beta_by_rule`` where none
    does), ``beta_distribution``, ``required_factors`` where a factor is free, ``size_change`` where a rule has a size,
    ``sensitivity`` where a beta was found, ``probability_<variable>`` for every
    fitted variable.
    """
    drawn: dict[str, Rendered] = {}
    with style.context():
        for name, figure in _all(result):
            drawn[name] = style.render(figure)
    return drawn


def _all(result: Result) -> Iterator[tuple[str, Figure]]:
    for axis in panel_axes(result):
        yield f"beta_by_{axis}", beta_by_axis(result, axis)
    yield "beta_distribution", beta_distribution(result)
    if names := drawn_factors(result):
        yield "required_factors", required_factors(result, names)
    if changes := size_changes(result):
        yield "size_change", size_change(changes)
    if found := sensitivities(result):
        yield "sensitivity", sensitivity(result, found)
    yield from _probability(result)


def _probability(result: Result) -> Iterator[tuple[str, Figure]]:
    from calibrate.report.probability_paper import probability_figure

    for name, variable in result.variables.items():
        if variable.comparison is None:
            continue
        chosen = next(
            f for f in variable.comparison.candidates if f.family == variable.comparison.recommended
        )
        record = result.study.records[result.study.variables[name].records or ""]
        unit = format_unit(record.unit.text) if record.unit.text else ""
        yield f"probability_{name}", probability_figure(chosen, label=symbols.drawn(name), unit=unit)
