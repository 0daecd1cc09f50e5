"""What a caller may ask of a reading beyond the column and its unit."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from calibrate.errors import InputError
from calibrate.records.text_form import TextForm
from calibrate.units import Unit

FIT = "fit"


@dataclass(frozen=True, slots=True, kw_only=True)
class Exclude:
    """One rule that leaves rows out; it says why.

    Parameters
    ----------
    reason : str
        The physical cause, for the report; required.
    row : int, optional
        Row of the file, as a spreadsheet or an editor numbers it.
    where : str, optional
        A column, with ``equals``: all rows with that entry.
    equals : str, float or bool, optional

    Raises
    ------
    InputError
        No reason, or not exactly one of ``row`` and ``where`` with ``equals``.
    """

    reason: str
    row: int | None = None
    where: str | None = None
    equals: str | float | bool | None = None

    def __post_init__(self) -> None:
        if not self.reason.strip():
            raise InputError(
                f"The exclusion of {self.target} has no reason; write what happened to the specimen."
            )
        by_row, by_entry = self.row is not None, self.where is not None and self.equals is not None
        half = (self.where is None) != (self.equals is None)
        if by_row == by_entry or half:
            raise InputError(
                f"The exclusion with the reason '{self.reason}' must name either a row, or a column with 'where' and "
                "its entry with 'equals'."
            )

    @property
    def target(self) -> str:
        """What is left out, in words."""
        if self.row is not None:
            return f"row {self.row}"
        return f"rows where '{self.where}' equals '{self.equals}'"


@dataclass(frozen=True, slots=True)
class UnitBy:
    """Rows in other units than the column's: by the entry of ``column``, each with its unit."""

    column: str
    units: Mapping[str, Unit]


@dataclass(frozen=True, slots=True, kw_only=True)
class Covariate:
    """A property to whose reference the values are normalised, by the power law x ~ covariate^exponent.

    Parameters
    ----------
    column : str
        Its column; the unit is that of ``ReadOptions.units``, by default that of the reference.
    reference : float
        In ``unit``, positive.
    unit : Unit
        Unit of the reference.
    exponent : float or "fit"
        Given, or found by regression of the logarithms.
    standard_error : float
        Of a given exponent, where its source states one.

    Raises
    ------
    InputError
        A reference that is not positive, an exponent that is neither a finite
        number nor ``fit``, or a standard error that is negative or of a
        fitted exponent.
    """

    column: str
    reference: float
    unit: Unit
    exponent: float | str
    standard_error: float = 0.0

    def __post_init__(self) -> None:
        name = f"Normalisation by '{self.column}'"
        if not 0.0 < self.reference < math.inf:
            raise InputError(f"{name}: the reference {self.reference:g} must be positive.")
        if isinstance(self.exponent, str):
            if self.exponent != FIT:
                raise InputError(f"{name}: the exponent '{self.exponent}' must be a number or '{FIT}'.")
            if self.standard_error != 0.0:
                raise InputError(f"{name}: a fitted exponent finds its own standard error; leave it out.")
        elif not math.isfinite(self.exponent):
            raise InputError(f"{name}: the exponent {self.exponent} must be a finite number.")
        if not 0.0 <= self.standard_error < math.inf:
            raise InputError(f"{name}: the standard error {self.standard_error:g} must not be negative.")


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadOptions:
    """How a column becomes a sample; the defaults read a complete sample and leave nothing out.

    Parameters
    ----------
    form : TextForm
        What is stated about a CSV file rather than found.
    censoring : bool
        Whether the caller honours specimens known by bounds. If not, they are refused.
    censored : str, optional
        A column that flags censored specimens: yes, true, 1, right or survived;
        left; no, false, 0, failed or empty.
    above, below : float
        Truncation limits in the unit of the sample.
    lot, laboratory, mode, specimen : str, optional
        Columns of labels.
    order : str, optional
        Column of the order of testing: numbers or ISO dates.
    time : str, optional
        Column of the time of each value: numbers in ``time_unit`` (default years), or ISO dates.
    time_unit : Unit, optional
    detection_limit : float
        Values below it, zeros among them, are known only to lie below it; in the unit of the sample.
    coverage : str, optional
        Column of the part of each block that was observed, above 0 and at most 1.
    exclude : tuple of Exclude
    units : mapping of str to Unit
        Units of the columns of a derived value and of covariates; others are dimensionless.
    measured : str, optional
        Which column of a derived value ``censored`` and ``unit_by`` speak of;
        not needed where the value has only one column.
    unit_by : UnitBy, optional
    normalise : tuple of Covariate
    """

    form: TextForm = field(default_factory=TextForm)
    censoring: bool = False
    censored: str | None = None
    above: float = -math.inf
    below: float = math.inf
    lot: str | None = None
    laboratory: str | None = None
    mode: str | None = None
    specimen: str | None = None
    order: str | None = None
    time: str | None = None
    time_unit: Unit | None = None
    detection_limit: float = -math.inf
    coverage: str | None = None
    exclude: tuple[Exclude, ...] = ()
    units: Mapping[str, Unit] = field(default_factory=dict)
    measured: str | None = None
    unit_by: UnitBy | None = None
    normalise: tuple[Covariate, ...] = ()

    def __post_init__(self) -> None:
        if not self.above < self.below:
            raise InputError(
                f"The truncation limits {self.above:g} and {self.below:g} leave nothing between them."
            )
        if self.detection_limit >= self.below:
            raise InputError(
                f"The detection limit {self.detection_limit:g} is not below {self.below:g}, the limit of the sample."
            )
        if self.normalise and (math.isfinite(self.above) or math.isfinite(self.below)):
            raise InputError(
                "Truncation limits hold for values as measured; after normalisation each specimen would have its "
                "own. Use the one or the other."
            )
        columns = [covariate.column for covariate in self.normalise]
        twice = next((c for c in columns if columns.count(c) > 1), None)
        if twice is not None:
            raise InputError(f"Normalisation by '{twice}' is stated twice.")

    @property
    def roles(self) -> dict[str, str]:
        """Columns of labels by role, as far as stated."""
        found = {role: getattr(self, role) for role in ("lot", "laboratory", "mode", "specimen")}
        return {role: column for role, column in found.items() if column is not None}


DEFAULTS = ReadOptions()
