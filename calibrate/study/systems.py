"""Systems of rules in a result: their table, with bounds and simulation."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.errors import Doubt
from calibrate.factors import Calibration, Verification
from calibrate.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]

GAP = 0.1
"""Difference in beta between planes and simulation from which a doubt is recorded."""


def system_table(
    study: Study, calibration: Calibration, verified: Mapping[str, Verification]
) -> pd.DataFrame | None:
    """Return the columns of systems.csv, one row per system and situation with the proposed factors; None without any.

    Columns: system, situation, weight (of the situation), beta (from the tangent planes), beta_lower and beta_upper (by
    Ditlevsen's bounds), beta_simple_lower and beta_simple_upper, beta_simulated with its interval, beta_verified, and
    beta of each component as ``beta_<rule>``, empty for rules that are no components.
    """
    import pandas as pd

    if not study.systems:
        return None
    n, first = study.situations.n, len(study.rules)
    v = verified.get("proposed")
    parts = []
    for k, s in enumerate(calibration.proposed.evaluation.systems):
        rows = slice((first + k) * n, (first + k + 1) * n)
        columns: dict[str, object] = {
            "system": np.full(n, s.name, dtype=object),
            "situation": np.arange(1, n + 1),
            "weight": s.weight,
            "beta": s.result.beta,
            "beta_lower": _index(s.result.upper),
            "beta_upper": _index(s.result.lower),
            "beta_simple_lower": _index(s.result.simple_upper),
            "beta_simple_upper": _index(s.result.simple_lower),
        }
        for name, values in (
            ("beta_simulated", None if v is None else v.simulated),
            ("beta_simulated_lower", None if v is None else v.lower),
            ("beta_simulated_upper", None if v is None else v.upper),
            ("beta_verified", None if v is None else v.verified),
        ):
            columns[name] = np.full(n, np.nan) if values is None else values[rows]
        names = study.systems[s.name].logic.names
        for rule in study.rules:
            columns[f"beta_{rule}"] = (
                s.component_beta[names.index(rule)] if rule in names else np.full(n, np.nan)
            )
        parts.append(pd.DataFrame(columns))
    return pd.concat(parts, ignore_index=True)


def _index(probability: Array) -> Array:
    return np.asarray(-special.ndtri(np.clip(probability, 0.0, 1.0)))


def system_doubts(study: Study, table: pd.DataFrame | None) -> list[Doubt]:
    """Doubt the tangent planes of a system where the simulation of the true system departs from them."""
    if table is None:
        return []
    doubts = []
    for name in study.systems:
        own = table[table["system"] == name]
        gap = (own["beta_simulated"] - own["beta"]).to_numpy(float)
        if not np.isfinite(gap).any():
            continue
        most = int(np.nanargmax(np.abs(gap)))
        if abs(gap[most]) <= GAP:
            continue
        row = own.iloc[most]
        text = (
            f"In situation {int(row['situation'])} the system has β {row['beta']:.3f} by the tangent planes of its "
            f"rules, {row['beta_simulated']:.3f} by simulation of the true system: the curvature of the rules matters."
        )
        doubts.append(Doubt("system-planes", text, f"systems.{name}"))
    return doubts
