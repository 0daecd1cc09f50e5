"""The exact probability beyond a paraboloid in standard normal space.

P(v > beta + 1/2 sum kappa_i v_i^2) is the tail of a quadratic form of normal variables, an integral along a line in
the complex plane (Tvedt)::

    p = 1/(2 pi i) int exp(s^2/2 - beta s) prod (1 + kappa_i s)^(-1/2) ds/s,   0 < Re s < 1/max(-kappa_i).

The path here goes through the saddle point on the real axis, which always exists, because the logarithm of the
integrand is convex there. It bends as the path of steepest descent does at the saddle, and far away runs parallel to
the imaginary axis at Re s = beta, where exp(s^2/2 - beta s) no longer oscillates. On the path, s = c + x(y) + i y with
y = a sinh t, the trapezoidal rule converges geometrically; a is the distance to the nearest singularity. Each result
is compared with those of half and a quarter of the nodes, and repeated with more of them where they differ.

References
----------
.. [1] L. Tvedt, "Distribution of quadratic forms in normal space: application to structural reliability", Journal of
   Engineering Mechanics 116 (1990), from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.rows import add_rows
from calibrate.reliability.second_order.asymptotic import index_of, root

Array = npt.NDArray[np.float64]

# Numbers of steps, tried one after the other until the result hardly differs, relative, from those of half and of a
# quarter of the steps. The error is then far below the first difference. The second one guards against a difference
# that is small by chance.
STEPS = (16, 48, 144, 432, 1296)
FROM_HALF, FROM_QUARTER = 3e-6, 3e-3
# Where the path ends: exp(-y^2/2) is at rounding error relative to the saddle point.
END = 8.0
# Steps of the search for the saddle point, which need not be found exactly.
SADDLE_STEPS = 10
# Numbers in an array of nodes, so that all of them stay in the cache.
NODES = 16_000


@dataclass(frozen=True, slots=True, eq=False)
class _Path:
    """Saddle point c, reach b2 (square) and length of the bend, scale of the nodes; each (n,)."""

    c: Array
    bend: Array
    b2: Array
    scale: Array

    def take(self, columns: npt.NDArray[np.int64]) -> _Path:
        return _Path(*(getattr(self, name)[columns] for name in self.__slots__))


def paraboloid(beta: Array, curvatures: Array) -> Array:
    """Return the index of the exact probability beyond the paraboloid.

    Parameters
    ----------
    beta : array (n,)
        Height of the vertex over the origin, of either sign.
    curvatures : array (k, n)
        Principal curvatures at the vertex, of any size: the probability exists beyond the limit of the asymptotic
        formulas too.

    Returns
    -------
    array (n,)
        -Phi^-1(p), computed in the tail in which it is; NaN where an argument is not finite, or the integral has not
        converged (curvatures that differ by many powers of ten).
    """
    if not curvatures.size:
        return np.array(beta)
    with np.errstate(all="ignore"):
        # Against the mean of the quadratic form, so that it is always the smaller tail that is integrated.
        side = np.where(beta + 0.5 * add_rows(curvatures) < 0.0, -1.0, 1.0)
        return side * index_of(_log_tail(side * beta, side * curvatures))


def _log_tail(b: Array, kappa: Array) -> Array:
    """Return log P(v > b + 1/2 sum kappa_i v_i^2)."""
    path = _path(b, kappa)
    integral = np.full_like(b, np.nan)
    left = np.flatnonzero(np.isfinite(b + add_rows(np.abs(kappa))))
    for steps in STEPS:
        block = max(NODES // steps, 1)
        unsure = []
        for at in range(0, left.size, block):
            part = left[at : at + block]
            whole, half, quarter = _integral(b[part], kappa[:, part], path.take(part), steps)
            done = np.abs(whole - half) <= FROM_HALF * whole
            done &= np.abs(half - quarter) <= FROM_QUARTER * whole
            integral[part[done]] = whole[done]
            unsure.append(part[~done])
        left = np.concatenate(unsure) if unsure else left
    c = path.c
    log_peak = 0.5 * c * c - c * b - np.log(c)
    for row in kappa:
        log_peak = log_peak - 0.5 * np.log1p(c * row)
    return np.asarray(log_peak + np.log(integral))


def _path(b: Array, kappa: Array) -> _Path:
    """Return the path through the saddle point, where c - b - 1/c - 1/2 sum kappa_i/(1 + c kappa_i) = 0."""
    least = np.min(kappa, axis=0)
    limit = np.where(least < 0.0, -1.0 / least, np.inf)
    # A positive curvature contributes at least -1/(2c), a negative one something positive: that bounds the root.
    count = 1.0 + 0.5 * np.sum(kappa > 0.0, axis=0)
    high = np.minimum(0.5 * (b + np.sqrt(b * b + 4.0 * count)), limit)
    low = np.zeros_like(high)
    c = 0.5 * high
    for _ in range(SADDLE_STEPS):
        part = kappa / (1.0 + c * kappa)
        slope = c - b - 1.0 / c - 0.5 * add_rows(part)
        second = 1.0 + 1.0 / (c * c) + 0.5 * add_rows(part * part)
        above = slope > 0.0
        high, low = np.where(above, c, high), np.where(above, low, c)
        step = c - slope / second
        c = np.where((step > low) & (step < high), step, 0.5 * (low + high))
    part = kappa / (1.0 + c * kappa)
    second = 1.0 + 1.0 / (c * c) + 0.5 * add_rows(part * part)
    third = -2.0 / (c * c * c) - add_rows(part * part * part)
    # Steepest descent leaves the saddle along x = third/(6 second) y^2; x = bend y^2/(y^2 + b2) does too.
    bend = b - c
    bent = bend * third > 0.0
    b2 = np.where(bent, 6.0 * bend * second / np.where(bent, third, 1.0), 1.0)
    return _Path(c, np.where(bent, bend, 0.0), b2, np.minimum(np.minimum(c, limit - c), 1.0))


def _integral(b: Array, kappa: Array, path: _Path, steps: int) -> tuple[Array, Array, Array]:
    """Return the integral relative to the value at the saddle point, and the same from every second and fourth node."""
    c = path.c
    h = np.arcsinh(END / path.scale) / steps
    t = np.arange(steps + 1.0)[:, None] * h
    rise = np.exp(t)
    y = path.scale * 0.5 * (rise - 1.0 / rise)
    dy = path.scale * 0.5 * (rise + 1.0 / rise)
    square = y * y
    whole = square + path.b2
    x = path.bend * square / whole
    dx = 2.0 * path.bend * path.b2 * y / (whole * whole) * dy
    # The product of all factors relative to the saddle point: with sigma = x + i y, 1 + sigma kappa/(1 + c kappa).
    # Each turns it by less than half a circle to the side of its sign. Where it passes the negative axis, the root
    # of the product is the negative of the product of the roots.
    real, imaginary = np.ones_like(y), np.zeros_like(y)
    turned = np.zeros(y.shape, dtype=np.bool_)
    for row in kappa:
        part = row / (1.0 + c * row)
        factor_real, factor_imaginary = 1.0 + x * part, y * part
        before = imaginary * part >= 0.0
        real, imaginary = (
            real * factor_real - imaginary * factor_imaginary,
            real * factor_imaginary + imaginary * factor_real,
        )
        turned ^= before & (imaginary * part < 0.0)
    root_real, root_imaginary = root(real, imaginary)
    pole_real, pole_imaginary = 1.0 + x / c, y / c
    real = pole_real * root_real - pole_imaginary * root_imaginary
    imaginary = pole_real * root_imaginary + pole_imaginary * root_real
    size = np.exp((c - b) * x + 0.5 * (x * x - square)) / (real * real + imaginary * imaginary)
    size = np.where(turned, -size, size)
    angle = (c - b + x) * y
    cosine, sine = size * np.cos(angle), size * np.sin(angle)
    # exp(i angle) over real + i imaginary, times ds/i = (dy - i dx) dt.
    value = (cosine * real + sine * imaginary) * dy + (sine * real - cosine * imaginary) * dx
    value[0] *= 0.5
    scale = h / np.pi
    odd, second, fourth = add_rows(value[1::2]), add_rows(value[2::4]), add_rows(value[::4])
    return (odd + second + fourth) * scale, (second + fourth) * (2.0 * scale), fourth * (4.0 * scale)
