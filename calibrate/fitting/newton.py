"""The largest value of a smooth function of one to three coordinates, with exact gradient and Hessian."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from calibrate.fitting.jets import Array, Function

MAX_STEPS = 200
LONGEST_STEP = 1.5
"""In the free coordinates, whose natural size is one: scaled data, logarithms of positive parameters."""

CLOSE = 1e-9
"""Decrement below which full Newton steps are taken until the gradient is at rounding level."""

WALL_STEPS = 8
"""Successive steps cut short by the border of the allowed region after which the maximum lies beyond it."""

ACCEPTED = 1e-11
"""Largest decrement at which a point counts as the maximum."""


@dataclass(frozen=True, slots=True, eq=False)
class Maximum:
    """Where the search ended.

    ``decrement`` is g' (-H)^-1 g, twice the gain that a quadratic model still
    promises; infinite where the Hessian is not negative definite.
    """

    t: Array
    value: float
    gradient: Array
    hessian: Array
    decrement: float
    steps: int

    @property
    def converged(self) -> bool:
        """Whether this is a maximum, to rounding."""
        return self.decrement <= ACCEPTED


def maximise(function: Function, start: Array) -> Maximum:
    """Climb by safeguarded Newton steps.

    Directions of positive or vanishing curvature are followed uphill (the
    eigenvalues of the Hessian enter with their modulus), steps are limited in
    length, and shortened until the value rises by a part of what its slope
    promises (Armijo). Near the top full steps are taken as long as the
    gradient falls, which ends at rounding level.

    Parameters
    ----------
    function : callable
        Value (mean log-likelihood), gradient and Hessian; value -inf where
        the point is not allowed.
    start : array, shape (p,)
        A point with a finite value.

    References
    ----------
    .. [1] J. Nocedal, S. J. Wright, Numerical Optimization, 2nd ed., Springer
       2006, sections 3.1 and 3.4.
    """
    t = np.array(start, dtype=np.float64)
    value, gradient, hessian = function(t)
    if not np.isfinite(value):
        return Maximum(t, value, gradient, hessian, np.inf, 0)
    against_wall = 0
    for step_number in range(MAX_STEPS):
        step, decrement = _newton_step(gradient, hessian)
        if decrement < CLOSE:
            return _polished(function, Maximum(t, value, gradient, hessian, decrement, step_number))
        moved, cut = _line_search(function, t, value, gradient, step)
        against_wall = against_wall + 1 if cut else 0
        if moved is None or against_wall == WALL_STEPS:
            return Maximum(t, value, gradient, hessian, np.inf, step_number)
        t, value, gradient, hessian = moved
    return Maximum(t, value, gradient, hessian, _newton_step(gradient, hessian)[1], MAX_STEPS)


def _newton_step(gradient: Array, hessian: Array) -> tuple[Array, float]:
    if not (np.all(np.isfinite(gradient)) and np.all(np.isfinite(hessian))):
        return np.zeros_like(gradient), np.inf
    # Coordinates of unit curvature: in the sample's own, a tiny scatter makes a sharp maximum look singular.
    unit = np.sqrt(np.abs(np.diag(hessian)))
    unit = 1.0 / np.where(unit > 0.0, unit, 1.0)
    eigenvalues, vectors = np.linalg.eigh(-hessian * np.outer(unit, unit))
    largest = max(float(np.max(np.abs(eigenvalues))), 1e-300)
    sizes = np.maximum(np.abs(eigenvalues), 1e-10 * largest)
    along = vectors.T @ (unit * gradient)
    step = unit * (vectors @ (along / sizes))
    definite = bool(eigenvalues[0] > 1e-13 * largest)
    decrement = float(np.sum(along**2 / sizes)) if definite else np.inf
    length = float(np.max(np.abs(step)))
    return step * min(1.0, LONGEST_STEP / length) if length > 0 else step, decrement


def _line_search(
    function: Function, t: Array, value: float, gradient: Array, step: Array
) -> tuple[tuple[Array, float, Array, Array] | None, bool]:
    """Return the next point (None if the value rises nowhere) and whether the border cut the step short."""
    promised = float(gradient @ step)
    if not promised > 0.0:
        return None, False
    share, cut = 1.0, False
    for _ in range(40):
        candidate = t + share * step
        new = function(candidate)
        if not np.isfinite(new[0]):
            cut = True
        elif new[0] >= value + 1e-4 * share * promised:
            return (candidate, *new), cut
        share *= 0.5
    return None, cut


def _polished(function: Function, best: Maximum) -> Maximum:
    for _ in range(8):
        step, _ = _newton_step(best.gradient, best.hessian)
        t = best.t + step
        value, gradient, hessian = function(t)
        # A step that lowers the value by more than rounding has left the hill.
        if not np.isfinite(value) or value < best.value - 1e-9 * (1.0 + abs(best.value)):
            break
        _, decrement = _newton_step(gradient, hessian)
        if not decrement < 0.25 * best.decrement:
            break
        best = Maximum(t, value, gradient, hessian, decrement, best.steps + 1)
    return best
