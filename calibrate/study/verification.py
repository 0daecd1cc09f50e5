"""The verified index in a study: calibration on it, the table, and what is doubtful."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Doubt
from calibrate.factors import NONE, Calibration, Response, Verification, verify
from calibrate.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]
Solve = Callable[[Response], Calibration]

MOST_PASSES = 8
"""Calibrations after which a correction that still moves the proposed factors is given up."""
SAME = 1e-4
"""Change of proposed factors without step, in parts of their bounds, that counts as none."""
_NAMED = 3


def calibrate_verified(
    study: Study, response: Response, weight: Array, solve: Solve, workers: int
) -> tuple[Response, Calibration, tuple[Doubt, ...]]:
    """Calibrate on FORM corrected by what verification adds, until the proposed factors no longer change.

    Returns
    -------
    response : Response
        With its correction: the verified index less that of FORM.
    calibration : Calibration
    doubts : tuple of Doubt
        Where the factors still changed.

    Notes
    -----
    The samples of a situation come from the same stream in every pass, so that the correction is a smooth function of
    the factors and the passes converge.
    """
    before: Mapping[str, float] | None = None
    calibration = solve(response)
    for _ in range(MOST_PASSES):
        if before is not None and _unchanged(study, before, calibration.proposed.factors):
            return response, calibration, ()
        before = calibration.proposed.factors
        found = verify(
            calibration.proposed.evaluation,
            weight,
            study.verification.settings,
            seed=study.seed,
            workers=workers,
        )
        response = response.corrected(found.difference)
        calibration = solve(response)
    if _unchanged(study, before or {}, calibration.proposed.factors):
        return response, calibration, ()
    text = (
        f"The proposed factors still changed after {MOST_PASSES} rounds of verification: they jump between points of "
        "the lattice that are about as good."
    )
    return response, calibration, (Doubt("verified-index-unsettled", text, "objective.index"),)


def _unchanged(study: Study, before: Mapping[str, float], now: Mapping[str, float]) -> bool:
    for factor in study.factors:
        if factor.held or factor.name not in before:
            continue
        allowed = 0.0 if factor.step is not None else SAME * (factor.upper - factor.lower)
        if abs(now[factor.name] - before[factor.name]) > max(allowed, 1e-12):
            return False
    return bool(before)


def verifications(
    study: Study,
    calibration: Calibration,
    weight: Array,
    workers: int,
    progress: Callable[[float], None] | None = None,
) -> dict[str, Verification]:
    """Return the verification of each set of factors that the study asks for."""
    if study.verification.settings.method == NONE:
        return {}
    return {
        kind: verify(
            getattr(calibration, kind).evaluation,
            weight,
            study.verification.settings,
            seed=study.seed,
            workers=workers,
            progress=progress,
        )
        for kind in study.verification.on
    }


def verification_table(study: Study, found: Mapping[str, Verification]) -> pd.DataFrame | None:
    """Return the columns of verification.csv, one row per set of factors, rule and situation; None without any."""
    import pandas as pd

    if not found:
        return None
    n = study.situations.n
    parts = []
    for kind, v in found.items():
        columns = {
            "factors": np.full(v.form.size, kind, dtype=object),
            "rule": np.repeat(np.array(study.judged, dtype=object), n),
            "situation": np.tile(np.arange(1, n + 1), len(study.judged)),
            "beta_form": v.form,
            "beta_sorm": v.sorm,
            "beta_simulated": v.simulated,
            "beta_lower": v.lower,
            "beta_upper": v.upper,
            "beta_verified": v.verified,
            "basis": v.basis,
            "pf_ratio": v.ratio,
            "cov_pf": v.cov,
            "samples": v.samples,
            "design_points": v.points,
            "beta_series": v.series,
            "sorm_status": v.sorm_status,
            "simulation_status": v.status,
        }
        parts.append(pd.DataFrame(columns))
    return pd.concat(parts, ignore_index=True)


def verification_doubts(study: Study, found: Mapping[str, Verification], weight: Array) -> list[Doubt]:
    """Return what verification says against the index of FORM."""
    doubts: list[Doubt] = []
    for kind, v in found.items():
        there = np.isfinite(v.form) & (weight > 0.0)
        doubts += _large(study, kind, v, there)
        doubts += _at(
            study, there & v.nearer, "nearer-design-point",
            f"With the {kind} factors a design point nearer than the one of FORM was found in {{places}}; the index of "
            "FORM is too high there.",
        )  # fmt: skip
        doubts += _at(
            study, there & (v.points > 1), "several-design-points",
            f"With the {kind} factors there are several design points in {{places}}; FORM counts the nearest only. "
            "The simulation covers all that were found.",
        )  # fmt: skip
        by_rule = np.arange(there.size) < len(study.rules) * study.situations.n
        doubts += _at(
            study, there & by_rule & ~v.sorm_sound & ~v.is_simulated, "no-second-order",
            f"With the {kind} factors there is no sound second-order index in {{places}}, and no simulation: the index "
            "of FORM is unverified there.",
            "Say situations = \"all\" in [verification].",
        )  # fmt: skip
        for reason in dict.fromkeys(v.sorm_status[there & by_rule & ~v.sorm_sound & v.is_simulated]):
            doubts += _at(
                study, there & v.is_simulated & (v.sorm_status == reason), "second-order-limit",
                f"With the {kind} factors the second order does not hold in {{places}}: {reason}. The simulation "
                "stands in its place.",
            )  # fmt: skip
        with np.errstate(invalid="ignore"):
            short = (v.samples > 0) & ~(v.cov <= study.verification.settings.cov * 1.01)
        doubts += _at(
            study, there & short, "simulation-not-exact",
            f"With the {kind} factors the simulation did not reach the wanted cov of "
            f"{study.verification.settings.cov:g} in {{places}}; where it is far from it the index is not counted as "
            "simulated. simulation_status in verification.csv says why.",
            "Raise 'samples' in [verification], or name another method.",
        )  # fmt: skip
    return doubts


def place_of(study: Study, row: int) -> tuple[str, int]:
    """Return rule (or system) and situation of a row."""
    n = study.situations.n
    return study.judged[row // n], row % n + 1


def told_place(study: Study, row: int) -> str:
    """Return a row in words: "rule NAME, situation N" or "system NAME, situation N"."""
    name, situation = place_of(study, row)
    return f"{'rule' if name in study.rules else 'system'} {name}, situation {situation}"


def _large(study: Study, kind: str, v: Verification, there: NDArray[np.bool_]) -> list[Doubt]:
    """Doubt the index of FORM where the difference is large and not due to the scatter of the simulation alone."""
    size = np.where(there & np.isfinite(v.difference), np.abs(v.difference), 0.0)
    large = np.flatnonzero(size > study.verification.settings.tolerance)
    if not large.size:
        return []
    most = int(np.argmax(size))
    place = told_place(study, most)
    used = (
        "The factors rest on the verified index."
        if study.objective.index == "verified"
        else 'The factors rest on FORM; index = "verified" in [objective] makes them rest on the verified index.'
    )
    text = (
        f"With the {kind} factors the index of FORM is off by more than {study.verification.settings.tolerance:g} in "
        f"{large.size} of {int(np.count_nonzero(there))} situations; most in {place}: "
        f"{v.form[most]:.3f} by FORM, {v.verified[most]:.3f} by {v.basis[most]}. {used}"
    )
    return [Doubt("form-error", text, "verification")]


def _at(study: Study, rows: NDArray[np.bool_], code: str, text: str, hint: str = "") -> list[Doubt]:
    at = np.flatnonzero(rows)
    if not at.size:
        return []
    named = [told_place(study, int(i)) for i in at[:_NAMED]]
    more = f" and {at.size - _NAMED} more" if at.size > _NAMED else ""
    return [
        Doubt(
            code, " ".join(filter(None, (text.format(places="; ".join(named) + more), hint))), "verification"
        )
    ]
