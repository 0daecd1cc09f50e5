"""Situations whose distributions differ by location and scale only share one shape, which is computed once."""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution, Extreme, maximum_of, minimum_of

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.intp]

# Parameters are rounded to this many bits, so that what was computed from mean and sd shares a shape with what was
# computed from mean and cov; the coefficient of correlation moves by less than 1e-11.
_BITS = 40


class Shapes(NamedTuple):
    """The distinct shapes of a distribution.

    Attributes
    ----------
    distribution : Distribution
        One element for each distinct shape, with location 0 and scale 1 where the family has them; shape () or (k,).
    of_situation : array of int, shape (n,)
        The shape of each situation.
    """

    distribution: Distribution
    of_situation: Index

    @property
    def distinct(self) -> int:
        """Number of distinct shapes."""
        return self.distribution.shape[0] if self.distribution.shape else 1


def distinct_shapes(distribution: Distribution, n: int) -> Shapes:
    """Return the distinct shapes among n situations; ``distribution`` has shape () or (n,)."""
    if type(distribution) is Distribution:
        rows = np.stack(_reduced(distribution))
        return _distinct(rows, lambda r: Distribution.of(distribution.family, tuple(r)), n)
    if isinstance(distribution, Extreme):
        if distribution.equivalent is not None:
            return distinct_shapes(distribution.equivalent, n)
        if type(distribution.base) is Distribution:
            repeated = maximum_of if distribution.of_maxima else minimum_of
            family, ratio = distribution.base.family, _rounded(distribution.ratio)
            rows = np.stack(np.broadcast_arrays(*_reduced(distribution.base), ratio))
            return _distinct(rows, lambda r: repeated(Distribution.of(family, tuple(r[:-1])), r[-1]), n)
    every = np.arange(n) if distribution.shape else np.zeros(n, dtype=np.intp)
    return Shapes(distribution, every)


def _distinct(rows: Array, make: Callable[[Array], Distribution], n: int) -> Shapes:
    if rows.ndim == 1:
        return Shapes(make(rows), np.zeros(n, dtype=np.intp))
    columns, inverse = np.unique(rows, axis=1, return_inverse=True)
    return Shapes(make(columns), np.ravel(inverse))


def _reduced(distribution: Distribution) -> tuple[Array, ...]:
    """Return the parameters after x has been moved and scaled to location 0 and scale 1."""
    kinds = [q.kind for q in distribution.family.parameters]
    values = distribution.values
    bounds = [v for v, kind in zip(values, kinds, strict=True) if kind == "bound"]
    location, scale = np.zeros(()), np.ones(())
    if "location" in kinds:
        location = values[kinds.index("location")]
    elif bounds:
        location = bounds[0]
    if "scale" in kinds:
        scale = values[kinds.index("scale")]
    elif bounds:
        scale = bounds[1] - bounds[0]
    rows = []
    for value, kind in zip(values, kinds, strict=True):
        if kind == "shape":
            rows.append(_rounded(value))
        elif kind == "scale":
            rows.append(np.ones(()))
        else:
            rows.append(_rounded((value - location) / scale))
    return tuple(np.broadcast_to(r, distribution.shape) for r in rows)


def _rounded(x: Array) -> Array:
    """Return x rounded to :data:`_BITS` bits of its own size; infinite values stay."""
    fraction, exponent = np.frexp(x)
    # Adding zero turns -0 into 0.
    return np.asarray(np.ldexp(np.rint(fraction * 2.0**_BITS), exponent - _BITS) + 0.0)
