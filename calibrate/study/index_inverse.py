"""The inverse question in one design situation: which value gives the target index."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.reliability.inverse import Build, Inverse, inverse
from calibrate.study.index_scene import Scene
from calibrate.study.index_varied import Varied, can_be_varied, varied

Array = NDArray[np.float64]

REACHES = (1.3, 2.0, 4.0, 10.0)
"""How far, as a factor, the value is looked for from the present one: near it first."""
MARGIN = 1.2
"""Times the first Newton step that must lie within the first bounds."""


@dataclass(frozen=True, slots=True, eq=False)
class Required:
    """The value that gives the target, in SI units; NaN where there is none.

    Attributes
    ----------
    varied : Varied
    target : float
    value : float
    beta, slope : float
        Index at the value by FORM begun anew, and its derivative by the value.
    size : float
        At the value, in SI units; NaN where the rule sizes nothing.
    lower, upper : float
        Between which values it was looked for.
    evaluations : int
        Of the index, by FORM.
    met : bool
    status : str
        In words; numbers in the unit of what is varied.
    """

    varied: Varied
    target: float
    value: float
    beta: float
    slope: float
    size: float
    lower: float
    upper: float
    evaluations: int
    met: bool
    status: str


def default_name(scene: Scene) -> str:
    """Return what is varied where nothing is named: the size if there is one, else the only free factor.

    Raises
    ------
    InputError
        There is neither.
    """
    if scene.model.size_name is not None:
        return scene.model.size_name
    names = can_be_varied(scene)
    free = [f.name for f in scene.study.factors if not f.held and f.name in names]
    if len(free) == 1:
        return free[0]
    has = "no free factor enters it" if not free else f"{len(free)} free factors enter it"
    text = f"Rule '{scene.rule.name}' sizes nothing and {has}; say with --vary what is to give the target."
    raise InputError(Problem(text, suggestion=f"Known: {', '.join(names)}."))


def required(scene: Scene, name: str | None, target: float, size: float) -> Required:
    """Return the value with which the situation has exactly the target.

    Parameters
    ----------
    scene : Scene
    name : str, optional
        See :func:`default_name`.
    target : float
    size : float
        The present size in SI units; NaN where there is none.

    Raises
    ------
    InputError
        The name cannot be varied, or there is no present value to begin at.

    Notes
    -----
    Newton steps on the exact derivative within a bracket, see :func:`calibrate.reliability.inverse.inverse`.
    """
    what = varied(scene, default_name(scene) if name is None else name, size)
    factor = what.unit.factor
    start = what.present / factor
    if not (math.isfinite(start) and start != 0.0):
        has = "is 0 at present" if start == 0.0 else "has no present value"
        raise InputError(f"{what.name} {has}, so that there is nowhere to begin; vary something else.")

    def build(p: Array) -> tuple[Array, Array]:
        try:
            answer, slope = what.evaluated(p * factor)
        except InputError:
            return np.full(1, np.nan), np.full(1, np.nan)
        return answer.beta, slope * factor

    found, low, high, calls = _widening(build, target, start)
    met, value = bool(found.met[0]), float(found.p[0])
    text = str(found.status[0])
    if what.unit.text and not met:
        text += f" ({what.name} in {what.unit.text})"
    beta, slope, size_there = math.nan, math.nan, math.nan
    if met:
        answer, slopes = what.evaluated(np.array([value * factor]))
        beta, slope = float(answer.beta[0]), float(slopes[0])
        sizes = answer.found.size
        size_there = math.nan if sizes is None else float(sizes[0])
        calls += 1
    return Required(
        what, target, value * factor, beta, slope, size_there, low * factor, high * factor, calls, met, text
    )


def _widening(build: Build, target: float, start: float) -> tuple[Inverse, float, float, int]:
    """Look for the value between bounds on both sides of the start, narrow ones first where a step stays within."""
    with np.errstate(all="ignore"):
        (beta,), (slope,) = build(np.array([start]))
        step = start + MARGIN * (target - beta) / slope
        need = max(step / start, start / step) if step / start > 0.0 else math.inf
    likely = [r for r in REACHES if not r < need] or [REACHES[-1]]
    calls = 1
    for reach in likely:
        low, high = sorted((start / reach, start * reach))
        found = inverse(build, target, start, low, high)
        calls += found.evaluations
        if found.met[0]:
            break
    return found, low, high, calls
