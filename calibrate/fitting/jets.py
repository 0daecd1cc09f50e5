"""Values with exact first and second derivatives by a few parameters, carried forward through a formula.

A log-density written once with these gives the score and the observed information without
a second formula that could disagree with it. Derivatives that are zero by structure are None and
cost nothing. Method: forward differentiation to second order (Griewank and Walther,
Evaluating Derivatives, 2nd ed., SIAM 2008, chapter 13).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import ClassVar, cast

import numpy as np
from numpy.typing import NDArray
from scipy import special

Array = NDArray[np.float64]
Part = Array | float | None
"""A derivative: an array over the values, a number that holds for all of them, or None for zero."""


@dataclass(frozen=True, slots=True, eq=False)
class Jet:
    """A quantity with its derivatives by p parameters.

    Attributes
    ----------
    value : array, shape (n,), or float
    slope : tuple of Part, length p
        First derivatives.
    curve : tuple of Part, length p (p + 1) / 2
        Second derivatives, upper triangle row by row.
    """

    value: Array | float
    slope: tuple[Part, ...]
    curve: tuple[Part, ...]

    # Lets `array - jet` reach the jet instead of becoming an array of objects.
    __array_ufunc__: ClassVar[None] = None

    def __add__(self, other: Jet | Array | float) -> Jet:
        if not isinstance(other, Jet):
            return Jet(self.value + other, self.slope, self.curve)
        return Jet(
            self.value + other.value,
            tuple(_plus(a, b) for a, b in zip(self.slope, other.slope, strict=True)),
            tuple(_plus(a, b) for a, b in zip(self.curve, other.curve, strict=True)),
        )

    __radd__ = __add__

    def __neg__(self) -> Jet:
        return self * -1.0

    def __sub__(self, other: Jet | Array | float) -> Jet:
        return self + (-other)

    def __rsub__(self, other: Array | float) -> Jet:
        return -self + other

    def __mul__(self, other: Jet | Array | float) -> Jet:
        if not isinstance(other, Jet):
            return Jet(
                self.value * other,
                tuple(_times(a, other) for a in self.slope),
                tuple(_times(a, other) for a in self.curve),
            )
        a, b = self, other
        slope = tuple(
            _plus(_times(ai, b.value), _times(bi, a.value)) for ai, bi in zip(a.slope, b.slope, strict=True)
        )
        curve = []
        for k, (i, j) in enumerate(pairs(len(a.slope))):
            mixed = _plus(_times(a.slope[i], b.slope[j]), _times(a.slope[j], b.slope[i]))
            ends = _plus(_times(a.curve[k], b.value), _times(b.curve[k], a.value))
            curve.append(_plus(mixed, ends))
        return Jet(a.value * b.value, slope, tuple(curve))

    __rmul__ = __mul__

    def __truediv__(self, other: Jet | Array | float) -> Jet:
        return self * (reciprocal(other) if isinstance(other, Jet) else 1.0 / other)

    def __rtruediv__(self, other: Array | float) -> Jet:
        return reciprocal(self) * other


Number = Jet | Array | float
"""What a formula may be fed: a free parameter is a Jet, a fixed one a float, data an array."""


def pairs(p: int) -> list[tuple[int, int]]:
    """Return the index pairs of the upper triangle, row by row."""
    return [(i, j) for i in range(p) for j in range(i, p)]


def seed(index: int, p: int, value: Array | float, slope: Array | float, curve: Array | float) -> Jet:
    """Return parameter ``index`` of ``p``, itself a function of one free coordinate.

    ``slope`` and ``curve`` are its first and second derivative by that coordinate.
    """
    slopes: list[Part] = [None] * p
    slopes[index] = slope
    bent = bool(np.any(curve))
    curves: list[Part] = [curve if bent and (i, j) == (index, index) else None for i, j in pairs(p)]
    return Jet(value, tuple(slopes), tuple(curves))


def chain(a: Jet, value: Array | float, first: Part, second: Part) -> Jet:
    """Return f(a) from the value and the first two derivatives of f at ``a.value``."""
    slope = tuple(_times(first, ai) for ai in a.slope)
    curve = []
    for k, (i, j) in enumerate(pairs(len(a.slope))):
        bend = _times(second, _times(a.slope[i], a.slope[j]))
        curve.append(_plus(bend, _times(first, a.curve[k])))
    return Jet(value, slope, tuple(curve))


def chain2(
    a: Jet, b: Jet, value: Array | float, first: tuple[Part, Part], second: tuple[Part, Part, Part]
) -> Jet:
    """Return f(a, b); ``second`` holds f_aa, f_ab, f_bb."""
    slope = tuple(
        _plus(_times(first[0], ai), _times(first[1], bi)) for ai, bi in zip(a.slope, b.slope, strict=True)
    )
    curve = []
    for k, (i, j) in enumerate(pairs(len(a.slope))):
        terms = (
            _times(first[0], a.curve[k]),
            _times(first[1], b.curve[k]),
            _times(second[0], _times(a.slope[i], a.slope[j])),
            _times(second[1], _plus(_times(a.slope[i], b.slope[j]), _times(a.slope[j], b.slope[i]))),
            _times(second[2], _times(b.slope[i], b.slope[j])),
        )
        total: Part = None
        for term in terms:
            total = _plus(total, term)
        curve.append(total)
    return Jet(value, slope, tuple(curve))


def reciprocal(a: Jet) -> Jet:
    """Return 1/a."""
    r = 1.0 / a.value
    r2 = r * r
    return chain(a, r, -r2, 2.0 * r2 * r)


def square(a: Number) -> Number:
    """Return a squared."""
    if not isinstance(a, Jet):
        return a * a
    return chain(a, a.value * a.value, 2.0 * a.value, 2.0)


def log(a: Number) -> Number:
    """Return ln a."""
    if not isinstance(a, Jet):
        return cast(Array, np.log(a))
    r = 1.0 / a.value
    return chain(a, np.log(a.value), r, -r * r)


def log1p(a: Number) -> Number:
    """Return ln(1 + a)."""
    if not isinstance(a, Jet):
        return cast(Array, np.log1p(a))
    r = 1.0 / (1.0 + a.value)
    return chain(a, np.log1p(a.value), r, -r * r)


def exp(a: Number) -> Number:
    """Return e to the power a."""
    if not isinstance(a, Jet):
        return cast(Array, np.exp(a))
    e = np.exp(a.value)
    return chain(a, e, e, e)


def log_gamma(a: Number) -> Number:
    """Return ln Gamma(a), a > 0."""
    if not isinstance(a, Jet):
        return cast(Array, special.gammaln(a))
    return chain(a, special.gammaln(a.value), special.digamma(a.value), special.polygamma(1, a.value))


def log1p_ratio(w: Number) -> Number:
    """Return ln(1 + w)/w, which is 1 at w = 0, for w > -1."""
    if not isinstance(w, Jet):
        return _log1p_ratio(np.asarray(w, dtype=np.float64))[0]
    return chain(w, *_log1p_ratio(np.asarray(w.value, dtype=np.float64)))


_SERIES_BELOW = 0.06
_SERIES = 14
"""Terms; the first one left out is below 0.06**14 = 8e-18."""


def _log1p_ratio(w: Array) -> tuple[Array, Array, Array]:
    """Return ln(1 + w)/w and its first two derivatives: by a series where the quotients would cancel."""
    small = np.abs(w) < _SERIES_BELOW
    safe = np.where(small, 1.0, w)
    r = 1.0 / (1.0 + safe)
    h = np.log1p(safe) / safe
    h1 = (r - h) / safe
    h2 = -(r * r + 2.0 * h1) / safe
    if not np.any(small):
        return h, h1, h2
    k = np.arange(_SERIES + 2, dtype=np.float64)
    c = (-1.0) ** k / (k + 1.0)
    s = np.where(small, w, 0.0)
    h = np.where(small, np.polynomial.polynomial.polyval(s, c), h)
    h1 = np.where(small, np.polynomial.polynomial.polyval(s, (c * k)[1:]), h1)
    h2 = np.where(small, np.polynomial.polynomial.polyval(s, (c * k * (k - 1.0))[2:]), h2)
    return h, h1, h2


def total(a: Jet, n: int) -> tuple[float, Array, Array]:
    """Return the sum over n values: number, gradient of shape (p,), Hessian of shape (p, p)."""
    p = len(a.slope)
    gradient = np.array([_sum(part, n) for part in a.slope])
    hessian = np.empty((p, p))
    for k, (i, j) in enumerate(pairs(p)):
        hessian[i, j] = hessian[j, i] = _sum(a.curve[k], n)
    return _sum(a.value, n), gradient, hessian


def _sum(part: Part, n: int) -> float:
    if part is None:
        return 0.0
    if np.ndim(part) == 0:
        return float(part) * n
    return float(np.sum(part))


def _plus(a: Part, b: Part) -> Part:
    if a is None:
        return b
    if b is None:
        return a
    return a + b


def _times(a: Part, b: Part) -> Part:
    if a is None or b is None:
        return None
    return a * b


Function = Callable[[Array], tuple[float, Array, Array]]
"""Value, gradient and Hessian at a point."""
