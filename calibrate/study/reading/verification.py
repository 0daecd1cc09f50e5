"""``[verification]``: by what, how exactly and where the reliability index is verified."""

from __future__ import annotations

from typing import Any

from calibrate.errors import nearest
from calibrate.factors import NONE, SECOND_ORDER_ONLY, VerificationSettings
from calibrate.reliability.simulation import METHODS
from calibrate.study.model import Objective, VerificationQuestion
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry
from calibrate.study.reading.reliability_sections import VerificationSection

_PLACE = ("verification",)


def read_verification(reading: Reading, raw: Any, objective: Objective | None) -> VerificationQuestion | None:
    """Return what is asked; with ``index = "verified"`` all situations are verified. None with problems."""
    entry = read_entry(reading, VerificationSection, {} if raw is None else raw, _PLACE)
    content = entry.content if entry.sound else None
    if content is None:
        return None
    known = (*METHODS, SECOND_ORDER_ONLY, NONE)
    if content.method not in known:
        close = nearest(content.method, known)
        reading.problem(
            f"must be one of {', '.join(repr(name) for name in known)}; got the text '{content.method}'.",
            (*_PLACE, "method"),
            f"Did you mean '{close}'?" if close else None,
        )
        return None
    verified = objective is not None and objective.index == "verified"
    if verified and content.method == NONE:
        reading.problem(
            'is "none", but the objective asks for index = "verified".',
            (*_PLACE, "method"),
            'Name a method, or say index = "form".',
        )
        return None
    if verified and content.situations == "chosen":
        reading.problem(
            'is "chosen", but the objective rests on the verified index of every situation.',
            (*_PLACE, "situations"),
            'Say "all", or leave the key out.',
        )
        return None
    settings = VerificationSettings(
        content.method,
        content.cov,
        content.samples,
        verified or content.situations == "all",
        content.points == "sobol",
        content.tolerance,
    )
    return VerificationQuestion(settings, tuple(dict.fromkeys(content.on)))
