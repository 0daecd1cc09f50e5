"""Normal variables that depend on each other through one common factor, rho_ij = l_i l_j.

Given the factor they are independent, and one integral over it remains (C. W. Dunnett and M. Sobel, Biometrika 42
(1955) 258-260, from memory). The integrand is log-concave; its peak is found first, so that far tails are no harder.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.rows import add_rows
from calibrate.reliability.systems.quadrature import add_nodes

Array = npt.NDArray[np.float64]

# Correlations agree with the product of loadings to this.
_AGREES = 1e-12
# A loading beyond leaves so little of the variable's own scatter that the rule below would lose digits: at this one its
# relative error is about 1e-9, at 0.995 some 1e-6.
_MOST = 0.985
_NEWTON = 40
_NODES = np.linspace(-5.6, 5.6, 161)
_STEP = _NODES[1] - _NODES[0]
_BLOCK = 1024


def loadings(correlation: Array) -> tuple[Array, npt.NDArray[np.bool_]]:
    """Return the loadings (k, n) of correlation matrices (k, k, n), and where they describe them, for k >= 3."""
    k = len(correlation)
    size = np.abs(correlation)
    found = np.empty(correlation.shape[1:])
    pairs = [(i, j) for i in range(k) for j in range(i)]
    for i in range(k):
        others = [p for p in pairs if i not in p]
        above = add_rows(np.array([size[i, a] * size[i, b] for a, b in others]))
        below = add_rows(np.array([size[a, b] for a, b in others]))
        found[i] = np.sqrt(np.where(above > 0.0, above / np.where(below > 0.0, below, 1.0), 0.0))
    # The sign is that of the correlation with the variable that loads most.
    first = np.argmax(found, axis=0)
    with_first = np.take_along_axis(correlation, first[None, None, :], axis=0)[0]
    found = np.where(with_first < 0.0, -found, found)
    fits = np.max(np.abs(found), axis=0) <= _MOST
    for i, j in pairs:
        fits &= np.abs(found[i] * found[j] - correlation[i, j]) <= _AGREES
    return found, fits


def one_factor(b: Array, loading: Array) -> tuple[Array, Array]:
    """Return P(all Z_i <= b_i) and its error for b and loadings of shape (k, n)."""
    value, error = np.empty(b.shape[1]), np.empty(b.shape[1])
    for at in range(0, b.shape[1], _BLOCK):
        piece = slice(at, at + _BLOCK)
        value[piece], error[piece] = _block(b[:, piece], loading[:, piece])
    return value, error


def _block(b: Array, loading: Array) -> tuple[Array, Array]:
    own = np.sqrt((1.0 - loading) * (1.0 + loading))
    start, slope = b / own, loading / own
    peak, width = _peak(start, slope)
    t = peak + width * np.sinh(_NODES)[:, None]
    top = _log_integrand(peak, start, slope)
    weight = np.cosh(_NODES)[:, None] * _STEP
    parts = weight * np.exp(_log_integrand(t, start, slope) - top)
    scale = np.exp(top) * width / np.sqrt(2.0 * np.pi)
    every_other = 2.0 * add_nodes(parts[::2])
    full = add_nodes(parts)
    # Halving the step nearly squares the relative error.
    rough = np.abs(full - every_other) / full
    return full * scale, (rough**1.5 + 1e-14) * full * scale


def _log_integrand(t: Array, start: Array, slope: Array) -> Array:
    total = -0.5 * t * t
    for first, by in zip(start, slope, strict=True):
        total = total + special.log_ndtr(first - by * t)
    return total


def _peak(start: Array, slope: Array) -> tuple[Array, Array]:
    """Return where the integrand is largest, and its width there."""
    t = np.zeros(start.shape[1])
    width = np.ones_like(t)
    moving = np.ones(t.shape, dtype=np.bool_)
    for _ in range(_NEWTON):
        rise, bend = -t, np.ones_like(t)
        for first, by in zip(start, slope, strict=True):
            z = first - by * t
            mills = np.exp(-0.5 * z * z - special.log_ndtr(z)) / np.sqrt(2.0 * np.pi)
            rise = rise - by * mills
            bend = bend + by * by * mills * np.maximum(z + mills, 0.0)
        step = np.clip(rise / bend, -3.0, 3.0)
        # Each stops for itself, so that its bits are the same in every batch.
        t = np.where(moving, t + step, t)
        width = np.where(moving, 1.0 / np.sqrt(bend), width)
        moving &= np.abs(step) >= 1e-3
        if not moving.any():
            break
    return t, width
