"""The index of one design situation against one thing that is varied, all values as one batch."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem
from calibrate.reliability.second_order import second_order
from calibrate.study.index_scene import Evaluated
from calibrate.study.index_varied import Varied
from calibrate.units import split_value

Array = NDArray[np.float64]

COUNT, MOST = 21, 2001
SPREAD = 0.3
"""Part of the present value by which it is varied to both sides, where no range is given."""
NO_MODEL = "no distribution"


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """The index for several values of what is varied; NaN where there is none.

    Attributes
    ----------
    varied : Varied
    values : array (k,)
        In SI units, rising.
    beta, slope : array (k,)
        By FORM, and its derivative by the value.
    second_order : array (k,)
        From the exact probability beyond the fitted paraboloid.
    sound : bool array (k,)
        Where nothing was seen that speaks against the second order.
    size : array (k,) or None
        In SI units; None where the rule sizes nothing.
    status : array of str (k,)
    governing : tuple of str
        Leading action of the governing alternative; empty texts without combination.
    answer : Evaluated
        Of the values that have a model, whose places are ``rows``.
    rows : int array
    """

    varied: Varied
    values: Array
    beta: Array
    slope: Array
    second_order: Array
    sound: NDArray[np.bool_]
    size: Array | None
    status: NDArray[Any]
    governing: tuple[str, ...]
    answer: Evaluated | None
    rows: NDArray[np.intp]


def in_si(text: str, option: str, what: Varied) -> float:
    """Return a value as a user types it, with a unit or in that of what is varied, in SI units.

    Raises
    ------
    InputError
        It is no number, or its unit is of another dimension.
    """
    unit = what.unit
    shown = f", in {unit.text}" if unit.text else ""
    try:
        split = split_value(text)
    except InputError as error:
        raise InputError(Problem(p.message, option, None, p.suggestion) for p in error.problems) from None
    if split is not None:
        number, own = split
        if not own.dimension.agrees(unit.dimension):
            text = f"'{text}' is {own.dimension.describe()}; {what.name} is {unit.dimension.describe()}."
            raise InputError(Problem(text, option))
        return number * own.factor
    try:
        number = float(text)
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        hint = f"Write a value of {what.name}{shown}."
        raise InputError(Problem(f"'{text}' is no number.", option, None, hint))
    return number * unit.factor


def values_between(what: Varied, low: str | None, high: str | None, count: int) -> Array:
    """Return the values of a curve in SI units, by default 30 % to both sides of the present one.

    Raises
    ------
    InputError
        The range is empty or cannot be guessed, or the count is out of range.
    """
    if not 2 <= count <= MOST:
        raise InputError(f"--count is {count}; it must lie between 2 and {MOST}.")
    ends = [
        math.nan if text is None else in_si(text, option, what)
        for text, option in ((low, "--from"), (high, "--to"))
    ]
    width = SPREAD * abs(what.present)
    guess = (what.present - width, what.present + width)
    for k, (end, option) in enumerate(zip(ends, ("--from", "--to"), strict=True)):
        if math.isnan(end):
            if not width > 0.0:
                has = "has no present value" if math.isnan(what.present) else "is 0 at present"
                raise InputError(f"{what.name} {has}, so that no range can be guessed; give {option}.")
            ends[k] = guess[k]
    first, last = ends
    if not first < last:
        shown = [
            f"{end / what.unit.factor:g}{f' {what.unit.text}' if what.unit.text else ''}" for end in ends
        ]
        raise InputError(f"The range of {what.name} runs from {shown[0]} to {shown[1]}; it must rise.")
    return np.linspace(first, last, count)


def curve(what: Varied, values: Array) -> Curve:
    """Return the index for each value, in SI units."""
    k = values.size
    beta, slope, second = (np.full(k, np.nan) for _ in range(3))
    sound = np.zeros(k, dtype=np.bool_)
    status = np.full(k, "", dtype=object)
    rows, answer, by = _with_model(what, values, status)
    governing = [""] * k
    size = None if what.model.size_name is None else np.full(k, np.nan)
    if answer is not None:
        beta[rows], slope[rows], status[rows] = answer.beta, by, answer.status
        for row, name in zip(rows, answer.governing(), strict=True):
            governing[row] = name
        if size is not None and answer.found.size is not None:
            size[rows] = answer.found.size
        for _, problem, reliability, at in answer.groups():
            curved = second_order(problem, reliability)
            second[rows[at]], sound[rows[at]] = curved.beta, curved.sound
    return Curve(what, values, beta, slope, second, sound, size, status, tuple(governing), answer, rows)


def _with_model(
    what: Varied, values: Array, status: NDArray[Any]
) -> tuple[NDArray[np.intp], Evaluated | None, Array | None]:
    """Evaluate all values at once; where that is refused, those that are not refused alone."""
    everywhere = np.arange(values.size)
    try:
        return everywhere, *what.evaluated(values)
    except InputError:
        pass
    good = []
    for j in everywhere:
        try:
            what.evaluated(values[j : j + 1])
        except InputError as error:
            # The situation that the message counts is the value itself.
            status[j] = f"{NO_MODEL}: {error.problems[0].message.replace(' in situation 1', '')}"
        else:
            good.append(j)
    rows = np.array(good, dtype=np.intp)
    return rows, *((None, None) if not good else what.evaluated(values[rows]))
