"""The failure of a system as disjoint cases: some components fail, some hold, the others do not matter.

Probabilities of disjoint cases add up without the cancellation of inclusion and exclusion. The same cases of cofactors
of the logic give the derivatives: that by beta_i needs the probability that i decides, S(i fails) and not S(i holds),
and that by rho_ij the mean of the second difference of S.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TypeAlias

from calibrate.errors import InputError, Problem
from calibrate.reliability.systems.logic import Sets, absorbed

MOST_CUBES = 500

TRUE: Sets = frozenset({frozenset()})
FALSE: Sets = frozenset()
Sum: TypeAlias = Mapping[Sets, int]
"""Weighted sum of the indicators of coherent systems, each given by its cut sets."""


@dataclass(frozen=True, slots=True)
class Cube:
    """One case.

    Attributes
    ----------
    weight : int
        What it counts.
    failed, held : tuple of int
        Components that fail, and that hold.
    """

    weight: int
    failed: tuple[int, ...]
    held: tuple[int, ...]


def failure(sets: Sets) -> Sum:
    """Return the indicator of failure."""
    return {sets: 1}


def survival(sets: Sets) -> Sum:
    """Return the indicator of survival."""
    return {TRUE: 1, sets: -1}


def deciding(sets: Sets, i: int) -> Sum:
    """Return where component i decides."""
    return _collected([(given(sets, i, True), 1), (given(sets, i, False), -1)])


def deciding_together(sets: Sets, i: int, j: int) -> Sum:
    """Return the second difference of failure by components i and j."""
    terms = [
        (given(given(sets, i, a), j, b), 1 if a == b else -1) for a in (True, False) for b in (True, False)
    ]
    return _collected(terms)


def given(sets: Sets, i: int, failed: bool) -> Sets:
    """Return the cut sets once component i is known to fail or to hold."""
    if failed:
        return absorbed(s - {i} for s in sets)
    return frozenset(s for s in sets if i not in s)


def cubes(terms: Sum) -> list[Cube]:
    """Return disjoint cases whose weights make up the sum.

    Raises
    ------
    InputError
        There are more than 500 of them.
    """
    found: list[Cube] = []
    _split(terms, (), (), found)
    return found


def _collected(terms: list[tuple[Sets, int]]) -> Sum:
    total: Counter[Sets] = Counter()
    for sets, weight in terms:
        total[sets] += weight
    return {sets: weight for sets, weight in total.items() if weight and sets != FALSE}


def _split(terms: Sum, failed: tuple[int, ...], held: tuple[int, ...], found: list[Cube]) -> None:
    if not terms:
        return
    open_terms = [sets for sets in terms if sets != TRUE]
    if not open_terms:
        found.append(Cube(terms[TRUE], failed, held))
        if len(found) > MOST_CUBES:
            raise InputError(
                Problem(
                    f"The failure of the system falls into more than {MOST_CUBES} cases.",
                    suggestion="Combine components beforehand, or estimate the system by simulation.",
                )
            )
        return
    i = _most_used(open_terms)
    for fails in (True, False):
        rest = _collected([(given(sets, i, fails), weight) for sets, weight in terms.items()])
        _split(rest, (*failed, i) if fails else failed, held if fails else (*held, i), found)


def _most_used(terms: list[Sets]) -> int:
    """Return the component in most cut sets, small ones counting more; of equal ones the first."""
    count: Counter[int] = Counter()
    for sets in terms:
        for s in sets:
            for i in s:
                count[i] += 1 << max(0, 20 - len(s))
    return min(count, key=lambda i: (-count[i], i))
