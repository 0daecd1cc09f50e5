"""Everything about one finished run: what the report, the files and Python users read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.return_levels import ReturnLevels
from calibrate.errors import Doubt
from calibrate.factors import Calibration, Verification
from calibrate.fitting import Comparison as FitComparison
from calibrate.provenance import Provenance
from calibrate.records.screening import Screening
from calibrate.study.bonds import ImpliedBias
from calibrate.study.component_tests import ResistanceResult
from calibrate.study.evidence_doubts import PedigreeShare
from calibrate.study.exceedances import ExceedanceModel
from calibrate.study.fits import FittedVariable
from calibrate.study.model import Study
from calibrate.study.other_periods import PeriodBeta
from calibrate.study.sites import SiteBeta
from calibrate.units import Unit

if TYPE_CHECKING:
    import pandas as pd

FACTOR_SETS = ("present", "optimal", "proposed")


@dataclass(frozen=True, slots=True)
class VariableResult:
    """A basic variable as it was used.

    ``parameters``, ``mean``, ``sd`` and ``cov`` are arrays over the design
    situations of all rules that use the variable (length 1 where the model
    does not vary), in ``unit``. ``comparison`` and ``fit`` are None where the
    variable was not fitted. ``period`` is the period in years to which the
    given model referred (None: the reference period). Mean, sd and cov are for
    the reference period; ``parameters`` are for ``parameters_period`` years,
    the reference period where the family is closed under maxima, else the
    period of the given model.
    Of an action over sites, ``parameters`` are those of the classes and the
    moments those of a site drawn at random.
    """

    name: str
    family: str
    unit: Unit
    parameters: Mapping[str, NDArray[np.float64]]
    mean: NDArray[np.float64]
    sd: NDArray[np.float64]
    cov: NDArray[np.float64]
    n: int | None
    period: float | None
    parameters_period: float
    comparison: FitComparison | None
    predictive: bool = False

    @property
    def varies(self) -> bool:
        """Whether the model differs between design situations."""
        return any(a.size > 1 for a in (*self.parameters.values(), self.mean, self.sd))


@dataclass(frozen=True, slots=True)
class Result:
    """One run of one study.

    Attributes
    ----------
    factors : DataFrame
        Columns of factors.csv.
    situations : DataFrame
        Columns of situations.csv, in the units of ``units``; NaN where a
        situation has no beta.
    units : mapping
        Unit text of every column of ``situations``; a mapping by rule for the
        sizes where rules differ in unit.
    fitted : mapping of str to FittedVariable
        By variable: candidates, tests, lots.
    exceedances : mapping of str to ExceedanceModel
        By variable: those from threshold exceedances, which are not among ``fitted``.
    screenings : mapping of str to Screening
        By name of the records.
    biases : tuple of ImpliedBias
        Of quantities that stand for a variable.
    pedigree : tuple of PedigreeShare
    resistances : mapping of str to ResistanceResult
        Component tests against prediction, by name.
    other_periods : tuple of PeriodBeta
    combinations : DataFrame or None
        Columns of combinations.csv: beta of each alternative of combined actions; None without any.
    accompanying : DataFrame or None
        Columns of accompanying.csv: psi of combined actions by design values; None without any.
    sites : DataFrame or None
        Columns of sites.csv: beta by class of site, on average and of the worst; None without an action over sites.
    site_beta : SiteBeta or None
        The same as arrays.
    calibration : Calibration
        Factor sets, objective, evaluations, diagnostics.
    required : DataFrame
        For each row of ``situations``, the value of each free factor with which its beta would be the target,
        the other factors as proposed: the columns of required_factors.csv.
    verifications : mapping of str to Verification
        By set of factors.
    verification : DataFrame or None
        Columns of verification.csv; None where nothing was verified.
    correction : array (N,) or None
        What was added to the index of FORM in every row, where the factors rest on the verified index.
    systems : DataFrame or None
        Columns of systems.csv; None without any.
    elasticities : DataFrame
        Columns of elasticities.csv.
    constraint_failures : tuple of str
        Constraints that cannot be met, each a full sentence.
    """

    study: Study
    variables: Mapping[str, VariableResult]
    factors: pd.DataFrame
    situations: pd.DataFrame
    units: Mapping[str, str | Mapping[str, str]]
    required: pd.DataFrame
    fitted: Mapping[str, FittedVariable]
    exceedances: Mapping[str, ExceedanceModel]
    screenings: Mapping[str, Screening]
    biases: tuple[ImpliedBias, ...]
    pedigree: tuple[PedigreeShare, ...]
    resistances: Mapping[str, ResistanceResult]
    other_periods: tuple[PeriodBeta, ...]
    combinations: pd.DataFrame | None
    accompanying: pd.DataFrame | None
    sites: pd.DataFrame | None
    site_beta: SiteBeta | None
    verifications: Mapping[str, Verification]
    verification: pd.DataFrame | None
    correction: NDArray[np.float64] | None
    systems: pd.DataFrame | None
    elasticities: pd.DataFrame
    calibration: Calibration
    doubts: tuple[Doubt, ...]
    constraint_failures: tuple[str, ...]
    unconverged: int
    provenance: Provenance

    @property
    def return_levels(self) -> dict[str, ReturnLevels]:
        """Return levels by variable: of block maxima and of threshold exceedances, in the order of the study."""
        found = {name: f.maxima.levels for name, f in self.fitted.items() if f.maxima is not None}
        found |= {name: f.levels for name, f in self.exceedances.items() if f.levels.years.size}
        return {name: found[name] for name in self.study.variables if name in found}

    def to_dict(self) -> dict[str, Any]:
        """Return the content of result.json."""
        from calibrate.study.export import result_dict

        return result_dict(self)

    def __repr__(self) -> str:
        proposed = ", ".join(f"{n} = {v:g}" for n, v in self.calibration.proposed.factors.items())
        return f"<Result of '{self.study.title}': {proposed}>"
