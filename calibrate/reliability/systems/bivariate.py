"""The bivariate normal distribution, with small relative error in all its tails.

The quadrant beyond two lines is cut along the ray from the origin through its corner into two wedges with one line
each,

    P = V(h, y1) + V(k, y2),
    V(h, y) = 1/(2 pi) exp(-(h^2 + y^2)/2) int_0^inf exp(-y v - v^2/2) h / (h^2 + (y + v)^2) dv,

where y is the distance of the corner from the foot of the perpendicular on the line. For positive h, k both parts are
positive, so that nothing cancels. V is the complement of the function T of D. B. Owen, "Tables for computing bivariate
normal probabilities", Annals of Mathematical Statistics 27 (1956) 1075-1090 (from memory); T serves where V is not
small.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.systems.quadrature import HALF_LINE, HALF_LINE_WEIGHTS, add_nodes

Array = npt.NDArray[np.float64]

FAR = 37.5
"""Bounds are limited to this size; beyond it normal probabilities leave the range of floating point numbers."""
SINGULAR = 1e-14
"""Variables coincide or oppose each other where 1 - |rho| is smaller."""

# Corners nearer to the origin are left to Owen's function.
_NEAR = 0.7
# Situations that are worked on at once.
_BLOCK = 4096


def bivariate(b1: Array, b2: Array, rho: Array) -> Array:
    """Return P(Z1 <= b1, Z2 <= b2) of standard normal variables with correlation rho, each of shape (n,)."""
    b1, b2, rho = np.broadcast_arrays(np.clip(b1, -FAR, FAR), np.clip(b2, -FAR, FAR), rho)
    result = np.empty(b1.shape)
    for at in range(0, b1.size, _BLOCK):
        piece = slice(at, at + _BLOCK)
        result[piece] = _block(b1[piece], b2[piece], rho[piece])
    return result


def _block(b1: Array, b2: Array, rho: Array) -> Array:
    low, high = np.minimum(b1, b2), np.maximum(b1, b2)
    with np.errstate(all="ignore"):
        regular = _lower(low, high, rho)
    # The difference is taken in the tail in which it is small.
    opposed = np.where(
        low + high > 0.0,
        np.where(low < 0.0, special.ndtr(low) - special.ndtr(-high), special.ndtr(high) - special.ndtr(-low)),
        0.0,
    )
    result = np.where(1.0 - rho < SINGULAR, special.ndtr(low), regular)
    return np.where(1.0 + rho < SINGULAR, opposed, result)


def _lower(low: Array, high: Array, rho: Array) -> Array:
    s = np.sqrt((1.0 - rho) * (1.0 + rho))
    result = np.empty_like(low)
    tail = high <= 0.0
    result[tail] = _quadrant(-low[tail], -high[tail], rho[tail], s[tail])
    mixed = (low <= 0.0) & (high > 0.0)
    # P(Z1 <= low) less the part beyond high, unless that is nearly all of it.
    rare = mixed & (rho < 0.0) & (rho * low > high - 2.0 * s)
    result[rare] = _strip(-low[rare], high[rare], rho[rare], s[rare])
    usual = mixed & ~rare
    result[usual] = special.ndtr(low[usual]) - _quadrant(-low[usual], high[usual], -rho[usual], s[usual])
    safe = low > 0.0
    beyond = _quadrant(low[safe], high[safe], rho[safe], s[safe])
    result[safe] = 1.0 - (special.ndtr(-low[safe]) + special.ndtr(-high[safe]) - beyond)
    return result


def _quadrant(h: Array, k: Array, rho: Array, s: Array) -> Array:
    """Return P(Z1 > h, Z2 > k) for h, k >= 0."""
    # A zero must not be a negative one: the sign of a slope hangs on it.
    h, k = h + 0.0, k + 0.0
    first = ((k - h) + (1.0 - rho) * h) / s
    second = ((h - k) + (1.0 - rho) * k) / s
    # With the corner at the origin any ray through the quadrant will do; this is the limit of equal distances.
    middle = np.where((h == 0.0) & (k == 0.0), (1.0 - rho) / s, np.nan)
    return _wedge(h, first, middle) + _wedge(k, second, middle)


def _wedge(h: Array, y: Array, middle: Array) -> Array:
    """Return V(h, y) for h >= 0; ``middle`` is the slope y / h where both are zero, else NaN."""
    slope = np.where(np.isnan(middle), y / h, middle)
    result = 0.5 * special.ndtr(-h) - special.owens_t(h, slope)
    far = (y > 0.0) & (h * h + y * y > _NEAR**2)
    hf, yf = h[far], y[far]
    scale = 1.0 / (1.0 + yf)
    v = HALF_LINE[:, None] * scale
    w = yf + v
    inner = HALF_LINE_WEIGHTS[:, None] * (np.exp(-(yf + 0.5 * v) * v) / (hf * hf + w * w))
    factor = np.exp(-0.5 * (hf * hf + yf * yf)) * hf * scale / (2.0 * np.pi)
    result[far] = factor * add_nodes(inner)
    return np.asarray(result)


def _strip(h: Array, b: Array, rho: Array, s: Array) -> Array:
    """Return P(Z1 > h, Z2 <= b; -rho) for h >= 0 and rho < 0, by the density of Z1 along its tail."""
    start = (b - rho * -h) / s
    steep = -rho / s
    scale = 1.0 / (1.0 + h + steep * (1.0 + np.maximum(-start, 0.0)))
    v = HALF_LINE[:, None] * scale
    inner = HALF_LINE_WEIGHTS[:, None] * np.exp(-(h + 0.5 * v) * v + special.log_ndtr(start - steep * v))
    return np.asarray(np.exp(-0.5 * h * h) / np.sqrt(2.0 * np.pi) * scale * add_nodes(inner))
