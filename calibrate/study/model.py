"""What a study says, validated: frozen, in SI units, every expression parsed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Doubt
from calibrate.expressions import Comparison, Expression
from calibrate.factors import Factor, VerificationSettings
from calibrate.fitting.characteristic import CharacteristicValue
from calibrate.fitting.correlation import CorrelationEstimate
from calibrate.records import Sample
from calibrate.reliability import CorrelatedPair
from calibrate.reliability.systems import FailureLogic
from calibrate.resistance import ComponentTests, Format, LoadStatistics, Part
from calibrate.situations import Axis, Situations
from calibrate.units import Dimension, Unit


@dataclass(frozen=True, slots=True)
class Quantity:
    """A deterministic value that rules and models may use.

    ``text`` is what the user wrote, ``value`` is in SI units, ``unit`` is the
    user's unit, or the coherent SI unit for an expression.
    """

    name: str
    text: str
    value: float
    unit: Unit
    line: int | None = None
    characteristic: CharacteristicValue | None = None
    """What it was computed as, in the unit of the records; None for a typed value."""
    of: str | None = None
    """The basic variable whose value it is, where the study says so."""
    value_type: str = ""
    """``5 % fractile``, ``mean``, ``nominal`` or ``declared``; empty where nothing is said."""
    bias: float | None = None
    """Mean over value as typed."""


@dataclass(frozen=True, slots=True)
class Exceedances:
    """How a variable follows from the values above a threshold.

    ``threshold`` is in the unit of the records, ``years`` the length of the record without gaps, ``run_length`` in
    years; None where every exceedance is an event of its own.
    """

    threshold: float
    years: float
    run_length: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class NorthAmericanQuestion:
    """What the resistance factor from tests needs beside the tests."""

    format: Format
    coefficients: str
    material: Part
    fabrication: Part


@dataclass(frozen=True, slots=True, eq=False)
class MeanValueQuestion:
    """Target and loads of a resistance factor from bias statistics."""

    target: float
    loads: LoadStatistics


@dataclass(frozen=True, slots=True, eq=False)
class ComponentRecords:
    """Component tests with the prediction of each, and what the study asks of them.

    ``ratio`` is measured over predicted as a sample, ``unit`` that of the measured capacity, ``units`` those of the
    columns in the prediction as far as stated, ``input_units`` those of the inputs. ``covs`` are those of the basic
    variables of the prediction, ``known_scatter`` what the ratio contains beside the model's own scatter.
    """

    name: str
    file: str
    measured: str
    prediction: str
    unit: Unit
    tests: ComponentTests
    ratio: Sample
    survivors: str
    subsets: str
    covs: Mapping[str, float]
    nominal_ratio: float | None
    known_scatter: Mapping[str, float]
    table_factors: bool
    trend_level: float
    split_at: Mapping[str, float]
    north_american: NorthAmericanQuestion | None
    mean_value: MeanValueQuestion | None
    description: str = ""
    line: int | None = None
    input_units: Mapping[str, Unit] = field(default_factory=dict)
    gradient: Mapping[str, float] = field(default_factory=dict)
    """(dr/dx_i) sd_i/r of each basic variable with a cov, at the means of the tests; empty where there is none."""
    tail_share: float | None = None
    """Share of the tests that an evaluation of the lower tail alone uses."""
    second_layer: str | None = None
    """The tests of physical over numerical results, where these are numerical over formula."""
    units: Mapping[str, Unit] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Variable:
    """A basic variable as the study defines it.

    Either ``records`` names a sample and ``families`` the candidates (one
    name; several; or empty for every family that can be fitted), or
    ``families`` holds one name and ``arguments`` its moments or parameters as
    expressions in SI units. ``texts`` keeps them as typed. ``period`` is in
    years; None means the reference period.
    """

    name: str
    families: tuple[str, ...]
    records: str | None
    arguments: Mapping[str, Expression]
    texts: Mapping[str, str]
    period: float | None
    unit: Unit
    dimension: Dimension
    line: int | None = None
    method: str = "likelihood"
    may_be_negative: bool = False
    estimate: tuple[str, ...] = ()
    """Parameters that a fit estimates although its family would keep them fixed (``threshold``)."""
    description: str = ""
    source: str = ""
    method_options: Mapping[str, float] = field(default_factory=dict)
    """What the estimator was told, in the unit of the records."""
    stands_for: str = ""
    """``whole population``, ``lot mean`` or ``within a lot``; empty where lots play no part."""
    lot: str | None = None
    pooled_shape: tuple[str, ...] = ()
    """Records whose block maxima share one shape, the variable's own among them; empty where it has a shape of its
    own."""
    predictive: bool = False
    """Whether the variable carries the uncertainty of its estimated parameters."""
    role: str = ""
    """``resistance``, ``action``, ``geometry`` or ``model``; empty where nothing is said."""
    tail: str = ""
    """``lower`` or ``upper``: the tail that decides, where the study says so."""
    failure_mode: str | None = None
    """Which of the modes named by the records it is the strength of; failures in others are survivors of this one."""
    converted: bool = True
    """Whether an action of another period is converted; if not, ``conversion_reason`` says why."""
    conversion_reason: str = ""
    size_ratio: Expression | None = None
    """Size of the part over the size that the model is for; the strength is that of the weakest of so many."""
    stress_profile: Expression | None = None
    """Stress over its largest value along ``position`` from 0 to 1, of a Weibull strength."""
    upper_limit: float | None = None
    """Largest value that is physically possible, in SI units, where the study says so; it bounds no model."""
    sites: str | None = None
    """The site table by whose classes the model differs; ``arguments`` then use its columns."""
    resistance: str | None = None
    """The component tests whose model factor it is; its sample is that of measured over predicted."""
    grade: str = ""
    """``own data``, ``published data``, ``code value`` or ``judgement``; empty where nothing is said."""
    exceedances: Exceedances | None = None
    """Where the variable is the maximum of its period from threshold exceedances."""


@dataclass(frozen=True, slots=True, eq=False)
class SiteTable:
    """Classes of sites, by which an action differs.

    ``labels`` name the K classes, ``weights`` are their shares (sum 1, possibly zero). ``columns`` hold numbers in SI
    units, shape (K,); ``texts`` are the columns of text, each with a note on what is no number in it. ``file`` is the
    table as the study names it, None where it is written out.
    """

    name: str
    labels: tuple[str, ...]
    weights: NDArray[np.float64]
    columns: Mapping[str, NDArray[np.float64]]
    units: Mapping[str, Unit]
    texts: Mapping[str, str] = field(default_factory=dict)
    file: str | None = None
    sha256: str = ""
    description: str = ""
    line: int | None = None


@dataclass(frozen=True, slots=True)
class CombinedAction:
    """A variable action as independent pulses: how often in the reference period, and how often present.

    ``duration`` is the mean time in years that it lasts when present; None where it fills its interval.
    """

    name: str
    repetitions: float
    presence: float = 1.0
    duration: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Correlated:
    """A correlated pair of basic variables; ``estimate`` is None where the coefficient is stated."""

    pair: CorrelatedPair
    estimate: CorrelationEstimate | None = None
    source: str = ""


@dataclass(frozen=True, slots=True)
class Rule:
    """A design check, the size that it determines, and the limit state of what it designs.

    ``variables`` are the basic variables of the limit state, in the order of
    the study. ``size`` is None where the rule is assessed as it stands.
    """

    name: str
    design_check: Comparison | None
    size: str | None
    size_unit: Unit | None
    limit_state: Comparison
    variables: tuple[str, ...]
    weight: float
    line: int | None = None
    description: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class System:
    """Rules that fail together as ``logic`` says; calibrated where its weight is positive, else only reported."""

    name: str
    logic: FailureLogic
    weight: float = 0.0
    line: int | None = None
    description: str = ""


@dataclass(frozen=True, slots=True)
class Objective:
    """How a departure of beta from the target is penalised."""

    penalty: str = "squared"
    floor: float | None = None
    scale: float = 0.23
    """The ``d`` of the asymmetric penalty."""
    index: str = "form"
    """``form``, or ``verified``: FORM corrected by the difference to the verified index."""


@dataclass(frozen=True, slots=True)
class VerificationQuestion:
    """How the index is verified, and with which sets of factors: ``present``, ``optimal``, ``proposed``."""

    settings: VerificationSettings = field(default_factory=VerificationSettings)
    on: tuple[str, ...] = ("proposed",)


@dataclass(frozen=True, slots=True)
class Study:
    """A whole calibration, read and checked.

    ``file`` is the path relative to ``project`` (posix form), ``path`` the
    path that was opened, ``shown`` the path as the user typed it.
    """

    path: Path
    shown: str
    project: Path
    file: str
    sha256: str
    text: str
    title: str
    summary: str
    reference_period: float
    seed: int
    target_beta: float
    records: Mapping[str, Sample]
    declared: Mapping[str, tuple[float, float]]
    """Range in which the values of some records are expected, in their unit; both ends equal for a nominal value."""
    quantities: Mapping[str, Quantity]
    variables: Mapping[str, Variable]
    situations: Situations
    derived: Mapping[str, Expression]
    rules: Mapping[str, Rule]
    factors: tuple[Factor, ...]
    objective: Objective
    size_dimensions: Mapping[str, Dimension]
    """Dimension of the size of each rule that has one, by rule name."""
    doubts: tuple[Doubt, ...] = ()
    weight_text: str = "1"
    factor_descriptions: Mapping[str, str] = field(default_factory=dict)
    axis_descriptions: Mapping[str, str] = field(default_factory=dict)
    lines: Mapping[str, int] = field(default_factory=dict)
    """Line in the study file of each dotted key, for messages found later."""
    axes: tuple[Axis, ...] = ()
    """Axes of the grid; none where a table or nothing gives the situations."""
    table: str | None = None
    """The table of situations as the study names it."""
    combination: tuple[CombinedAction, ...] = ()
    """Variable actions that are combined; their models are those of one repetition."""
    verification: VerificationQuestion = field(default_factory=VerificationQuestion)
    """How the index is verified."""
    correlations: tuple[Correlated, ...] = ()
    """Correlated pairs of basic variables."""
    systems: Mapping[str, System] = field(default_factory=dict)
    """Systems of rules by name."""
    sites: Mapping[str, SiteTable] = field(default_factory=dict)
    """Site tables by name."""
    resistances: Mapping[str, ComponentRecords] = field(default_factory=dict)
    """Component tests by name; their model factors stand in ``records`` under the same names."""
    blocks: Mapping[str, int] = field(default_factory=dict)
    """Blocks between begin and end of records of maxima, by name of the records, where stated."""
    other_periods: tuple[float, ...] = ()
    """Further periods, in years, for which beta is reported alongside."""
    independence: float = 1.0
    """Interval in years between independent failures, for the conversion of beta itself."""

    @property
    def judged(self) -> tuple[str, ...]:
        """What has a row in each design situation: the rules, then the systems, in the order of the study."""
        return (*self.rules, *self.systems)

    @property
    def weights(self) -> tuple[float, ...]:
        """Weights of rules and systems, as stated."""
        return (*(r.weight for r in self.rules.values()), *(s.weight for s in self.systems.values()))

    @property
    def total_weight(self) -> float:
        """Sum of the weights of rules and systems."""
        return sum(self.weights)
