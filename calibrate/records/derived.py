"""Values derived from several columns by an expression, with checked dimensions and bounds carried through."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.expressions import Expression, dimension_of, parse
from calibrate.records.cells import Refusal
from calibrate.records.grid import Grid
from calibrate.units import DIMENSIONLESS, ONE, Unit, si_unit

Array = NDArray[np.float64]
Bounded = Mapping[str, tuple[Array, Array]]

POINTS = 65
"""Number of points at which a value that is not linear is checked to rise or fall throughout."""


@dataclass(frozen=True, slots=True)
class Derivation:
    """An expression in the columns of a file, and the unit of its result.

    Attributes
    ----------
    text : str
        As typed.
    expression : Expression
    unit : Unit
        Of the result: stated, or the SI unit that the expression implies.
    """

    text: str
    expression: Expression
    unit: Unit

    @property
    def columns(self) -> tuple[str, ...]:
        """The columns that occur."""
        return self.expression.names


def derivation(text: str, units: Mapping[str, Unit], unit: Unit | None) -> Derivation:
    """Read the expression of a value and check its dimensions.

    Parameters
    ----------
    text : str
        Names are column names.
    units : mapping of str to Unit
        Unit of each column; a column that is not named is dimensionless.
    unit : Unit or None
        Unit of the result; None takes the SI unit that the expression implies.

    Raises
    ------
    InputError
        No expression, parts that do not agree, no column in it, or a unit of
        another dimension than the result.
    """
    expression = parse(text)
    if not expression.names:
        raise InputError(f"The value '{text}' names no column.")
    dimensions = {name: units.get(name, ONE).dimension for name in expression.names}
    implied = dimension_of(expression, dimensions)
    if implied.anything:
        implied = DIMENSIONLESS
    if unit is None:
        return Derivation(text, expression, si_unit(implied))
    if unit.dimension != implied:
        stated = f"'{unit.text}', {unit.dimension.describe()}" if unit.text else "dimensionless"
        missing = [name for name in expression.names if name not in units]
        hint = f"No unit is stated for {', '.join(missing)}." if missing else None
        message = f"The value '{text}' is {implied.describe()}, but its unit is stated as {stated}."
        raise InputError(Problem(message, suggestion=hint))
    return Derivation(text, expression, unit)


def derive(plan: Derivation, grid: Grid, columns: Bounded, problems: list[Problem]) -> tuple[Array, Array]:
    """Return the bounds of the derived value of each row, in its unit, each of shape (n,).

    Parameters
    ----------
    plan : Derivation
    grid : Grid
        For the places of what is refused.
    columns : mapping of str to (lower, upper), each of shape (n,)
        In SI units.
    problems : list of Problem
        Receives the rows in which the value is not finite, or censored in a
        way that the expression does not carry through.

    Notes
    -----
    A row's censored column must be the only one, and the value must rise or
    fall with it throughout its bounds: certain where the expression is linear
    in it, else checked by the sign of the derivative and the order of the
    values at `POINTS` points.
    """
    expression = plan.expression
    exact = {name: _finite(*both) for name, both in columns.items()}
    value = expression.value(exact)
    lower, upper = value.copy(), value.copy()
    names = list(columns)
    masks = np.array([columns[name][0] != columns[name][1] for name in names])
    several = masks.sum(axis=0) > 1
    refused: dict[int, Refusal] = {}
    for i in np.flatnonzero(several):
        which = " and ".join(f"'{name}'" for name, mask in zip(names, masks[:, i], strict=True) if mask)
        refused[int(i)] = Refusal(f"{which} are both censored.", "Only one of the columns may be.")
    for name, mask in zip(names, masks, strict=True):
        rows = np.flatnonzero(mask & ~several)
        if rows.size:
            taken = {n: x[rows] for n, x in exact.items()}
            low, high = columns[name][0][rows], columns[name][1][rows]
            lower[rows], upper[rows] = _carried(expression, name, taken, low, high)
    for i in np.flatnonzero(~masks.any(axis=0) & ~np.isfinite(value)):
        cells = ", ".join(f"{name} = {exact[name][i]:g}" for name in names)
        refused[int(i)] = Refusal(
            f"it is not finite here ({cells} in SI units).", "Correct or exclude the row."
        )
    for i in np.flatnonzero(masks.any(axis=0) & ~several & (np.isnan(lower) | np.isnan(upper))):
        name = names[int(np.argmax(masks[:, i]))]
        refused[int(i)] = Refusal(
            f"'{name}' is censored here, and the value does not rise or fall with it throughout its bounds.",
            "Use a value that does, such as measured / nominal, or exclude the row.",
        )
    for place, refusal in sorted(refused.items()):
        message = f"Value '{plan.text}': {refusal.message}"
        problems.append(Problem(message, grid.file, grid.rows[place].number, refusal.suggestion))
    return lower / plan.unit.factor, upper / plan.unit.factor


def _finite(lower: Array, upper: Array) -> Array:
    return np.where(np.isfinite(lower), lower, upper)


def _carried(
    expression: Expression, name: str, taken: Mapping[str, Array], low: Array, high: Array
) -> tuple[Array, Array]:
    """Return the bounds of the value, NaN where it does not follow the censored column."""
    if expression.is_linear_in(name):
        at_low, at_high, sign = _linear(expression, name, taken, low, high)
    else:
        at_low, at_high, sign = _monotone(expression, name, taken, low, high)
    lower, upper = np.where(sign > 0, at_low, at_high), np.where(sign > 0, at_high, at_low)
    bounded = np.isfinite(lower) | np.isfinite(upper)
    ordered = (sign != 0) & bounded & (lower < upper)
    return np.where(ordered, lower, np.nan), np.where(ordered, upper, np.nan)


def _linear(
    expression: Expression, name: str, taken: Mapping[str, Array], low: Array, high: Array
) -> tuple[Array, Array, Array]:
    """Return the values at both ends and the sign of the slope; infinite ends without inf - inf."""
    _, (slope,) = expression.gradient(taken, (name,))
    sign = np.asarray(np.where(np.isfinite(slope), np.sign(slope), 0.0), dtype=np.float64)
    with np.errstate(invalid="ignore"):
        at_low, at_high = (
            np.where(np.isinf(end), sign * end, expression.value({**taken, name: end})) for end in (low, high)
        )
    return at_low, at_high, sign


def _monotone(
    expression: Expression, name: str, taken: Mapping[str, Array], low: Array, high: Array
) -> tuple[Array, Array, Array]:
    path = _path(low, high)
    values, (slopes,) = expression.gradient({**taken, name: path}, (name,))
    ends = [expression.value({**taken, name: end}) for end in (low, high)]
    values = np.vstack([ends[0][None], values, ends[1][None]])
    rising = (slopes >= 0.0).all(axis=0) & (values[1:] >= values[:-1]).all(axis=0)
    falling = (slopes <= 0.0).all(axis=0) & (values[1:] <= values[:-1]).all(axis=0)
    return ends[0], ends[1], np.asarray(1.0 * rising - 1.0 * falling, dtype=np.float64)


def _path(low: Array, high: Array) -> Array:
    """Return points between the bounds, shape (POINTS, n), rising; far out they step by powers of ten."""
    with np.errstate(invalid="ignore"):
        between = low + np.linspace(0.0, 1.0, POINTS + 2)[1:-1, None] * (high - low)
    anchor = _finite(low, high)
    scale = np.where(anchor == 0.0, 1.0, np.abs(anchor))
    steps = scale * 10.0 ** np.linspace(-6.0, 12.0, POINTS)[:, None]
    return np.where(np.isinf(high), anchor + steps, np.where(np.isinf(low), anchor - steps[::-1], between))
