"""The table of design situations: a full factorial grid of axes or the columns of a table, and its weights."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, Problem
from calibrate.units import Unit

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Axis:
    """One axis of a full factorial grid.

    Parameters
    ----------
    name : str
        Its name in expressions.
    values : array, shape (levels,)
        Levels in SI units, in the order of the study.
    unit : Unit
        The user's unit.
    """

    name: str
    values: Array
    unit: Unit


@dataclass(frozen=True, slots=True, eq=False)
class Situations:
    """All design situations, one per row.

    Parameters
    ----------
    n : int
        Number of situations.
    columns : mapping of str to array, shape (n,)
        Axes or table columns in SI units; text columns are object arrays.
    units : mapping of str to Unit
        The user's unit of each column and derived quantity.
    derived : mapping of str to array, shape (n,)
        Derived quantities in SI units.
    weight : array, shape (n,)
        Normalised to sum 1.
    """

    n: int
    columns: Mapping[str, npt.NDArray[Any]]
    units: Mapping[str, Unit]
    derived: Mapping[str, Array]
    weight: Array


def full_factorial(axes: Sequence[Axis]) -> dict[str, Array]:
    """Return the columns of the full factorial grid; the last axis varies fastest.

    Returns
    -------
    dict of str to array
        By axis name, each of shape (n,) with n the product of the numbers of levels; empty without axes.
    """
    if not axes:
        return {}
    grids = np.meshgrid(*(axis.values for axis in axes), indexing="ij")
    return {axis.name: grid.ravel() for axis, grid in zip(axes, grids, strict=True)}


def normalised_weights(raw: npt.ArrayLike, n: int) -> Array:
    """Return the weights of n situations, scaled to sum 1.

    Parameters
    ----------
    raw : array, shape () or (n,)
        Weights as given.

    Raises
    ------
    InputError
        A weight is negative or not finite (the first such situation is named), or all are zero.
    """
    weight = np.array(np.broadcast_to(np.asarray(raw, dtype=np.float64), (n,)))
    good = np.isfinite(weight) & (weight >= 0.0)
    if not good.all():
        first = int(np.argmin(good))
        raise InputError(
            Problem(f"Weights must be zero or positive; situation {first + 1} has {weight[first]:g}.")
        )
    largest = weight.max(initial=0.0)
    if largest == 0.0:
        raise InputError(
            Problem("All weights are zero.", suggestion="Give at least one situation a positive weight.")
        )
    scaled = weight / largest
    return np.asarray(scaled / scaled.sum())
