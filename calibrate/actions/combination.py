"""Combination of variable actions: repetitions, presence, and the alternatives of which one action leads.

Each action is a row of independent rectangular pulses (Ferry Borges and Castanheta): the reference period consists
of its basic intervals, in each of which it has one value or is absent.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations, pairwise
from typing import Literal

import numpy as np

from calibrate.actions.intermittent import intermittent
from calibrate.actions.periods import in_years
from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError, Problem

Accompanying = Literal["leading interval", "point in time"]

NOT_NEGATIVE = 1e-3
"""Share of negative values of an intermittent action, up to which nothing is said about counting them as absence."""


@dataclass(frozen=True, slots=True, eq=False)
class Action:
    """A variable action as a row of pulses.

    Parameters
    ----------
    distribution : Distribution
        Of the value in one basic interval, when the action is present there.
    repetitions : float
        Number of basic intervals in the reference period, at least 1.
    presence : float
        Probability of being present in a basic interval, above 0 and at most 1.
    name : str
        For messages and tables.
    duration : float, optional
        Mean time that the action lasts when it is present, in years, if it is known; otherwise it is taken to fill
        the basic interval.

    Raises
    ------
    InputError
        A number is out of range, or the distribution has no scatter.
    """

    distribution: Distribution
    repetitions: float
    presence: float = 1.0
    name: str = "action"
    duration: float | None = None

    def __post_init__(self) -> None:
        problems = []
        if not 1.0 <= self.repetitions < np.inf:
            problems.append(f"the number of repetitions is at least 1; got {self.repetitions:g}.")
        if not 0.0 < self.presence <= 1.0:
            problems.append(f"the probability of presence is above 0 and at most 1; got {self.presence:g}.")
        if self.duration is not None and not 0.0 < self.duration < np.inf:
            problems.append(f"the duration is positive; got {self.duration:g}.")
        if self.distribution.is_constant:
            problems.append("a variable action has scatter; write a constant into the limit state.")
        if problems:
            raise InputError(Problem(f"{self.name}: {p}") for p in problems)

    @property
    def point_in_time(self) -> Distribution:
        """Value in one basic interval, zero while absent."""
        return self.maximum(1.0)

    def maximum(self, repetitions: float | None = None) -> Distribution:
        """Return the maximum over some repetitions, by default those of the reference period."""
        n = self.repetitions if repetitions is None else repetitions
        return intermittent(self.distribution, self.presence, n)


@dataclass(frozen=True, slots=True, eq=False)
class Alternative:
    """One way in which the largest combined effect may come about.

    Attributes
    ----------
    leading : int
        Which action leads, in the order in which they were given.
    repetitions : tuple of float
        For each action, of how many of its repetitions the maximum is taken.
    distributions : tuple of Distribution
        These maxima.
    """

    leading: int
    repetitions: tuple[float, ...]
    distributions: tuple[Distribution, ...]


def turkstra(
    actions: Sequence[Action], accompanying: Accompanying = "leading interval"
) -> tuple[Alternative, ...]:
    """Return one alternative for each leading action, in the order of the actions.

    Parameters
    ----------
    actions : sequence of Action
        Two or more; one action leads alone.
    accompanying : {"leading interval", "point in time"}
        Values of the actions that do not lead. ``leading interval``: with the actions in the order of rising
        repetitions, those before the leading one have the value of one interval, each one after it the maximum of
        the repetitions within one interval of its predecessor. ``point in time``: all have the value of one
        interval, which is Turkstra's own rule and never the safer one.

    Raises
    ------
    InputError
        There is no action, or the rule is unknown.

    Notes
    -----
    C. J. Turkstra, "Theory of structural design decisions" (1970); the repetition numbers r1, r2/r1, r3/r2, ... of
    J. Ferry Borges and M. Castanheta, "Structural safety" (1971), as in JCSS Probabilistic Model Code, part 1 and EN
    1990:2002, C.10 (all from memory). Each alternative occurs at some time in the reference period, if the basic
    intervals are nested; the largest effect is therefore at least as large as each of them.
    """
    order = _order(actions)
    if accompanying not in ("leading interval", "point in time"):
        raise InputError(
            f"Accompanying actions follow 'leading interval' or 'point in time'; got '{accompanying}'."
        )
    found = []
    for leading in range(len(actions)):
        place = order.index(leading)
        chain = order[place:] if accompanying == "leading interval" else [leading]
        found.append(_alternative(actions, leading, chain))
    return tuple(found)


def repetition_alternatives(actions: Sequence[Action]) -> tuple[Alternative, ...]:
    """Return all 2**(m - 1) repetition combinations of m actions, in which each action is maximised or not.

    Those of :func:`turkstra` are among them; with two actions there are no others.

    Notes
    -----
    R. Rackwitz and B. Fiessler, "Structural reliability under combined random load sequences" (1978, from memory).
    The action with most repetitions is always maximised; the repetitions of each maximised action are counted within
    one interval of the last one maximised before it.

    Raises
    ------
    InputError
        There is no action.
    """
    order = _order(actions)
    *others, last = order
    return tuple(
        _alternative(actions, (*chosen, last)[0], [*chosen, last])
        for size in range(len(others), -1, -1)
        for chosen in combinations(others, size)
    )


def _order(actions: Sequence[Action]) -> list[int]:
    if not actions:
        raise InputError("A combination needs at least one variable action.")
    return sorted(range(len(actions)), key=lambda i: actions[i].repetitions)


def leading_repetitions(repetitions: Sequence[float], leading: int) -> tuple[float, ...]:
    """Return of how many of its repetitions each action takes the maximum while one leads.

    Parameters
    ----------
    repetitions : sequence of float
        In the reference period, one for each action.
    leading : int
        Which action leads: it has all of its repetitions; actions with fewer have one, and each one with more those
        within one interval of its predecessor (see :func:`turkstra`, ``leading interval``).
    """
    order = sorted(range(len(repetitions)), key=lambda i: repetitions[i])
    return _chained(repetitions, order[order.index(leading) :])


def _chained(repetitions: Sequence[float], chain: Sequence[int]) -> tuple[float, ...]:
    found = [1.0] * len(repetitions)
    before = 1.0
    for i in chain:
        found[i] = repetitions[i] / before
        before = repetitions[i]
    return tuple(found)


def _alternative(actions: Sequence[Action], leading: int, chain: Sequence[int]) -> Alternative:
    """Return the alternative that maximises the actions of the chain, each within an interval of the one before."""
    repetitions = _chained([a.repetitions for a in actions], chain)
    maxima = tuple(a.maximum(n) for a, n in zip(actions, repetitions, strict=True))
    return Alternative(leading, repetitions, maxima)


def combination_doubts(
    actions: Sequence[Action], reference_period: float, where: str = "combination"
) -> tuple[Doubt, ...]:
    """Return reservations about what was declared of the actions.

    Parameters
    ----------
    actions : sequence of Action
    reference_period : float
        Years.
    where : str
        What the doubts concern; the name of the action is appended.
    """
    doubts = []
    for action in actions:
        place = f"{where}.{action.name}"
        lasting = action.duration
        if lasting is not None:
            present = action.presence * action.repetitions * lasting
            if present > reference_period * (1.0 + 1e-9):
                text = (
                    f"{action.name}: {action.repetitions:g} repetitions, present with probability "
                    f"{action.presence:g} and each lasting {in_years(lasting)}, fill {in_years(present)}, more than "
                    f"the reference period of {in_years(reference_period)}. One of the numbers is for another period."
                )
                doubts.append(Doubt("presence-beyond-period", text, place))
        negative = float(np.max(action.distribution.cdf(0.0)))
        if action.presence < 1.0 and negative > NOT_NEGATIVE:
            text = (
                f"{action.name}: {100.0 * negative:.2g} % of the values when present are negative; they count as "
                "absence. A family without negative values would say what is meant."
            )
            doubts.append(Doubt("negative-when-present", text, place))
    ordered = [actions[i] for i in _order(actions)]
    for slow, fast in pairwise(ordered):
        ratio = fast.repetitions / slow.repetitions
        if abs(ratio - round(ratio)) > 1e-6 * ratio:
            text = (
                f"{fast.name} repeats {ratio:.4g} times within one interval of {slow.name}, which is not a whole "
                "number: the intervals are not nested, and the exact combination becomes an interpolation."
            )
            doubts.append(Doubt("intervals-not-nested", text, where))
    return tuple(doubts)
