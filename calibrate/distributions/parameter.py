"""What a family declares about each of its parameters."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Values = tuple[Array, ...]
Kind = Literal["location", "scale", "shape", "bound"]


@dataclass(frozen=True, slots=True)
class Domain:
    """An open interval in which a parameter or a moment must lie.

    Parameters
    ----------
    low, high : float
        Ends, excluded.
    infinite : bool
        Whether -inf and inf are accepted too (bounds that are absent).
    """

    low: float = -math.inf
    high: float = math.inf
    infinite: bool = False

    def contains(self, value: Array) -> npt.NDArray[np.bool_]:
        """Say which elements are allowed; NaN never is."""
        inside: npt.NDArray[np.bool_] = np.greater(value, self.low) & np.less(value, self.high)
        if self.infinite:
            inside |= np.isinf(value)
        return inside

    def __str__(self) -> str:
        if self.low == 0 and self.high == math.inf:
            return "positive"
        if self.high == math.inf and self.low > -math.inf:
            return f"greater than {self.low:g}"
        if self.low == -math.inf and self.high < math.inf:
            return f"less than {self.high:g}"
        if self.low > -math.inf:
            return f"between {self.low:g} and {self.high:g}"
        return "a number" if self.infinite else "a finite number"


REAL = Domain()
POSITIVE = Domain(low=0.0)
BOUND = Domain(infinite=True)


@dataclass(frozen=True, slots=True)
class Parameter:
    """One own parameter of a family.

    Parameters
    ----------
    name : str
        Name in study files and in Python.
    kind : {"location", "scale", "shape", "bound"}
        All but ``shape`` carry the unit of the variable.
    domain : Domain
        Where its values must lie.
    default : float, optional
        Value when it is not given; without one it is required.
    """

    name: str
    kind: Kind
    domain: Domain = REAL
    default: float | None = None

    @property
    def carries_unit(self) -> bool:
        """Whether it is measured in the unit of the variable."""
        return self.kind != "shape"


class Moments(NamedTuple):
    """Mean, sd and cov of a variable, and the parameters given beside them in the order of ``moments_keep``.

    sd and cov agree, whichever was given; both are NaN when the mean alone is enough.
    """

    mean: Array
    sd: Array
    cov: Array
    kept: Values = ()
