"""Values and their lots become the few sums that all the methods of this folder need."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.tools import logs

Array = NDArray[np.float64]
Scale = Literal["as measured", "logarithmic"]
SHOWN = 5
"""How many wrong entries a message names."""


@dataclass(frozen=True, slots=True, eq=False)
class Grouped:
    """A sample by lots, centred and divided by its range so that no square over- or underflows.

    Attributes
    ----------
    names : tuple of str
        The k lots in order of first appearance.
    codes : array of int, shape (n,)
        Lot of each specimen, an index of ``names``.
    values : array, shape (n,)
        On the scale of the analysis: x or ln x.
    sizes : array of int, shape (k,)
    centre, unit : float
        ``values = centre + unit z`` with abs(z) <= 1.
    offsets : array, shape (k,)
        Mean of z in each lot.
    squares : array, shape (k,)
        Sum of squares of z about the mean of its lot; exactly 0 for equal values.
    """

    names: tuple[str, ...]
    codes: NDArray[np.int64]
    values: Array
    sizes: NDArray[np.int64]
    centre: float
    unit: float
    offsets: Array
    squares: Array

    @property
    def n(self) -> int:
        """Number of specimens."""
        return int(self.values.size)

    @property
    def k(self) -> int:
        """Number of lots."""
        return len(self.names)

    @property
    def within(self) -> float:
        """Sum of squares of z within the lots."""
        return float(np.sum(self.squares))

    def by_lot(self) -> list[Array]:
        """Return the values of each lot, in the order of ``names``."""
        order = np.argsort(self.codes, kind="stable")
        return np.split(self.values[order], np.cumsum(self.sizes)[:-1])


def grouped(values: ArrayLike, lots: ArrayLike, scale: Scale = "as measured") -> Grouped:
    """Return the sample by lots.

    Parameters
    ----------
    values : array, shape (n,)
        The specimens, n >= 2, all observed exactly.
    lots : sequence, shape (n,)
        Lot of each specimen, as text or number.
    scale : {"as measured", "logarithmic"}
        Whether x or ln x is analysed.

    Raises
    ------
    InputError
        Different lengths, fewer than two specimens, a value that is not finite (or not positive on the
        logarithmic scale), a specimen without lot, or values without any scatter.
    """
    if scale not in get_args(Scale):
        raise InputError(
            Problem(
                f"The scale of lots is 'as measured' or 'logarithmic', not {scale!r}.",
                suggestion=did_you_mean(str(scale), get_args(Scale)),
            )
        )
    x = np.array(values, dtype=np.float64)
    labels = [_name(label) for label in np.asarray(lots, dtype=object).ravel()]
    _check(x, labels, scale)
    names = tuple(dict.fromkeys(labels))
    index = {name: i for i, name in enumerate(names)}
    codes = np.array([index[label] for label in labels], dtype=np.int64)
    sizes = np.bincount(codes, minlength=len(names))
    if scale == "logarithmic":
        middle, y = logs(x)
        centre = math.log(middle)
    else:
        centre = float(np.median(x))
        y = x - centre
    unit = float(np.max(np.abs(y)))
    if np.ptp(y) == 0.0:
        raise InputError("All values are the same: there is no scatter to divide between and within lots.")
    z = y / unit
    # Differences to a specimen of the same lot are exactly zero where a lot has no scatter.
    first = z[np.unique(codes, return_index=True)[1]]
    d = z - first[codes]
    lift = np.bincount(codes, d) / sizes
    squares = np.asarray(np.bincount(codes, (d - lift[codes]) ** 2), dtype=np.float64)
    return Grouped(names, codes, centre + y, sizes, centre, unit, first + lift, squares)


def _name(label: Any) -> str:
    """Return the label as text; whole numbers without decimals, nothing for a missing one."""
    if label is None:
        return ""
    if isinstance(label, float | np.floating):
        if math.isnan(label):
            return ""
        return str(int(label)) if float(label).is_integer() else str(float(label))
    return str(label).strip()


def _check(x: Array, labels: list[str], scale: Scale) -> None:
    if x.ndim != 1 or x.size != len(labels):
        raise InputError(f"There are {x.size} values and {len(labels)} lots: each specimen needs one lot.")
    if x.size < 2:
        raise InputError(f"Scatter by lots needs at least two specimens; got {x.size}.")
    _refuse(~np.isfinite(x), "Not a finite number", "Scatter by lots takes exact observations only.")
    if scale == "logarithmic":
        _refuse(
            x <= 0.0, "Not positive", "The logarithmic scale takes positive values only; use 'as measured'."
        )
    _refuse(np.array([not label for label in labels]), "Without a lot", "Give the lot of every specimen.")


def _refuse(wrong: NDArray[np.bool_], what: str, suggestion: str) -> None:
    if wrong.any():
        at = np.flatnonzero(wrong) + 1
        shown = ", ".join(str(i) for i in at[:SHOWN]) + (", ..." if at.size > SHOWN else "")
        raise InputError(Problem(f"{what}: specimen {shown} of {wrong.size}.", suggestion=suggestion))
