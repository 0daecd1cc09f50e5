"""The value of a parameter at which beta meets a target, for many situations at once.

Newton steps with the exact derivative, inside a bracket that every step narrows; where a step leaves the bracket or
steps do not become shorter, the bracket is halved.

References
----------
.. [1] A. Der Kiureghian, Y. Zhang and C.-C. Li, "Inverse reliability problem", Journal of Engineering Mechanics 120
   (1994): the problem. The safeguard is the usual one of root finders.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]
Build = Callable[[Array], tuple[Array, Array]]

# Places between the ends that are looked at where the ends and the start do not show a change of sign.
PLACES = 15
# Steps from a value without beta towards one with beta, of which each halves the way, before it is given up.
RETREATS = 12
# Largest |beta - target| that counts as met where the bracket has no numbers left inside.
ROUNDING = 1e-6

MET, OUT_OF_REACH, NO_BETA, JUMP, TOO_MANY = range(5)


@dataclass(frozen=True, slots=True, eq=False)
class Inverse:
    """What was found for n situations.

    Attributes
    ----------
    p : array (n,)
        Value of the parameter; NaN where the target was not met.
    beta : array (n,)
        Reliability index there.
    slope : array (n,)
        d beta / d p there.
    met : bool array (n,)
        Whether the target was met.
    status : array of str (n,)
        ``target met``, or in words why not.
    evaluations : int
        Calls of the function, each for all situations.
    """

    p: Array
    beta: Array
    slope: Array
    met: Flags
    status: npt.NDArray[Any]
    evaluations: int


@dataclass(slots=True)
class _Seen:
    """The function, and what is known of it in each situation.

    ``below`` and ``above`` are values of p at which beta lies below and above the target, NaN until such were seen.
    """

    build: Build
    target: Array
    below: Array
    above: Array
    least: Array
    most: Array
    missing: Array
    calls: int = 0

    def __call__(self, p: Array, where: Flags) -> tuple[Array, Array]:
        """Return beta - target and its slope at p, and take note of them where asked."""
        beta, slope = (np.asarray(v, dtype=np.float64) for v in self.build(p.copy()))
        if beta.shape != p.shape or slope.shape != p.shape:
            shapes = f"{beta.shape} and {slope.shape}"
            raise InputError(f"the function returned arrays of shape {shapes}; each must be {p.shape}.")
        self.calls += 1
        f = beta - self.target
        finite = where & np.isfinite(beta)
        self.least = np.where(finite, np.fmin(self.least, beta), self.least)
        self.most = np.where(finite, np.fmax(self.most, beta), self.most)
        self.missing = np.where(where & ~np.isfinite(beta) & np.isnan(self.missing), p, self.missing)
        return f, slope


def inverse(
    build: Build,
    target_beta: npt.ArrayLike,
    start: npt.ArrayLike,
    lower: npt.ArrayLike,
    upper: npt.ArrayLike,
    *,
    tolerance: float = 1e-9,
    most: int = 100,
) -> Inverse:
    """Find p with beta(p) = target in each situation, beta rising with p, falling or neither.

    Parameters
    ----------
    build : callable
        ``build(p) -> (beta, slope)``: reliability index and its derivative by p at p of shape (n,), both of that
        shape; NaN where a situation has no beta. An element must depend on its own p only.
    target_beta, start, lower, upper : array (n,) or number
        Target, first value and bounds of p, lower < upper, start between them.
    tolerance : float
        Largest |beta - target| that counts as met.
    most : int
        Largest number of calls of ``build`` after the bracket is known.

    Returns
    -------
    Inverse
        Where several values meet the target, one of them: beside the start where the start and a bound enclose one.

    Raises
    ------
    InputError
        Shapes or values do not fit together.
    """
    target, p, low, high = _arguments(target_beta, start, lower, upper)
    if not tolerance > 0.0:
        raise InputError(f"tolerance = {tolerance}: it must be above 0.")
    n = p.size
    everywhere = np.ones(n, dtype=np.bool_)
    below, above, least, largest, missing = np.full((5, n), np.nan)
    seen = _Seen(build, target, below, above, least, largest, missing)
    with np.errstate(all="ignore"):
        f, slope = seen(p, everywhere)
        best, best_f, best_slope = p.copy(), f, slope
        found = _met(f, tolerance)
        _note(seen, p, f, everywhere)
        for end in (low, high):
            f_end, slope_end = seen(end, everywhere)
            new = ~found & _met(f_end, tolerance)
            best, best_f, best_slope = _kept(new, (end, f_end, slope_end), (best, best_f, best_slope))
            found |= new
            open_ = np.isnan(seen.below) | np.isnan(seen.above)
            _note(seen, end, f_end, open_)
        for share in np.arange(1, PLACES + 1) / (PLACES + 1.0):
            unknown = ~found & (np.isnan(seen.below) | np.isnan(seen.above))
            if not unknown.any():
                break
            place = low + share * (high - low)
            f_place, slope_place = seen(np.where(unknown, place, best), unknown)
            new = unknown & _met(f_place, tolerance)
            best, best_f, best_slope = _kept(new, (place, f_place, slope_place), (best, best_f, best_slope))
            found |= new
            _note(seen, place, f_place, unknown)
        bracketed = ~np.isnan(seen.below) & ~np.isnan(seen.above)
        going = ~found & bracketed
        state = _refined(seen, going, (best, best_f, best_slope), tolerance, most)
    best, best_f, best_slope, code = state
    code = np.where(found, MET, np.where(bracketed, code, OUT_OF_REACH))
    code = np.where(~found & ~bracketed & np.isnan(seen.least), NO_BETA, code)
    return _result(seen, best, best_f, best_slope, code, low, high)


def _arguments(
    target_beta: npt.ArrayLike, start: npt.ArrayLike, lower: npt.ArrayLike, upper: npt.ArrayLike
) -> tuple[Array, Array, Array, Array]:
    given = {"target_beta": target_beta, "start": start, "lower": lower, "upper": upper}
    arrays = {name: np.asarray(v, dtype=np.float64) for name, v in given.items()}
    try:
        shape = np.broadcast_shapes((1,), *(a.shape for a in arrays.values()))
    except ValueError:
        shape = (0, 0)
    if len(shape) != 1:
        shapes = ", ".join(f"{name} {a.shape}" for name, a in arrays.items())
        raise InputError(f"the arguments must be numbers or arrays of one length; their shapes are {shapes}.")
    for name, a in arrays.items():
        if not np.all(np.isfinite(a)):
            raise InputError(f"{name} = {a}: every value must be finite.")
    target, p, low, high = (np.broadcast_to(a, shape) for a in arrays.values())
    if not np.all(low < high):
        j = int(np.argmin(low < high))
        raise InputError(f"lower = {low[j]:g} and upper = {high[j]:g}: lower must be less than upper.")
    inside = (low <= p) & (p <= high)
    if not np.all(inside):
        j = int(np.argmin(inside))
        raise InputError(f"start = {p[j]:g}: it must lie between lower = {low[j]:g} and upper = {high[j]:g}.")
    return target, p, low, high


def _met(f: Array, tolerance: float) -> Flags:
    return np.asarray(np.abs(f) <= tolerance)


def _kept(new: Flags, values: tuple[Array, ...], old: tuple[Array, ...]) -> tuple[Array, Array, Array]:
    a, b, c = (np.where(new, v, o) for v, o in zip(values, old, strict=True))
    return a, b, c


def _note(seen: _Seen, p: Array, f: Array, where: Flags) -> None:
    """Let p be an end of the bracket where asked."""
    seen.below = np.where(where & (f < 0.0), p, seen.below)
    seen.above = np.where(where & (f > 0.0), p, seen.above)


def _refined(
    seen: _Seen, going: Flags, best: tuple[Array, Array, Array], tolerance: float, most: int
) -> tuple[Array, Array, Array, npt.NDArray[Any]]:
    """Narrow the brackets of the situations that go on; return p, beta - target, slope and code."""
    p, f, slope = best
    code = np.full(p.size, TOO_MANY)
    retreats = np.zeros(p.size, dtype=np.int64)
    # Lengths of the last step and of the one before it.
    last = before = np.abs(seen.above - seen.below)
    trial = _next(seen, p, f, slope, before)
    for _ in range(most):
        if not going.any():
            break
        f_trial, slope_trial = seen(np.where(going, trial, p), going)
        lost = going & ~np.isfinite(f_trial)
        moved = going & ~lost
        before, last = np.where(moved, last, before), np.where(moved, np.abs(trial - p), last)
        p, f, slope = _kept(moved, (trial, f_trial, slope_trial), (p, f, slope))
        _note(seen, p, f, moved)
        now = np.abs(seen.above - seen.below)
        # Three narrow brackets side by side have no number between them.
        closed = now <= 3.0 * np.spacing(np.maximum(np.abs(seen.above), np.abs(seen.below)))
        retreats = retreats + lost
        ends = (
            (moved & _met(f, tolerance), MET),
            (moved & closed, np.where(np.abs(f) <= ROUNDING, MET, JUMP)),
            (lost & (retreats > RETREATS), NO_BETA),
        )
        for ended, why in ends:
            code = np.where(going & ended, why, code)
            going = going & ~ended
        following = _next(seen, p, f, slope, before)
        # From a value without beta half the way back to an end of the bracket, where there is one.
        back = np.where(retreats % 2 == 1, seen.below, seen.above)
        trial = np.where(lost, 0.5 * (trial + back), following)
    return p, f, slope, code


def _next(seen: _Seen, p: Array, f: Array, slope: Array, before: Array) -> Array:
    """Return the Newton step where it stays in the bracket and is half as long as the last but one, else the middle."""
    step = -f / slope
    left, right = np.minimum(seen.below, seen.above), np.maximum(seen.below, seen.above)
    good = (p + step > left) & (p + step < right) & (np.abs(step) <= 0.5 * before)
    return np.where(good, p + step, 0.5 * (left + right))


def _result(
    seen: _Seen, p: Array, f: Array, slope: Array, code: npt.NDArray[Any], low: Array, high: Array
) -> Inverse:
    met = code == MET
    text = np.full(p.size, "target met", dtype=object)
    for j in np.flatnonzero(~met):
        between = f"between {low[j]:.6g} and {high[j]:.6g}"
        nowhere = f"no beta at {seen.missing[j]:.6g}"
        gap = "" if np.isnan(seen.missing[j]) else f", {nowhere}"
        text[j] = {
            OUT_OF_REACH: f"out of reach {between}: beta runs from {seen.least[j]:.6g} to {seen.most[j]:.6g}{gap}",
            NO_BETA: nowhere,
            JUMP: f"beta jumps over the target at {seen.below[j]:.6g}",
            TOO_MANY: f"not converged {between}: too many steps",
        }[int(code[j])]
    none = np.where(met, 0.0, np.nan)
    return Inverse(p + none, f + seen.target + none, slope + none, met, text.astype(str), seen.calls)
