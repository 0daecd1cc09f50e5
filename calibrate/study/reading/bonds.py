"""Quantities bound to a basic variable: characteristic values from its records, typed values that say what they are."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from calibrate.distributions import Distribution
from calibrate.engine import stream
from calibrate.errors import InputError, did_you_mean
from calibrate.expressions import constant_expression
from calibrate.fitting import compare, fit_family
from calibrate.fitting.characteristic import (
    CharacteristicValue,
    characteristic_value,
    characteristic_value_of_lots,
)
from calibrate.records import Observations, Sample
from calibrate.study.model import Quantity
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry
from calibrate.study.reading.schema import CharacteristicTable, StatedTable
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import Value, read_unit, read_value

VALUE_TYPES = ("mean", "nominal", "declared")


@dataclass(frozen=True, slots=True)
class Bond:
    """What a bound quantity is.

    Attributes
    ----------
    value : Value
    of : str
        Name of the variable.
    characteristic : CharacteristicValue or None
        In the unit of the records; None for a typed value.
    value_type : str
        As the study says, or as computed.
    bias : float or None
        Mean over value as typed.
    """

    value: Value
    of: str
    characteristic: CharacteristicValue | None = None
    value_type: str = ""
    bias: float | None = None


@dataclass(slots=True)
class Bonds:
    """The bound quantities by name, and the names of those that are faulty."""

    found: dict[str, Bond] = field(default_factory=dict)
    faulty: set[str] = field(default_factory=set)


def read_bonds(
    reading: Reading,
    quantities: Mapping[str, Any],
    variables: Mapping[str, Any],
    records: Mapping[str, Sample | None],
    seed: int,
) -> Bonds:
    """Read the quantities that are written as tables."""
    bonds = Bonds()
    for name, raw in quantities.items():
        if not isinstance(raw, dict):
            continue
        place = ("quantities", name)
        if "value" in raw:
            bond = _stated(reading, raw, variables, place)
        else:
            bond = _characteristic(
                reading, raw, variables, records, place, stream(seed, "characteristic", name)
            )
        if bond is None:
            bonds.faulty.add(name)
        else:
            bonds.found[name] = bond
    return bonds


def bound(quantities: Mapping[str, Quantity], bonds: Mapping[str, Bond]) -> dict[str, Quantity]:
    """Return the quantities with what they are bound to."""
    return {
        name: replace(
            quantity,
            characteristic=bond.characteristic,
            of=bond.of,
            value_type=bond.value_type,
            bias=bond.bias,
        )
        if (bond := bonds.get(name)) is not None
        else quantity
        for name, quantity in quantities.items()
    }


def fractile_of(value_type: str) -> float | None:
    """Return the fractile that a value type names, such as 0.05 for ``5 % fractile``; None for others."""
    number, _, rest = value_type.partition("%")
    if rest.strip() != "fractile":
        return None
    try:
        share = float(number) / 100.0
    except ValueError:
        return None
    return share if 0.0 < share < 1.0 else None


def _stated(reading: Reading, raw: Any, variables: Mapping[str, Any], place: Place) -> Bond | None:
    entry = read_entry(reading, StatedTable, raw, place)
    content = entry.content
    if content is None or entry.dropped or not _known(reading, content.of, variables, (*place, "of")):
        return None
    kind = " ".join(content.is_.split())
    if kind not in VALUE_TYPES and fractile_of(kind) is None:
        reading.problem(
            f"must be 'mean', 'nominal', 'declared' or a fractile such as '5 % fractile'; got '{kind}'.",
            (*place, "is"),
        )
        return None
    value = read_value(reading, content.value, (*place, "value"))
    return None if value is None else Bond(value, content.of, None, kind, content.bias)


def _characteristic(
    reading: Reading,
    raw: Any,
    variables: Mapping[str, Any],
    records: Mapping[str, Sample | None],
    place: Place,
    rng: np.random.Generator,
) -> Bond | None:
    entry = read_entry(reading, CharacteristicTable, raw, place)
    content = entry.content
    if content is None or entry.dropped:
        return None
    of = content.characteristic_of
    if not _known(reading, of, variables, (*place, "characteristic_of")):
        return None
    model = variables[of] if isinstance(variables[of], dict) else {}
    sample = records.get(str(model.get("records")))
    if sample is None:
        if "resistance" in model:
            reading.problem(
                f"names the variable '{of}', a model factor from component tests; their characteristic and design "
                "values are evaluated with the tests.",
                (*place, "characteristic_of"),
                'Take them from the results, and say what they are: { value = "…", of = "…", is = "5 % fractile" }.',
            )
        elif "records" not in model:
            reading.problem(
                f"names the variable '{of}', which has no records; a characteristic value comes from tests.",
                (*place, "characteristic_of"),
                'Give the value, and say what it is: { value = "…", of = "…", is = "5 % fractile" }.',
            )
        return None
    if "exceedances" in model:
        reading.problem(
            f"names the variable '{of}', which is a maximum from exceedances: fractiles of its records are none of it.",
            (*place, "characteristic_of"),
            'Give the value, and say what it is: { value = "…", of = "…", is = "98 % fractile" }.',
        )
        return None
    if "pooled_shape" in model or "shape" in model:
        reading.problem(
            f"names the variable '{of}', whose shape is given or pooled; a characteristic value would be computed with "
            "a shape of its own.",
            (*place, "characteristic_of"),
            'Give the value, and say what it is: { value = "…", of = "…", is = "98 % fractile" }.',
        )
        return None
    shown = read_unit(reading, content.unit, (*place, "unit")) if content.unit is not None else sample.unit
    if shown is None:
        return None
    if shown.dimension != sample.unit.dimension:
        reading.problem(
            f"'{shown.text}' is {shown.dimension.describe()}, but the records are {sample.unit.dimension.describe()}.",
            (*place, "unit"),
        )
        return None
    try:
        found = _computed(sample, content, model, rng)
    except InputError as error:
        reading.collect(error, place)
        return None
    for doubt in found.doubts:
        reading.doubt(doubt.code, doubt.message, reading.dotted(place))
    si = found.value * sample.unit.factor
    value = Value(found.statement, constant_expression(si), shown, si / shown.factor)
    kind = f"{100.0 * content.fractile:.6g} % fractile"
    return Bond(value, of, found, kind)


def _computed(
    sample: Sample, content: CharacteristicTable, model: Mapping[str, Any], rng: np.random.Generator
) -> CharacteristicValue:
    if content.route == "order_statistic":
        family = None
    else:
        family = content.family or _family(sample, model)
    if content.from_lots:
        if "lot" not in sample.labels:
            raise InputError("The records name no column of lots (key 'lot').")
        return characteristic_value_of_lots(
            sample.observations,
            sample.labels["lot"],
            family or "lognormal",
            content.fractile,
            0.75 if content.confidence is None else content.confidence,
            content.least_cov,
        )
    fixed = {
        k: float(v) for k, v in model.items() if k in ("threshold", "lower", "upper") and isinstance(v, float)
    }

    def refit(seen: Observations) -> Distribution | None:
        assert family is not None
        return fit_family(seen, family, fixed=fixed).distribution

    return characteristic_value(
        sample.observations,
        family,
        content.fractile,
        content.confidence,
        content.route,
        content.known_cov,
        content.least_cov,
        rng,
        refit,
    )


def _family(sample: Sample, model: Mapping[str, Any]) -> str:
    """Return the family of the variable; of several, the best supported one, as in the run itself."""
    named = model.get("family")
    if isinstance(named, str) and named != "best":
        return named
    names = None if named == "best" or not isinstance(named, list) else [str(n) for n in named]
    chosen = compare(sample.observations, names).recommended
    if chosen is None:
        raise InputError("No family can be fitted to the records.")
    return chosen


def _known(reading: Reading, name: str, variables: Mapping[str, Any], place: Place) -> bool:
    if name in variables:
        return True
    reading.problem(f"names '{name}', which is no basic variable.", place, did_you_mean(name, variables))
    return False
