"""A table of component tests: measured capacity, prediction, inputs and labels of each test, read and checked."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import dimension_of, parse
from calibrate.records import (
    Exclude,
    Observations,
    ReadOptions,
    Sample,
    TextForm,
    UnitBy,
    read_column,
    read_value,
)
from calibrate.resistance import ComponentTests
from calibrate.study.model import ComponentRecords, MeanValueQuestion, NorthAmericanQuestion
from calibrate.units import ONE, Dimension, Unit

Array = NDArray[np.float64]

_SHOWN = 5
"""Rows with one slip that are told before the rest is counted."""


@dataclass(frozen=True, slots=True)
class TestTable:
    """Which columns of a file are component tests, and how they are to be read.

    Parameters
    ----------
    name : str
        Of the tests.
    file : str
        As the user named it.
    measured, prediction : str
        Column of the measured capacity; column or expression in columns that predicts it.
    unit : Unit
        Of both.
    units : mapping of str to Unit
        Of the columns of the prediction and of ``inputs``; a column that is not named is dimensionless.
    inputs : sequence of str
        Columns against which the error is tested for trends; by default those of the prediction.
    nominal : sequence of str
        Columns that hold nominal values: a prediction must not use them.
    survived : str, optional
        Column that flags tests that did not fail.
    subgroup, cluster, specimen : str, optional
        Columns of labels.
    unit_by : UnitBy, optional
        Rows whose measured capacity is in another unit.
    covs, known_scatter : mapping of str to float
        Coefficients of variation: of the basic variables of the prediction, and of what else is in the tests.
    """

    __test__ = False

    name: str
    file: str
    measured: str
    prediction: str
    unit: Unit = ONE
    units: Mapping[str, Unit] = field(default_factory=dict)
    inputs: tuple[str, ...] = ()
    nominal: tuple[str, ...] = ()
    survived: str | None = None
    subgroup: str | None = None
    cluster: str | None = None
    specimen: str | None = None
    sheet: str | None = None
    form: TextForm = field(default_factory=TextForm)
    exclude: tuple[Exclude, ...] = ()
    unit_by: UnitBy | None = None
    covs: Mapping[str, float] = field(default_factory=dict)
    known_scatter: Mapping[str, float] = field(default_factory=dict)


class Slip(NamedTuple):
    """A problem of what was asked, and the key or option at which it stands."""

    key: str
    problem: Problem


class ReadTests(NamedTuple):
    """Measured over predicted as a sample, the tests, and the unit of each input.

    ``gradient`` is (dr/dx_i) sd_i/r of each basic variable with a cov, at the means of its column; one that is no
    column of the prediction counts as a factor of it. Empty where the prediction has none of them.
    """

    ratio: Sample
    tests: ComponentTests
    input_units: dict[str, Unit]
    gradient: dict[str, float]


def slips(asked: TestTable) -> list[Slip]:
    """Return what is wrong with a question before the file is opened."""
    found = []
    for key in ("covs", "known_scatter"):
        for name, cov in getattr(asked, key).items():
            if not (np.isfinite(cov) and cov >= 0.0):
                text = f"gives '{name}' the coefficient of variation {cov:g}; it must be a number from 0 on."
                found.append(Slip(key, Problem(text)))
    try:
        expression = parse(asked.prediction)
    except InputError as error:
        return [*found, *(Slip("prediction", p) for p in error.problems)]
    names = expression.names
    if asked.measured in names:
        text = f"uses '{asked.measured}', the measured capacity itself."
        found.append(
            Slip("prediction", Problem(text, suggestion="Predict it from the properties of the specimen."))
        )
    for name in names:
        if name in asked.nominal:
            text = (
                f"uses '{name}', a column of nominal values: the model factor would contain the scatter of that "
                "property, and the limit state adds it again."
            )
            found.append(
                Slip(
                    "prediction", Problem(text, suggestion="Predict every test from its measured properties.")
                )
            )
    used = (*names, *asked.inputs)
    for column in asked.units:
        if column not in used:
            text = f"states a unit for the column '{column}', which neither the prediction nor an input uses."
            found.append(Slip("units", Problem(text, suggestion=did_you_mean(column, used))))
    try:
        dimension = dimension_of(expression, {n: asked.units.get(n, ONE).dimension for n in names})
    except InputError as error:
        return [*found, *(Slip("prediction", p) for p in error.problems)]
    if not dimension.agrees(asked.unit.dimension):
        found.append(Slip("prediction", _other_dimension(asked, dimension, names)))
    return found


def _other_dimension(asked: TestTable, dimension: Dimension, names: tuple[str, ...]) -> Problem:
    unit = f" in {asked.unit.text}" if asked.unit.text else ""
    text = (
        f"'{asked.prediction}' is {dimension.describe()}, but the measured capacity '{asked.measured}'{unit} is "
        f"{asked.unit.dimension.describe()}."
    )
    bare = [n for n in names if n not in asked.units]
    hint = "Correct the expression, the unit of the capacity or the units of the columns."
    if bare:
        hint = f"No unit is stated for {', '.join(bare)}. {hint}"
    return Problem(text, suggestion=hint)


def read_tests(path: Path, asked: TestTable) -> ReadTests:
    """Read the tests.

    Raises
    ------
    InputError
        What `slips` finds; the file cannot be read; a column is unknown; a cell is empty, no number or no flag; a
        capacity or a prediction is not above zero; a capacity is known by an upper bound or an interval; fewer than
        four tests. Each problem of a cell carries file and row.
    """
    if wrong := slips(asked):
        raise InputError([s.problem for s in wrong])
    names = parse(asked.prediction).names
    plain = ReadOptions(form=asked.form, exclude=asked.exclude)
    # The reader refuses a laboratory without a name, which it lets pass for a failure mode; a subgroup needs one.
    options = dataclasses.replace(
        plain,
        censoring=True,
        censored=asked.survived,
        lot=asked.cluster,
        laboratory=asked.subgroup,
        specimen=asked.specimen,
        unit_by=asked.unit_by,
    )
    measured = read_column(
        path, asked.measured, unit=asked.unit, display=asked.file, sheet=asked.sheet, options=options
    )
    predicted = read_value(
        path,
        asked.prediction,
        name="prediction",
        unit=asked.unit,
        display=asked.file,
        sheet=asked.sheet,
        options=dataclasses.replace(plain, units={n: u for n, u in asked.units.items() if n in names}),
    )
    inputs = {
        column: read_column(
            path,
            column,
            unit=asked.units.get(column, ONE),
            display=asked.file,
            sheet=asked.sheet,
            options=plain,
        )
        for column in dict.fromkeys(asked.inputs or names)
    }
    _check_capacities(asked, measured, predicted)
    try:
        tests = ComponentTests(
            measured.observations.lower,
            predicted.values,
            measured.observations.right,
            {column: sample.values for column, sample in inputs.items()},
            measured.labels.get("laboratory"),
            measured.labels.get("lot"),
            measured.rows,
        )
    except InputError as error:
        raise InputError(
            [dataclasses.replace(p, file=p.file or asked.file) for p in error.problems]
        ) from None
    ratio = _ratio(asked, measured, predicted.values)
    units = {c: s.unit for c, s in inputs.items()}
    return ReadTests(ratio, tests, units, _gradient(path, asked, plain))


def _gradient(path: Path, asked: TestTable, options: ReadOptions) -> dict[str, float]:
    expression = parse(asked.prediction)
    moving = tuple(name for name in asked.covs if name in expression.names)
    if not moving:
        return {}
    means = {
        name: float(np.mean(sample.si_values))
        for name in expression.names
        for sample in (
            read_column(
                path,
                name,
                unit=asked.units.get(name, ONE),
                display=asked.file,
                sheet=asked.sheet,
                options=options,
            ),
        )
    }
    whole, slopes = expression.gradient(means, moving)
    share = {n: float(s) * means[n] / float(whole) for n, s in zip(moving, slopes, strict=True)}
    return {name: share.get(name, 1.0) * cov for name, cov in asked.covs.items()}


def component_records(
    path: Path,
    asked: TestTable,
    *,
    survivors: str = "censored",
    subsets: str = "pooled",
    nominal_ratio: float | None = None,
    table_factors: bool = False,
    trend_level: float = 0.05,
    split_at: Mapping[str, float] | None = None,
    north_american: NorthAmericanQuestion | None = None,
    mean_value: MeanValueQuestion | None = None,
    description: str = "",
    line: int | None = None,
    tail_share: float | None = None,
    second_layer: str | None = None,
) -> ComponentRecords:
    """Read the tests, and say how they are to be evaluated (as in ``ComponentRecords``).

    Raises
    ------
    InputError
        As `read_tests`.
    """
    found = read_tests(path, asked)
    return ComponentRecords(
        name=asked.name,
        file=asked.file,
        measured=asked.measured,
        prediction=asked.prediction,
        unit=asked.unit,
        tests=found.tests,
        ratio=found.ratio,
        input_units=found.input_units,
        survivors=survivors,
        subsets=subsets,
        covs=dict(asked.covs),
        nominal_ratio=nominal_ratio,
        known_scatter=dict(asked.known_scatter),
        table_factors=table_factors,
        trend_level=trend_level,
        split_at=split_at or {},
        north_american=north_american,
        mean_value=mean_value,
        description=description,
        line=line,
        gradient=found.gradient,
        units=dict(asked.units),
        tail_share=tail_share,
        second_layer=second_layer,
    )


def _check_capacities(asked: TestTable, measured: Sample, predicted: Sample) -> None:
    seen = measured.observations
    unit = f" {asked.unit.text}" if asked.unit.text else ""
    problems: list[Problem] = []
    odd = ~(seen.exact | seen.right)
    problems += _rows(
        measured,
        odd,
        lambda i: (
            f"Column '{asked.measured}': the capacity is known to lie "
            + (
                f"below {seen.upper[i]:g}{unit}"
                if np.isinf(seen.lower[i])
                else f"in an interval above {seen.lower[i]:g}{unit}"
            )
            + "; a component test has a value, or a lower bound where it did not fail."
        ),
        "Give the value, or exclude the row with its reason.",
    )
    problems += _rows(
        measured,
        ~odd & ~(seen.lower > 0.0),
        lambda i: (
            f"Column '{asked.measured}': the measured capacity is {seen.lower[i]:g}{unit}; it must be above zero."
        ),
        "Correct the cell, or exclude the row with its reason.",
    )
    problems += _rows(
        predicted,
        ~(predicted.values > 0.0),
        lambda i: (
            f"The prediction '{asked.prediction}' is {predicted.values[i]:g}{unit}; it must be above zero."
        ),
        "Correct the inputs of this test, or exclude the row with its reason.",
    )
    if problems:
        raise InputError(sorted(problems, key=lambda p: p.line or 0))


def _rows(
    sample: Sample, wrong: NDArray[np.bool_], text: Callable[[int], str], suggestion: str
) -> list[Problem]:
    at = np.flatnonzero(wrong)
    problems = [Problem(text(int(i)), sample.file, int(sample.rows[i]), suggestion) for i in at[:_SHOWN]]
    if at.size > _SHOWN:
        rest = f"{at.size - _SHOWN} more rows have the same problem."
        problems.append(Problem(rest, sample.file, int(sample.rows[at[_SHOWN]])))
    return problems


def _ratio(asked: TestTable, measured: Sample, predicted: Array) -> Sample:
    """Return measured over predicted; its labels are those of the tests, but for the subgroup."""
    seen = Observations(measured.observations.lower / predicted, measured.observations.upper / predicted)
    values = seen.values if seen.censored else seen.lower
    values.flags.writeable = False
    return dataclasses.replace(
        measured,
        name=asked.name,
        values=values,
        unit=ONE,
        observations=seen,
        labels={k: v for k, v in measured.labels.items() if k != "laboratory"},
        formula=f"{asked.measured} / ({asked.prediction})",
    )
