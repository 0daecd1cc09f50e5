"""Checks of what a person gives to the models of actions."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError

Array = npt.NDArray[np.float64]


def positive(what: str, value: npt.ArrayLike) -> Array:
    """Return a float64 array, or raise InputError for the first element that is not positive and finite."""
    array = np.asarray(value, dtype=np.float64)
    good = (array > 0.0) & np.isfinite(array)
    if not good.all():
        raise InputError(f"{what} must be positive and finite; got {float(array[~good].flat[0]):g}.")
    return array
