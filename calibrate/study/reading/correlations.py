"""Correlations of basic variables: checked, and refused where they are not zero."""

from __future__ import annotations

import math
from typing import Any

from calibrate.errors import did_you_mean
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import NameSpace
from calibrate.study.reading.schema import read_table
from calibrate.study.reading.sentences import describe

_PAIR = 2


def check_correlations(reading: Reading, names: NameSpace, raw: Any) -> None:
    """Check names and range of ``[correlations]``; this version computes with independent variables only."""
    seen: dict[frozenset[str], str] = {}
    for key, value in read_table(reading, raw, ("correlations",)).items():
        place = ("correlations", key)
        pair = [part.strip() for part in key.split(",")]
        if len(pair) != _PAIR or not all(pair):
            reading.raw_problem(
                f"correlations: '{key}' is not a pair of variables.", place, 'Write "f_u, theta_R" = 0.0.'
            )
            continue
        variables = names.of_kind("variable")
        for name in pair:
            if name not in variables:
                reading.raw_problem(
                    f"correlations: '{name}' is not a basic variable.", place, did_you_mean(name, variables)
                )
        if pair[0] == pair[1]:
            reading.raw_problem(f"correlations: '{key}' pairs a variable with itself.", place)
        before = seen.setdefault(frozenset(pair), key)
        if before != key:
            reading.raw_problem(
                f"correlations: '{key}' is the same pair as '{before}'.", place, "Keep one of them."
            )
        _check_coefficient(reading, key, value)


def _check_coefficient(reading: Reading, key: str, value: Any) -> None:
    place = ("correlations", key)
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
        reading.raw_problem(f"correlations: '{key}' must be a number; got {describe(value)}.", place)
    elif abs(value) > 1.0:
        reading.raw_problem(f"correlations: '{key}' must lie between -1 and 1; got {value:g}.", place)
    elif value != 0.0:
        reading.raw_problem(
            f"correlations: '{key}' = {value:g} cannot be taken into account: this version takes independent "
            "variables only.",
            place,
            "Set it to 0 or remove it, and mind that the results then assume independence.",
        )
