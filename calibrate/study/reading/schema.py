"""Which keys each section of a study file may hold, and of what kind their values are.

Sections are checked one entry at a time, so that one wrong key does not hide
the faults of the rest.  What an entry *means* is checked by the modules beside
this one.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field
from pydantic_core import PydanticCustomError


def plain_value(raw: Any) -> float | str:
    """Return a finite number or a text that is not empty; PydanticCustomError for anything else."""
    if isinstance(raw, str):
        if not raw.strip():
            raise PydanticCustomError("calibrate_empty", "not empty")
        return raw
    if isinstance(raw, bool) or not isinstance(raw, (int, float)):
        raise PydanticCustomError("calibrate_value", "a value")
    try:
        number = float(raw)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise PydanticCustomError("finite_number", "finite")
    return number


def _text(raw: str) -> str:
    if not raw.strip():
        raise PydanticCustomError("calibrate_empty", "not empty")
    return raw.strip()


def _one_line(raw: str) -> str:
    if any(ord(c) < ord(" ") for c in raw):
        raise PydanticCustomError("calibrate_one_line", "one line")
    return raw


def _names(raw: Any) -> list[str]:
    names = [raw] if isinstance(raw, str) else raw
    if not isinstance(names, list) or not names or not all(isinstance(n, str) and n.strip() for n in names):
        raise PydanticCustomError("calibrate_names", "names")
    return [n.strip() for n in names]


def _families(raw: Any) -> list[str]:
    try:
        return _names(raw)
    except PydanticCustomError:
        raise PydanticCustomError("calibrate_families", "families") from None


def _exponent(raw: Any) -> float | str:
    if raw == "fit":
        return str(raw)
    if isinstance(raw, bool) or not isinstance(raw, (int, float)) or not math.isfinite(raw):
        raise PydanticCustomError("calibrate_exponent", "a number")
    return float(raw)


def _entry(raw: Any) -> str | float | bool:
    if not isinstance(raw, (str, bool, int, float)):
        raise PydanticCustomError("calibrate_entry", "an entry")
    return raw


def _value_or_range(raw: Any) -> list[float | str]:
    return [plain_value(v) for v in raw] if isinstance(raw, list) else [plain_value(raw)]


def as_list(raw: Any) -> Any:
    """Return a list as it is, anything else as a list of one."""
    return raw if isinstance(raw, list) else [raw]


Number = float
Positive = Annotated[float, Field(gt=0)]
Text = Annotated[str, AfterValidator(_text)]
Value = Annotated[float | str, BeforeValidator(plain_value)]
"""A number, a number with a unit, or an expression."""


class Section(BaseModel):
    """Base of all: no other keys, no text for numbers, no truth values for numbers, finite numbers only."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)


class StudySection(Section):
    """``[study]``."""

    title: Annotated[Text, AfterValidator(_one_line)]
    summary: str = ""
    reference_period: Positive
    other_periods: list[Positive] = []
    independence: Positive = 1.0
    seed: Annotated[int, Field(ge=0)] = 0


class TargetSection(Section):
    """``[target]``."""

    beta: Number
    period: Positive | None = None


class ExcludeTable(Section):
    """A row, or rows with one entry, that are left out for a reason."""

    reason: Text
    row: Annotated[int, Field(ge=1)] | None = None
    where: Text | None = None
    equals: Annotated[Any, BeforeValidator(_entry)] = None


class UnitByTable(Section):
    """Rows of another unit, by the entry of a column."""

    column: Text
    units: dict[str, str]


class CovariateTable(Section):
    """Reference conditions of one covariate."""

    reference: Value
    exponent: Annotated[Any, BeforeValidator(_exponent)]
    standard_error: Annotated[float, Field(ge=0)] = 0.0


class RecordsEntry(Section):
    """``[records.NAME]``; ``normalise`` is read covariate by covariate."""

    file: Text
    column: Text | None = None
    value: Text | None = None
    unit: str | None = None
    sheet: Text | None = None
    description: str = ""
    separator: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    censored: Text | None = None
    above: Value | None = None
    below: Value | None = None
    lot: Text | None = None
    laboratory: Text | None = None
    mode: Text | None = None
    specimen: Text | None = None
    order: Text | None = None
    time: Text | None = None
    time_unit: str | None = None
    exclude: list[ExcludeTable] = []
    units: dict[str, str] = {}
    measured: Text | None = None
    unit_by: UnitByTable | None = None
    normalise: dict[str, Any] = {}
    detection_limit: Value | None = None
    blocks: Annotated[int, Field(ge=1)] | None = None
    coverage: Text | None = None
    declared: Annotated[list[Any] | None, BeforeValidator(_value_or_range)] = None


class PartTable(Section):
    """Mean and coefficient of variation of a part of a product of factors."""

    mean: Positive
    cov: Annotated[float, Field(ge=0)]


class LoadsTable(Section):
    """Dead and live load of a resistance factor from bias statistics."""

    dead_factor: Positive
    live_factor: Positive
    dead_to_live: Annotated[list[float], BeforeValidator(as_list)]
    dead_bias: Positive
    live_bias: Positive
    dead_cov: Annotated[float, Field(ge=0)]
    live_cov: Annotated[float, Field(ge=0)]


class NorthAmericanTable(Section):
    """What the resistance factor from tests in the North American form needs beside the tests."""

    format: Text
    coefficients: Literal["printed", "derived"] | None = None
    target: Positive | None = None
    loads: LoadsTable | None = None
    material: PartTable
    fabrication: PartTable


class MeanValueTable(Section):
    """A resistance factor from bias statistics."""

    target: Positive
    loads: LoadsTable


class ResistanceEntry(Section):
    """``[resistance.NAME]``: component tests against prediction."""

    file: Text
    sheet: Text | None = None
    separator: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    exclude: list[ExcludeTable] = []
    unit_by: UnitByTable | None = None
    measured: Text
    unit: str | None = None
    prediction: Text
    units: dict[str, str] = {}
    inputs: list[Text] = []
    nominal: list[Text] = []
    survived: Text | None = None
    survivors: Literal["censored", "as_failed", "leave_out"] = "censored"
    specimen: Text | None = None
    subgroup: Text | None = None
    cluster: Text | None = None
    subsets: Literal["pooled", "own", "series"] = "pooled"
    covs: dict[str, Annotated[float, Field(ge=0)]] = {}
    nominal_ratio: Positive | None = None
    tail_share: Annotated[float | None, Field(gt=0, le=1)] = None
    second_layer: Text | None = None
    known_scatter: dict[str, Annotated[float, Field(ge=0)]] = {}
    factors: Literal["formula", "table"] = "formula"
    trend_level: Annotated[float, Field(gt=0, lt=1)] = 0.05
    split_at: dict[str, Positive] = {}
    north_american: NorthAmericanTable | None = None
    mean_value: MeanValueTable | None = None
    description: str = ""


class VariableEntry(Section):
    """``[variables.NAME]`` without its moments and parameters, whose names the families give."""

    family: Annotated[list[str], BeforeValidator(_families)]
    records: Text | None = None
    resistance: Text | None = None
    method: Any = None
    estimate: Annotated[list[str], BeforeValidator(_names)] = []
    pooled_shape: Annotated[list[str], BeforeValidator(_names)] = []
    sites: Text | None = None
    stands_for: Literal["whole population", "lot mean", "within a lot"] | None = None
    lot: Text | None = None
    predictive: bool = False
    role: Literal["resistance", "action", "geometry", "model"] | None = None
    tail: Literal["lower", "upper"] | None = None
    failure_mode: Text | None = None
    period: Positive | None = None
    renewal_rate: Positive | None = None
    conversion: Literal["maximum", "none"] | None = None
    conversion_reason: str = ""
    size_ratio: Value | None = None
    stress_profile: Text | None = None
    upper_limit: Value | None = None
    unit: str | None = None
    description: str = ""
    source: str = ""
    grade: Literal["own data", "published data", "code value", "judgement"] | None = None
    may_be_negative: bool = False
    exceedances: Any = None


class ExceedancesTable(Section):
    """A maximum of a period from the values above a threshold."""

    threshold: Value
    years: Positive
    run_length: Value | None = None


class SitesEntry(Section):
    """``[sites.NAME]``."""

    table: Text | None = None
    sheet: Text | None = None
    columns: dict[str, list[Any]] | None = None
    label: Text | None = None
    weight: Text | None = None
    units: dict[str, str] = {}
    description: str = ""


class MethodTable(Section):
    """An estimator with its options; which it takes is known by the estimator."""

    name: Text
    fraction: float | None = None
    cov: float | None = None
    prior_mean: Value | None = None
    prior_cov: float | None = None
    prior_n: float | None = None
    prior_nu: float | None = None


class CharacteristicTable(Section):
    """A quantity that is a characteristic value of a basic variable with records."""

    characteristic_of: Text
    fractile: Annotated[float, Field(gt=0, lt=1)] = 0.05
    confidence: Annotated[float, Field(gt=0, lt=1)] | None = None
    route: Text | None = None
    least_cov: Annotated[float, Field(gt=0)] | None = None
    known_cov: Annotated[float, Field(gt=0)] | None = None
    from_lots: bool = False
    family: Text | None = None
    unit: str | None = None


class StatedTable(Section):
    """A quantity with its value type."""

    value: Value
    of: Text
    is_: Annotated[Text, Field(alias="is")]
    bias: Annotated[float, Field(gt=0)] | None = None


class SituationsSection(Section):
    """``[situations]``; its axes, units and derived quantities are read one by one."""

    weight: Value = "1"
    table: Text | None = None
    sheet: Text | None = None
    axes: dict[str, Any] | None = None
    units: dict[str, Any] | None = None
    derived: dict[str, Any] = {}


class AxisTable(Section):
    """An axis written as a table."""

    from_: Annotated[Value | None, Field(alias="from")] = None
    to: Value | None = None
    count: Annotated[int, Field(ge=1)] | None = None
    step: Value | None = None
    values: list[Value] | None = None
    unit: str | None = None
    description: str = ""


class RuleEntry(Section):
    """``[rules.NAME]``."""

    design_check: Text | None = None
    sizes: Text | None = None
    size_unit: str | None = None
    limit_state: Text
    weight: Annotated[float, Field(ge=0)] = 1.0
    description: str = ""


class FactorTable(Section):
    """A free factor."""

    present: Number
    lower: Number
    upper: Number
    step: Positive | None = None
    description: str = ""


class ObjectiveSection(Section):
    """``[objective]``."""

    penalty: Text = "squared"
    floor: Number | None = None
    d: Positive | None = None
    index: Literal["form", "verified"] = "form"


class CombinedTable(Section):
    """One action of ``[combination]``."""

    repetitions: Annotated[float | None, Field(ge=1)] = None
    presence: Annotated[float, Field(gt=0, le=1)] = 1.0
    duration: Positive | None = None


class TopLevel(Section):
    """The sections themselves; only their names are checked here."""

    format: Any = None
    study: Any = None
    target: Any = None
    records: Any = None
    resistance: Any = None
    quantities: Any = None
    sites: Any = None
    variables: Any = None
    situations: Any = None
    rules: Any = None
    combination: Any = None
    correlations: Any = None
    factors: Any = None
    objective: Any = None
    verification: Any = None
    systems: Any = None
