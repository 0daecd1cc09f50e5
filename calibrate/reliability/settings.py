"""What a person may set about FORM."""

from __future__ import annotations

from dataclasses import dataclass

REACH = 15.0
"""Largest distance from the origin of standard normal space at which anything is looked for."""


@dataclass(frozen=True, slots=True)
class FormSettings:
    """Settings of FORM; the defaults suit every use that is known.

    Attributes
    ----------
    tolerance : float
        The fast iteration ends when a step in u is shorter; beta is of second order in the error of u.
    passes : int
        Evaluations of limit state and gradient after which the fast iteration hands a situation to the search.
    search_passes : int
        Evaluations after which the search gives a start up.
    verify : bool
        Whether each result of the fast iteration is checked for signs of a nearer design point. Without it only
        situations that did not converge are searched.
    several : float
        Further design points are reported when the probability Phi(-beta) of one exceeds this part of the first's.
    chunk : int or None
        Situations per piece of work; None lets the engine choose. No result depends on it.
    """

    tolerance: float = 2e-6
    passes: int = 20
    search_passes: int = 80
    verify: bool = True
    several: float = 0.1
    chunk: int | None = None
