"""Design situations beyond the range in which components were tested."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Doubt
from calibrate.study.model import ComponentRecords, Study
from calibrate.units import DIMENSIONLESS, Dimension

ROUNDING = 1e-9
"""Relative distance from the end of the range that is rounding in the file, and not beyond."""


def beyond_tests(study: Study) -> tuple[Doubt, ...]:
    """Return a doubt for each input of component tests that the situations take beyond its tested range.

    An input and a column, axis or derived quantity of the situations are the same where they have the same name and
    dimension; so for a quantity. Tests whose model factor no rule uses are left out.
    """
    doubts: list[Doubt] = []
    for records in study.resistances.values():
        uses = {
            name
            for rule in study.rules.values()
            for name in rule.variables
            if study.variables[name].resistance == records.name
        }
        if uses:
            for name in records.tests.inputs:
                doubts += _of_input(study, records, name)
    return tuple(doubts)


def _of_input(study: Study, records: ComponentRecords, name: str) -> list[Doubt]:
    found = _in_situations(study, name)
    unit = records.input_units.get(name)
    if found is None or unit is None:
        return []
    values, dimension = found
    where = f"resistance.{records.name}"
    if dimension != unit.dimension:
        text = (
            f"'{name}' is an input of the tests ({unit.dimension.describe()}) and of the design situations "
            f"({dimension.describe()}). Whether the situations lie within the tested range cannot be told: state the "
            f"unit of the column in resistance.{records.name}.units, or rename one."
        )
        return [Doubt("beyond-tests-not-checked", text, where)]
    tested = records.tests.inputs[name]
    low, high = float(tested.min()), float(tested.max())
    x = np.broadcast_to(values / unit.factor, (study.situations.n,))
    margin = ROUNDING * max(abs(low), abs(high))
    beyond = (x < low - margin) | (x > high + margin)
    weight = study.situations.weight
    share = float(weight[beyond].sum() / weight.sum())
    if share == 0.0:
        return []
    shown = f" {unit.text}" if unit.text else ""
    taken = x[weight > 0.0]
    text = (
        f"{100.0 * share:.3g} % of the weight of the design situations lies beyond the tested range of '{name}': "
        f"tested from {low:.4g} to {high:.4g}{shown}, used from {taken.min():.4g} to {taken.max():.4g}{shown}. "
        "Outside, the model factor is an assumption. Restrict the situations, add tests, or give reasons."
    )
    return [Doubt("beyond-tests", text, where)]


def _in_situations(study: Study, name: str) -> tuple[NDArray[np.float64], Dimension] | None:
    """Return the values of a name in the situations, in SI units; None where it has none there."""
    if name in study.quantities:
        quantity = study.quantities[name]
        return np.array(quantity.value), quantity.unit.dimension
    situations = study.situations
    values = {**situations.columns, **situations.derived}.get(name)
    if values is None or np.asarray(values).dtype.kind != "f":
        return None
    unit = situations.units.get(name)
    return np.asarray(values, dtype=np.float64), DIMENSIONLESS if unit is None else unit.dimension
