"""What stations show whose block maxima share one shape, and what is said of a shape that was given."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from calibrate.actions.maxima import CONFIDENCE
from calibrate.report import numbers
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.study.fits import FittedVariable
    from calibrate.study.pooled import PooledStations


def station_table(stations: PooledStations) -> Table:
    """Return size, own shape and its standard error of every station."""
    found = [stations.found.separate[name] for name in stations.records]
    columns = [
        Column("station", list(stations.records)),
        Column("n", [f.n for f in found], kind="number"),
        Column("own shape", [f.parameters.get("shape") for f in found], each(numbers.fixed, 3), "number"),
        Column(
            "standard error",
            [f.standard_errors.get("shape") for f in found],
            each(numbers.fixed, 3),
            "number",
        ),
    ]
    if not all(f.converged for f in found):
        columns.append(Column("", ["" if f.converged else f"no own fit: {f.reason}" for f in found]))
    return Table(tuple(columns))


def shape_sentence(fitted: FittedVariable) -> str:
    """Return where the shape of a variable comes from, if not from its own records; else an empty text."""
    if fitted.stations is not None:
        return _pooled_sentence(fitted.stations)
    if fitted.fit.family == "gev" and "shape" in fitted.fit.fixed:
        shape = numbers.significant(fitted.fit.fixed["shape"])
        return f"The shape, {shape}, was given and not estimated; standard errors and intervals take it as known."
    return ""


def _pooled_sentence(stations: PooledStations) -> str:
    found, names = stations.found, stations.records
    low, high = (numbers.fixed(v, 3) if math.isfinite(v) else "not found" for v in found.interval)
    error = numbers.fixed(found.standard_error, 3) if math.isfinite(found.standard_error) else ""
    text = (
        f"The shape is pooled over the block maxima of {', '.join(names[:-1])} and {names[-1]}, taken as independent "
        f"of each other: {numbers.fixed(found.shape, 3)}{f' ± {error}' if error else ''}, "
        f"{numbers.share(CONFIDENCE, 0)} interval {low} to {high} by profile likelihood. "
    )
    if math.isfinite(found.p_value):
        text += (
            "Likelihood-ratio test of one shape against separate ones: "
            f"p = {numbers.probability(found.p_value)}. "
        )
    else:
        text += "One shape could not be tested against separate ones. "
    return text + "Standard errors and intervals of the variable itself take the pooled shape as known."
