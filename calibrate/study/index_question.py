"""What may be asked of one design situation."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.factors import NONE
from calibrate.reliability.simulation import METHODS
from calibrate.reliability.solvers import SOLVERS
from calibrate.study.index_curve import COUNT
from calibrate.study.model import Study

ON = ("present", "optimal", "proposed")


@dataclass(frozen=True, slots=True)
class Asked:
    """What is asked of one situation.

    Attributes
    ----------
    rule : str or None
        None for the only one.
    situation : int or None
        From 1; None for the only one.
    factors : mapping of str to float
        Replace those of the set.
    on : str
        ``present``, or ``optimal`` or ``proposed``, for which the study is calibrated first.
    leading : str or None
        Leading action, where the worst alternative is not wanted.
    method : str
        Of simulation, or ``none``.
    cov : float
        Coefficient of variation of the simulated failure probability.
    solvers : tuple of str
        Further ways to the design point.
    against : str or None
        What the index is drawn against.
    low, high : str or None
        Ends of its range, with a unit or in its own; None for 30 % to either side.
    count : int
        Values between them.
    target : float or None
        Index for which a value is looked for.
    vary : str or None
        Of what; None for the size, or the only free factor.
    """

    rule: str | None = None
    situation: int | None = None
    factors: Mapping[str, float] = field(default_factory=dict)
    on: str = "present"
    leading: str | None = None
    method: str = "importance sampling"
    cov: float = 0.02
    solvers: tuple[str, ...] = ()
    against: str | None = None
    low: str | None = None
    high: str | None = None
    count: int = COUNT
    target: float | None = None
    vary: str | None = None


def check_question(study: Study, asked: Asked) -> None:
    """Refuse what can be seen to be wrong before anything is computed.

    Raises
    ------
    InputError
        With everything that is wrong.
    """
    problems = []
    names = [f.name for f in study.factors]
    for name, value in asked.factors.items():
        if name not in names:
            problems.append(Problem(f"There is no factor '{name}'.", suggestion=did_you_mean(name, names)))
        elif not (math.isfinite(value) and value > 0.0):
            problems.append(Problem(f"Factor '{name}' is {value:g}; it must be above zero."))
    if asked.on not in ON:
        problems.append(Problem(f"--on is '{asked.on}'; it must be one of {', '.join(ON)}."))
    problems += [
        Problem(f"There is no solver '{name}'.", suggestion=f"Known: {', '.join(SOLVERS)}.")
        for name in asked.solvers
        if name not in SOLVERS
    ]
    if asked.method not in (*METHODS, NONE):
        known = f"Known: {', '.join(METHODS)}, {NONE}."
        problems.append(Problem(f"There is no method of simulation '{asked.method}'.", suggestion=known))
    if not 0.0 < asked.cov < 1.0:
        problems.append(Problem(f"--cov is {asked.cov:g}; it must lie between 0 and 1."))
    if asked.target is not None and not math.isfinite(asked.target):
        problems.append(Problem(f"--target is {asked.target:g}; it must be a finite number."))
    if asked.vary is not None and asked.target is None:
        problems.append(
            Problem("--vary belongs to an inverse question.", suggestion="Add --target, such as 3.8.")
        )
    if asked.against is None and (asked.low is not None or asked.high is not None):
        option = "--from" if asked.low is not None else "--to"
        problems.append(Problem(f"{option} belongs to a curve.", suggestion="Add --against with a name."))
    if problems:
        raise InputError(problems)
