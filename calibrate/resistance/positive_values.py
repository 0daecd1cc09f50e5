"""Arrays of positive numbers, checked with messages that name the wrong tests."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import InputError, Problem

Array = NDArray[np.float64]

SHOWN = 5
"""How many wrong entries a message names."""


def positive_values(values: ArrayLike, name: str, least: int = 1) -> Array:
    """Return the values as a float array of shape (n,).

    Parameters
    ----------
    values : array_like, shape (n,)
        Finite and above zero.
    name : str
        What they are, for the messages.
    least : int
        Smallest n.

    Raises
    ------
    InputError
        Another number of dimensions, fewer than ``least``, or values that are not finite and positive.
    """
    x = np.array(values, dtype=np.float64)
    if x.ndim != 1:
        raise InputError(f"{name}: one number for each test is needed; got an array of shape {x.shape}.")
    if x.size < least:
        raise InputError(f"{name}: at least {least} tests are needed; got {x.size}.")
    with np.errstate(invalid="ignore"):
        wrong = ~(np.isfinite(x) & (x > 0.0))
    if wrong.any():
        at = np.flatnonzero(wrong)
        places = ", ".join(f"{i + 1} ({x[i]:g})" for i in at[:SHOWN]) + (", ..." if at.size > SHOWN else "")
        raise InputError(
            Problem(
                f"{name}: must be finite and above zero; wrong at test {places} of {x.size}.",
                suggestion="Correct the records, or leave these tests out with a reason.",
            )
        )
    return x


def same_length(values: ArrayLike, name: str, n: int) -> Array:
    """Return finite values of shape (n,), of any sign.

    Raises
    ------
    InputError
        Another shape, or values that are not finite.
    """
    x = np.array(values, dtype=np.float64)
    if x.shape != (n,):
        raise InputError(f"{name}: {n} tests need {n} values; got an array of shape {x.shape}.")
    wrong = np.flatnonzero(~np.isfinite(x))
    if wrong.size:
        places = ", ".join(str(i + 1) for i in wrong[:SHOWN]) + (", ..." if wrong.size > SHOWN else "")
        raise InputError(f"{name}: must be finite; not so at test {places} of {n}.")
    return x


def positive_number(value: float, name: str, zero: bool = False) -> float:
    """Return the number, or raise InputError where it is not finite and above zero (or zero, where allowed)."""
    number = float(value)
    if not (np.isfinite(number) and (number > 0.0 or (zero and number == 0.0))):
        rule = "zero or above" if zero else "above zero"
        raise InputError(f"{name} is {number:g}; it must be finite and {rule}.")
    return number


def inside_unit(value: float, name: str) -> float:
    """Return the number, or raise InputError where it does not lie between 0 and 1."""
    if not 0.0 < value < 1.0:
        raise InputError(f"{name} lies between 0 and 1, both excluded; got {value:g}.")
    return float(value)
