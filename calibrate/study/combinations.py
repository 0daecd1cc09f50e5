"""What combining variable actions leads to: beta of each alternative, which one governs, bounds of all together."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

from calibrate.actions.combination import Action, combination_doubts
from calibrate.errors import Doubt
from calibrate.factors import Calibration
from calibrate.study.exact_combination import ExactCombination
from calibrate.study.model import Study

if TYPE_CHECKING:
    import pandas as pd


def combination_table(
    study: Study, calibration: Calibration, exact: ExactCombination | None
) -> pd.DataFrame | None:
    """Return beta of every alternative with the proposed factors, one row per rule and situation; None without any.

    Columns: rule, situation, governing (leading action of the smallest beta), ``beta_<action>`` for each leading action
    (empty where it does not act), ``beta_series_upper`` (the smallest) and ``beta_series_lower``: the simple bounds of
    the series system of the alternatives, fully dependent and independent; ``beta_fbc``: by the exact distribution of
    the maximum of the combined actions (Ferry Borges and Castanheta), empty where there is none.
    """
    import pandas as pd

    if exact is None:
        return None
    names = [a.name for a in study.combination]
    frames = []
    for rule, e, beta_exact in zip(
        study.rules, calibration.proposed.evaluation.per_rule, exact.beta, strict=True
    ):
        n = study.situations.n
        beta = np.array([e.by_alternative.get(name, np.full(n, np.nan)) for name in names])
        there = np.isfinite(beta)
        lowest = np.where(there, beta, np.inf).argmin(axis=0)
        # ln of the joint survival of independent alternatives, then the index of its complement.
        survival = np.where(there, log_ndtr(np.where(there, beta, 0.0)), 0.0).sum(axis=0)
        some = there.any(axis=0)
        with np.errstate(all="ignore"):
            series = np.where(some, ndtri_exp(survival), np.nan)
        frames.append(
            pd.DataFrame(
                {
                    "rule": rule,
                    "situation": np.arange(1, n + 1),
                    "governing": np.where(some, np.array(names, dtype=object)[lowest], ""),
                    **{f"beta_{name}": row for name, row in zip(names, beta, strict=True)},
                    "beta_series_upper": np.where(
                        some, np.nanmin(np.where(there, beta, np.inf), axis=0), np.nan
                    ),
                    "beta_series_lower": series,
                    "beta_fbc": beta_exact,
                }
            )
        )
    return pd.concat(frames, ignore_index=True)


def doubts_of_combination(study: Study, calibration: Calibration) -> list[Doubt]:
    """Return doubts about presence, repetitions and signs of the combined actions."""
    found: dict[str, Doubt] = {}
    for rule, e in zip(study.rules.values(), calibration.proposed.evaluation.per_rule, strict=True):
        acting = [a for a in study.combination if a.name in rule.variables]
        if len(acting) < 2:
            continue
        actions = []
        for a in acting:
            law = e.distributions[rule.variables.index(a.name)]
            base = getattr(law, "base", law)
            actions.append(Action(base, a.repetitions, a.presence, a.name, a.duration))
        for doubt in combination_doubts(actions, study.reference_period):
            found.setdefault(doubt.code + doubt.message, doubt)
    return list(found.values())
