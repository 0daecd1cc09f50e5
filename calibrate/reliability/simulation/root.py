"""Roots of many functions of one variable at once.

References
----------
.. [1] T. R. Chandrupatla, "A new hybrid quadratic/bisection algorithm for finding the zero of a nonlinear function
   without using derivatives", Advances in Engineering Software 28 (1997).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from calibrate.reliability.simulation.base import Array, Counts

TOLERANCE = 1e-9
# More than bisection alone takes from an interval of length 2 down to the tolerance, with room for bad guesses.
PASSES = 60

Function = Callable[[Array, Counts | None], Array]


def between(
    function: Function, lower: Array, upper: Array, f_lower: Array, f_upper: Array
) -> tuple[Array, Counts]:
    """Return where each function changes its sign, by the method of Chandrupatla [1]_.

    Parameters
    ----------
    function : callable
        ``function(t, at)``: values at t of the functions ``at``; None stands for all of them.
    lower, upper, f_lower, f_upper : array (k,)
        Ends of the intervals and values there, one of them positive and the other not.

    Returns
    -------
    array (k,), int array (k,)
        Roots to within 1e-9, NaN where the function is not defined on the way, and evaluations.
    """
    k = lower.size
    root, passes = np.full(k, np.nan), np.zeros(k, dtype=np.int64)
    at = np.arange(k)
    a, b, fa, fb = upper.copy(), lower.copy(), f_upper.copy(), f_lower.copy()
    t = np.full(k, 0.5)
    with np.errstate(all="ignore"):
        for turn in range(PASSES):
            x = a + t * (b - a)
            f = function(x, None if at.size == k else at)
            passes[at] += 1
            same = (f <= 0.0) == (fa <= 0.0)
            c, fc = np.where(same, a, b), np.where(same, fa, fb)
            b, fb = np.where(same, b, a), np.where(same, fb, fa)
            a, fa = x, f
            best = np.where(np.abs(fa) < np.abs(fb), a, b)
            width = TOLERANCE / np.abs(b - a)
            undefined = np.isnan(f)
            done = undefined | (width > 0.5) | (f == 0.0) | (turn == PASSES - 1)
            root[at[done]] = np.where(undefined, np.nan, best)[done]
            go = ~done
            if not go.any():
                break
            at, a, b, c, fa, fb, fc, width = (v[go] for v in (at, a, b, c, fa, fb, fc, width))
            t = _step(a, b, c, fa, fb, fc, width)
    return root, passes


def _step(a: Array, b: Array, c: Array, fa: Array, fb: Array, fc: Array, width: Array) -> Array:
    """Return the next point as part of the way from a to b: inverse quadratic where it can be trusted, else half."""
    xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
    quadratic = (phi * phi < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
    guess = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    t = np.where(quadratic & np.isfinite(guess), guess, 0.5)
    return np.asarray(np.clip(t, width, 1.0 - width))
