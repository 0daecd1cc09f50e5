"""Which parameters of a family are estimated and which are fixed, checked before anything is computed."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from calibrate.distributions import family
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.model import Model


@dataclass(frozen=True, slots=True)
class Settled:
    """Fixed parameters with their values, and the names of the others in the family's order."""

    fixed: Mapping[str, float]
    free: tuple[str, ...]


def settle(model: Model, fixed: Mapping[str, Any], estimate: tuple[str, ...]) -> Settled:
    """Return what is fixed and what is free.

    Raises
    ------
    InputError
        An unknown name, a value outside its domain, a parameter both fixed
        and estimated, one that cannot be estimated, one that must be settled,
        or nothing left to estimate; all at once.
    """
    name = model.family
    problems = [
        Problem(f"The family '{name}' has no parameter '{p}'.", suggestion=did_you_mean(p, model.names))
        for p in dict.fromkeys((*fixed, *estimate))
        if p not in model.names
    ]
    if problems:
        raise InputError(problems)
    for p in estimate:
        if p in fixed:
            problems.append(Problem(f"The parameter '{p}' of '{name}' is both fixed and to be estimated."))
        elif p in model.closed:
            problems.append(
                Problem(f"The parameter '{p}' of '{name}' cannot be estimated.", suggestion="Give its value.")
            )
    values = dict(model.preset)
    for p, value in fixed.items():
        number = _number(value)
        domain = next(q.domain for q in family(name).parameters if q.name == p)
        if number is None or not bool(domain.contains(np.asarray(number))):
            problems.append(Problem(f"The parameter '{p}' of '{name}' must be {domain}; got {value!r}."))
        else:
            values[p] = number
    problems += [
        Problem(
            f"The family '{name}' needs its {p}.",
            suggestion=f"Fix it ({p} = ...), or ask for it to be estimated.",
        )
        for p in model.asked
        if p not in fixed and p not in estimate
    ]
    free = tuple(p for p in model.names if p not in values and p not in fixed)
    if not free:
        problems.append(Problem(f"All parameters of '{name}' are fixed; nothing is left to estimate."))
    if problems:
        raise InputError(problems)
    return Settled(values, free)


def _number(value: Any) -> float | None:
    if isinstance(value, bool | np.bool_):
        return None
    try:
        number = float(value)
    except (TypeError, ValueError):
        return None
    return None if math.isnan(number) else number
