"""Reservations about what samples are asked to show: extrapolation, the side of extremes, the pedigree of inputs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr

from calibrate.errors import Doubt
from calibrate.factors import Calibration
from calibrate.study.exceedances import ExceedanceModel
from calibrate.study.fits import RecordModel
from calibrate.study.model import Study

MATTERS = 0.2
"""Sensitivity factor from which a variable's tail is worth a doubt."""
BEYOND = 0.1
"""Expected number of specimens beyond the design point below which a sample cannot speak for it."""

_OF_MINIMA = ("gumbel_min", "weibull", "weibull3")
_OF_MAXIMA = ("gumbel", "frechet")
UNSTATED = "not stated"


def evidence_doubts(study: Study, fitted: Mapping[str, RecordModel], calibration: Calibration) -> list[Doubt]:
    """Return the doubts that need the design points."""
    doubts = []
    evaluation = calibration.proposed.evaluation
    for name, variable in study.variables.items():
        worst: tuple[float, float] | None = None
        roles = []
        for rule, e in zip(study.rules.values(), evaluation.per_rule, strict=True):
            if name not in rule.variables:
                continue
            i = rule.variables.index(name)
            alpha = e.reliability.alpha[i]
            acts = np.isfinite(alpha) & (study.situations.weight > 0) & (np.abs(alpha) > MATTERS)
            if not acts.any():
                continue
            u, sign = e.reliability.u[i][acts], np.sign(alpha[acts])
            roles.append(float(sign.sum()))
            k = int(np.argmax(-u * sign))
            found = (float(-u[k] * sign[k]), float(sign[k]))
            worst = found if worst is None or found[0] > worst[0] else worst
        if worst is None:
            continue
        fit = fitted.get(name)
        if isinstance(fit, ExceedanceModel):
            period = study.reference_period if variable.converted else fit.maximum.years
            doubts += _beyond_record(name, fit.fit.years, *worst, period)
        elif fit is not None:
            doubts += _extrapolation(name, fit.n, *worst)
        family = fit.family if fit is not None else variable.families[0]
        doubts += _side(name, family, variable.role, sum(roles))
    return doubts


def _extrapolation(name: str, n: int, distance: float, sign: float) -> list[Doubt]:
    tail = float(np.exp(log_ndtr(-distance)))
    if tail * n >= BEYOND:
        return []
    end = "lowest" if sign > 0 else "largest"
    probability = "fractile" if sign > 0 else "exceedance probability"
    text = (
        f"The design point of '{name}' lies at the {probability} {tail:.1e}; the "
        f"{end} of {n} values represents about {0.5 / n:.1e}. The tail between is the family's, not the sample's."
    )
    return [Doubt("extrapolation", text, f"variables.{name}")]


def _beyond_record(name: str, record: float, distance: float, sign: float, period: float) -> list[Doubt]:
    """Compare how seldom the design value is exceeded with the length of the record, both in years."""
    apart = period / -float(log_ndtr(distance))
    if sign > 0.0 or record >= BEYOND * apart:
        return []
    text = (
        f"The design point of '{name}' is exceeded about once in {float(f'{apart:.2g}'):g} years; the record is "
        f"{record:.3g} years long. The tail between is the family's, not the record's."
    )
    return [Doubt("extrapolation", text, f"variables.{name}")]


def _side(name: str, family: str, role: str, sign: float) -> list[Doubt]:
    is_action = role == "action" or (not role and sign < 0)
    is_resistance = role == "resistance" or (not role and sign > 0)
    if is_action and family in _OF_MINIMA:
        text = f"'{name}' acts as an action, but {family} is a family of smallest values."
        return [Doubt("wrong-sided-family", text, f"variables.{name}")]
    if is_resistance and family in _OF_MAXIMA:
        text = f"'{name}' acts as a resistance, but {family} is a family of largest values."
        return [Doubt("wrong-sided-family", text, f"variables.{name}")]
    return []


@dataclass(frozen=True, slots=True)
class PedigreeShare:
    """How much of the reliability rests on inputs of one grade: the weighted mean of the sum of alpha squared."""

    grade: str
    variables: tuple[str, ...]
    share: float


def pedigree(study: Study, calibration: Calibration) -> tuple[PedigreeShare, ...]:
    """Return the share of the sum of alpha squared by pedigree grade, weighted over rules and situations."""
    evaluation = calibration.proposed.evaluation
    # Rules that only count as parts of a system count alike.
    alike = 0.0 if any(r.weight for r in study.rules.values()) else 1.0
    shares: dict[str, float] = {}
    names: dict[str, list[str]] = {}
    whole = 0.0
    for rule, e in zip(study.rules.values(), evaluation.per_rule, strict=True):
        weight = study.situations.weight * (rule.weight or alike)
        for i, name in enumerate(rule.variables):
            grade = grade_of(study, name)
            square = e.reliability.alpha[i] ** 2
            part = float(np.sum(np.where(np.isfinite(square), weight * square, 0.0)))
            shares[grade] = shares.get(grade, 0.0) + part
            whole += part
            if name not in names.setdefault(grade, []):
                names[grade].append(name)
    order = ("own data", "published data", "code value", "judgement", UNSTATED)
    return tuple(
        PedigreeShare(grade, tuple(names[grade]), shares[grade] / whole if whole else float("nan"))
        for grade in order
        if grade in shares
    )


def grade_of(study: Study, name: str) -> str:
    """Return the pedigree grade of a variable: as stated, else own data where it has records."""
    variable = study.variables[name]
    return variable.grade or ("own data" if variable.records is not None else UNSTATED)
