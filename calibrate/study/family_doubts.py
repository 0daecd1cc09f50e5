"""Reservations about the family of a fitted variable: what the sample speaks against, and what it supports better."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.errors import Doubt, InputError
from calibrate.fitting import Fit, compare
from calibrate.fitting.fit_tests import FitTests
from calibrate.fitting.fits import CLOSE_AICC
from calibrate.study.model import Variable

RIVALS = ("normal", "lognormal", "gumbel", "gumbel_min", "weibull", "gamma", "frechet")
"""Families against which a single named one is held."""


def rival_doubts(variable: Variable, chosen: Fit) -> list[Doubt]:
    """Report a family that was named alone although the sample supports another one better."""
    if len(variable.families) != 1 or variable.method not in ("likelihood", "moments") or chosen.fixed:
        return []
    try:
        best = compare(
            chosen.observations, [f for f in RIVALS if f != chosen.family], method=variable.method
        ).best
    except InputError:
        return []
    if best is None or chosen.aicc - best.aicc <= CLOSE_AICC:
        return []
    text = (
        f"The study names {chosen.family}; the sample supports {best.family} better (AICc smaller by "
        f"{chosen.aicc - best.aicc:.1f}). The choice may have reasons that the sample does not show; it was kept."
    )
    return [Doubt("not-recommended", text, f"variables.{variable.name}")]


def choice_doubts(variable: Variable, chosen: Fit, tests: Mapping[str, FitTests]) -> list[Doubt]:
    """Doubt a family that the sample speaks against, and one whose tail is on the wrong side for the role."""
    where = f"variables.{variable.name}"
    doubts = []
    found = tests.get(chosen.family)
    if found is not None and found.rejected("anderson_darling"):
        doubts.append(
            Doubt(
                "family-rejected",
                f"The sample speaks against the family {chosen.family}: an Anderson–Darling distance as large as A² = "
                f"{found.statistics['anderson_darling']:.3g} has a probability of "
                f"{found.p_values['anderson_darling']:.2g} under it.",
                where,
            )
        )
    by_role = {"resistance": "lower_tail", "action": "upper_tail"}.get(variable.role)
    tail = f"{variable.tail}_tail" if variable.tail else by_role
    if (
        found is not None
        and tail is not None
        and found.rejected(tail)
        and not found.rejected("anderson_darling")
    ):
        side = tail.partition("_")[0]
        doubts.append(
            Doubt(
                "tail-rejected",
                f"In the {side} tail, where failures come from, the sample speaks against the family {chosen.family} "
                f"(p = {found.p_values[tail]:.2g}), although over the whole range it does not.",
                where,
            )
        )
    return doubts
