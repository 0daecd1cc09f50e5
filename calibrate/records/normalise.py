"""Values brought to reference conditions by power laws of covariates, with what that adds to their variance."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.records.cells import Refusal, shortened
from calibrate.records.censored_regression import Regression, regress
from calibrate.records.columns import find, numbers, problem
from calibrate.records.grid import Grid
from calibrate.records.observations import Observations
from calibrate.records.options import FIT, Covariate
from calibrate.units import Unit

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Normalisation:
    """How n values were brought to the reference of k covariates: x · Π (reference/covariate)^exponent.

    Attributes
    ----------
    covariates : tuple of str
        Their columns.
    references : tuple of float
        In ``units``.
    units : tuple of Unit
    fitted : tuple of bool
        Which exponents were found by regression.
    exponents, standard_errors : ndarray, shape (k,)
    covariance : ndarray, shape (k, k)
        Of the exponents.
    residual_sd : float or None
        Of the logarithms about the regression; None if no exponent was fitted.
    freedom : int or None
        Degrees of freedom of ``residual_sd``.
    ratios : ndarray, shape (n, k)
        Covariate over reference.
    added_variance : ndarray, shape (n,)
        Variance of the logarithm of each normalised value that comes from the
        exponents being estimates: zᵀ C z with z the logarithms of its ratios.
        About the square of a coefficient of variation.
    before : Observations
        As measured, in the unit of the sample.
    """

    covariates: tuple[str, ...]
    references: tuple[float, ...]
    units: tuple[Unit, ...]
    fitted: tuple[bool, ...]
    exponents: Array
    standard_errors: Array
    covariance: Array
    residual_sd: float | None
    freedom: int | None
    ratios: Array
    added_variance: Array
    before: Observations

    @property
    def factors(self) -> Array:
        """What each value as measured was multiplied by, shape (n,)."""
        return np.asarray(np.exp(-np.log(self.ratios) @ self.exponents))


def read_ratios(
    grid: Grid, covariates: tuple[Covariate, ...], units: Mapping[str, Unit], problems: list[Problem]
) -> Array:
    """Return covariate over reference, shape (n, k); cells that are not positive numbers add problems.

    Raises
    ------
    InputError
        A column that is unknown, or in a unit of another dimension than its reference.
    """
    ratios = np.ones((len(grid.rows), len(covariates)))
    for k, covariate in enumerate(covariates):
        unit = units.get(covariate.column, covariate.unit)
        if unit.dimension != covariate.unit.dimension:
            message = (
                f"Column '{shortened(covariate.column)}' is {unit.dimension.describe()}, its reference "
                f"{covariate.reference:g} {covariate.unit.text} is {covariate.unit.dimension.describe()}."
            )
            raise InputError(Problem(message, grid.file, None, "Both need units of the same quantity."))
        values = numbers(grid, find(grid, covariate.column), problems)
        for i in np.flatnonzero(values <= 0.0):
            refusal = Refusal(f"'{values[i]:g}' is not positive, as a power law needs.", "Correct the row.")
            problems.append(problem(grid, grid.rows[i].number, covariate.column, refusal))
        ratios[:, k] = values * unit.factor / (covariate.reference * covariate.unit.factor)
    return ratios


def normalise(
    grid: Grid, observations: Observations, covariates: tuple[Covariate, ...], ratios: Array
) -> tuple[Observations, Normalisation]:
    """Bring values to the references of their covariates.

    Parameters
    ----------
    grid : Grid
        For the places of what is refused.
    observations : Observations, n specimens
    covariates : tuple of Covariate, k
    ratios : ndarray, shape (n, k)
        Positive.

    Returns
    -------
    (Observations, Normalisation)

    Raises
    ------
    InputError
        Exponents to be fitted, but values that have no logarithm, too few
        values, or covariates that the values cannot tell apart.

    Notes
    -----
    Fitted exponents come from a regression of ln x on ln(covariate/reference)
    with a constant and a normal residual; censored specimens enter with their
    bounds. Specimens count as independent: scatter between lots is not part
    of the standard errors.
    """
    z = np.log(ratios)
    fitted = np.array([covariate.exponent == FIT for covariate in covariates])
    exponents = np.array([0.0 if c.exponent == FIT else float(c.exponent) for c in covariates])
    covariance = np.diag([c.standard_error**2 for c in covariates]).astype(np.float64)
    residual_sd = freedom = None
    if fitted.any():
        names = [c.column for c, f in zip(covariates, fitted, strict=True) if f]
        regression = _fit(grid, observations, z[:, fitted], z @ exponents, names)
        exponents[fitted] = regression.coefficients[1:]
        covariance[np.ix_(fitted, fitted)] = regression.covariance[1:, 1:]
        residual_sd, freedom = regression.residual_sd, regression.freedom
    factors = np.exp(-z @ exponents)
    result = Normalisation(
        tuple(c.column for c in covariates),
        tuple(c.reference for c in covariates),
        tuple(c.unit for c in covariates),
        tuple(bool(f) for f in fitted),
        exponents,
        np.sqrt(np.diag(covariance)),
        covariance,
        residual_sd,
        freedom,
        ratios,
        np.einsum("ij,jk,ik->i", z, covariance, z),
        observations,
    )
    return Observations(observations.lower * factors, observations.upper * factors), result


def _fit(grid: Grid, observations: Observations, z: Array, given: Array, names: list[str]) -> Regression:
    """Regress the logarithms, less what given exponents explain, on the other covariates."""
    exact = observations.exact
    problems = [
        Problem(
            f"{observations.values[i]:g} is not positive, so an exponent cannot be fitted to logarithms.",
            grid.file,
            grid.rows[i].number,
            "Give the exponent as a number, or correct the row.",
        )
        for i in np.flatnonzero(observations.upper <= 0.0)
    ]
    if problems:
        raise InputError(problems)
    shown = ", ".join(f"'{name}'" for name in names)
    design = np.column_stack([np.ones(len(z)), z])
    needed = design.shape[1] + 1
    if observations.n_exact < needed:
        message = (
            f"To fit the exponents of {shown}, at least {needed} specimens must be observed exactly, "
            f"not {observations.n_exact}."
        )
        raise InputError(Problem(message, grid.file, None, "Give the exponents as numbers."))
    if np.linalg.matrix_rank(design[exact] - [0.0, *z[exact].mean(axis=0)]) < design.shape[1]:
        message = f"The exponents of {shown} cannot be told from the values: the covariates do not vary"
        message += " independently." if len(names) > 1 else "."
        raise InputError(Problem(message, grid.file, None, "Give the exponents as numbers."))
    with np.errstate(divide="ignore"):
        lower, upper = (np.log(np.maximum(b, 0.0)) - given for b in (observations.lower, observations.upper))
    regression = regress(design, lower, upper)
    if regression is None:
        message = f"The regression for the exponents of {shown} finds no maximum of the likelihood."
        raise InputError(Problem(message, grid.file, None, "Give the exponents as numbers."))
    return regression
