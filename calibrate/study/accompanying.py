"""Combination factors psi by design values, beside those that a calibration proposes."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.accompanying import accompanying_part
from calibrate.factors import Calibration, RuleEvaluation, RuleModel
from calibrate.situations import BasicVariable
from calibrate.study.assemble import values_at
from calibrate.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]

COLUMNS = ("rule", "accompanying", "leading", "intervals", "psi_maximum", "psi_interval", "psi_design_point")


def accompanying_table(
    study: Study,
    variables: Mapping[str, BasicVariable],
    models: Sequence[RuleModel],
    calibration: Calibration,
) -> pd.DataFrame | None:
    """Return psi of every accompanying action by three rules, one row per rule and pair of actions; None without any.

    Columns: rule, accompanying, leading, intervals (how often the slower of both changes in the reference period);
    weighted means over the situations of ``psi_maximum``: fractiles Phi(0.28 beta) and Phi(0.7 beta) of the maximum in
    the reference period; ``psi_interval``: the same rule within one interval; ``psi_design_point``: the value at the
    design point while the other leads over that while it leads itself, with the proposed factors.
    """
    import pandas as pd

    if not study.combination or study.target_beta <= 0.0:
        return None
    rows: list[tuple[Any, ...]] = []
    proposed = calibration.proposed
    for model, found in zip(models, proposed.evaluation.per_rule, strict=True):
        values = values_at(model, found, proposed.factors)
        if not model.alternatives:
            continue
        acting = [a for a in study.combination if any(b.leading == a.name for b in model.alternatives)]
        points = _design_points(model, found)
        for action in acting:
            law = dataclasses.replace(
                variables[action.name], ratio=action.repetitions, presence=action.presence
            ).distribution(values)
            for other in acting:
                if other is action:
                    continue
                n = min(action.repetitions, other.repetitions)
                parts = [accompanying_part(law, study.target_beta, k) for k in (1.0, n)]
                beside = points[other.name][action.name] / points[action.name][action.name]
                mean = (_mean(np.broadcast_to(p, (model.n,)), model.weight) for p in (*parts, beside))
                rows.append((model.name, action.name, other.name, n, *mean))
    return pd.DataFrame(rows, columns=list(COLUMNS))


def _design_points(model: RuleModel, found: RuleEvaluation) -> dict[str, dict[str, Array]]:
    """Return the values of all variables at the design point of each alternative, NaN where it has none."""
    points: dict[str, dict[str, Array]] = {}
    for alternative, problem, u in zip(model.alternatives, found.problems, found.branches, strict=True):
        there = np.isfinite(found.by_alternative[alternative.leading])
        points[alternative.leading] = {
            v.name: np.where(there, row, np.nan)
            for v, row in zip(alternative.variables, problem.x(np.nan_to_num(u)), strict=True)
        }
    return points


def _mean(part: Array, weight: Array) -> float:
    """Return the weighted mean over situations in which the part is a number."""
    there = np.isfinite(part) & (weight > 0.0)
    return float(np.average(part[there], weights=weight[there])) if there.any() else float("nan")
