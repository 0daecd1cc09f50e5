"""The trivariate normal distribution as an integral of the bivariate one, along the variable with the rarest event."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.systems.bivariate import bivariate
from calibrate.reliability.systems.planes import conditional
from calibrate.reliability.systems.quadrature import (
    HALF_LINE,
    HALF_LINE_WEIGHTS,
    UNIT,
    UNIT_WEIGHTS,
    add_nodes,
)

Array = npt.NDArray[np.float64]

_BLOCK = 512
# Correlation of the two others from which on their change of roles is a bend, of one with the first from which on it
# passes quickly, and how far these places are looked for.
_NEARLY, _CLOSE, _WITHIN = 0.8, 0.9, 25.0
# Part of the change from every other node to all that is reported as error.
_LESS = 0.3


def trivariate(b: Array, correlation: Array) -> tuple[Array, Array]:
    """Return P(all Z_i <= b_i) and its error for b (3, n) and correlation (3, 3, n)."""
    value, error = np.empty(b.shape[1]), np.empty(b.shape[1])
    for at in range(0, b.shape[1], _BLOCK):
        piece = slice(at, at + _BLOCK)
        value[piece], error[piece] = _block(b[:, piece], correlation[:, :, piece])
    return value, error


def _block(b: Array, correlation: Array) -> tuple[Array, Array]:
    pick = np.argmin(b, axis=0)
    order = (pick + np.arange(3)[:, None]) % 3
    b = np.take_along_axis(b, order, axis=0)
    r = np.take_along_axis(correlation, order[:, None, :], axis=0)
    r = np.take_along_axis(r, order[None, :, :], axis=1)
    # Where even the rarest event is likely, its complement is integrated.
    likely = b[0] > 0.0
    sign = np.where(likely, -1.0, 1.0)
    tail, error = _tail(np.array([sign * b[0], b[1], b[2]]), sign * r[0, 1], sign * r[0, 2], r[1, 2])
    both = bivariate(b[1], b[2], r[1, 2])
    return np.where(likely, np.maximum(both - tail, 0.0), tail), error


def _tail(b: Array, r01: Array, r02: Array, r12: Array) -> tuple[Array, Array]:
    """Return the probability for b[0] <= 0."""
    first = -b[0]
    one = np.ones_like(first)
    matrix = np.array([[one, r01, r02], [r01, one, r12], [r02, r12, one]])
    beta = np.array([first, -b[1], -b[2]])
    scale = 1.0 / (1.0 + first)
    breaks = np.sort(_breaks(beta, matrix, scale), axis=0)
    full, every_other = _half_line(beta, matrix, breaks[-1], scale)
    begin = np.zeros_like(first)
    for end in breaks:
        at = np.flatnonzero(end > begin)
        if at.size:
            more, rough = _interval(beta[:, at], matrix[:, :, at], begin[at], end[at])
            full[at] += more
            every_other[at] += rough
        begin = end
    factor = np.exp(-0.5 * first * first) / np.sqrt(2.0 * np.pi)
    return factor * full, factor * (_LESS * np.abs(full - every_other) + 1e-12 * full)


def _breaks(beta: Array, matrix: Array, scale: Array) -> Array:
    """Return distances along the tail where the integrand turns quickly, (3, n); 0 where there is none.

    Each of the two others passes from sure to impossible within a short way where it nearly coincides with the
    first or opposes it; and where they do so with each other once the first is given, they change roles with a bend.
    """
    start, inner = conditional(beta, matrix, 0)
    further = beta.copy()
    further[0] += 1.0
    slope = conditional(further, matrix, 0)[0] - start
    rho = inner[0, 1]
    opposed = np.where(rho < 0.0, -1.0, 1.0)
    turn = slope[0] - opposed * slope[1]
    gap = -(start[0] - opposed * start[1]) / np.where(turn == 0.0, 1.0, turn)
    places = [np.where((np.abs(rho) > _NEARLY) & (turn != 0.0), gap, 0.0)]
    for j in (1, 2):
        close = np.abs(matrix[0, j]) > _CLOSE
        places.append(np.where(close, beta[j] / np.where(close, matrix[0, j], 1.0) - beta[0], 0.0))
    found = np.array(places)
    return np.where((found > 0.0) & (found < _WITHIN * scale), found, 0.0)


def _half_line(beta: Array, matrix: Array, begin: Array, scale: Array) -> tuple[Array, Array]:
    v = begin + HALF_LINE[:, None] * scale
    parts = HALF_LINE_WEIGHTS[:, None] * scale * _integrand(beta, matrix, v)
    return add_nodes(parts), 2.0 * add_nodes(parts[::2])


def _interval(beta: Array, matrix: Array, begin: Array, end: Array) -> tuple[Array, Array]:
    v = begin + UNIT[:, None] * (end - begin)
    parts = UNIT_WEIGHTS[:, None] * (end - begin) * _integrand(beta, matrix, v)
    return add_nodes(parts), 2.0 * add_nodes(parts[::2])


def _integrand(beta: Array, matrix: Array, v: Array) -> Array:
    """Return the density at a distance v, (nodes, n), into the tail times the probability of the others there."""
    nodes, n = v.shape
    wide = np.array([(beta[0] + v).ravel(), np.tile(beta[1], nodes), np.tile(beta[2], nodes)])
    rest, inner = conditional(wide, np.tile(matrix, (1, 1, nodes)), 0)
    given = bivariate(-rest[0], -rest[1], inner[0, 1]).reshape(nodes, n)
    return np.asarray(np.exp(-(beta[0] + 0.5 * v) * v) * given)
