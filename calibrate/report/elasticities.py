"""How β answers to each mean, each scatter, each factor and whatever else was stated."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, each
from calibrate.study.sensitivity import IMPORTANCE, OMISSION

if TYPE_CHECKING:
    import pandas as pd

    from calibrate.study.result import Result

_WORDS = {"factor": "factor", "quantity": "quantity", "correlation": "correlation"}


def variable_elasticities(result: Result) -> Table | None:
    """Return, by rule, elasticities by mean and by sd and the omission factor of each variable; None without any."""
    frame = result.elasticities
    rules = [r for r in result.study.rules if (frame["rule"] == r).any()]
    if not rules:
        return None
    names = [n for n in result.study.variables if (frame["name"] == n).any()]
    dependent = bool(result.study.correlations) or any(
        set(e.names) & set(result.study.variables)
        for v in result.study.variables.values()
        for e in v.arguments.values()
    )
    columns = [Column("variable", names, kind="name")]
    for rule in rules:
        own = frame[frame["rule"] == rule]
        columns += [
            Column("of mean", _picked(own, names, "moment", "mean"), each(_signed), "number", group=rule),
            Column("of sd", _picked(own, names, "moment", "sd"), each(_signed), "number", group=rule),
            Column(
                "omission",
                _picked(own, names, OMISSION, "", "slope"),
                each(numbers.fixed, 3),
                "number",
                group=rule,
            ),
        ]
        if dependent:
            share = np.square(_picked(own, names, IMPORTANCE, "", "slope"))
            columns.append(Column("importance", list(share), each(numbers.share, 0), "number", group=rule))
    return Table(tuple(columns))


def other_elasticities(result: Result) -> Table | None:
    """Return slope and elasticity by rule for factors, quantities and correlations; None without any."""
    frame = result.elasticities
    frame = frame[frame["kind"].isin(list(_WORDS))]
    if frame.empty:
        return None
    keys = list(dict.fromkeys(zip(frame["kind"], frame["name"], frame["argument"], strict=True)))
    sizes = {rule.size for rule in result.study.rules.values()}
    keys.sort(key=lambda key: list(_WORDS).index(key[0]))
    columns = [
        Column("kind", ["size" if name in sizes else _WORDS[kind] for kind, name, _ in keys]),
        Column("of", [_typeset(name) for _, name, _ in keys]),
    ]
    for rule in result.study.rules:
        own = frame[frame["rule"] == rule].set_index(["kind", "name", "argument"])
        if own.empty:
            continue
        relative = [float(own["elasticity"].get(key, np.nan)) or np.nan for key in keys]
        # A slope by a quantity with a unit says nothing without it; its elasticity does.
        slope = [
            np.nan if key[0] == "quantity" else float(own["slope"].get(key, np.nan)) or np.nan for key in keys
        ]
        columns += [
            Column("dβ/dp", slope, each(numbers.significant, 3), "number", group=rule),
            Column("elasticity", relative, each(_signed), "number", group=rule),
        ]
    return Table(tuple(columns))


def _typeset(names: str) -> Html:
    """Return one name, or a pair of them, as HTML."""
    return Html(", ".join(symbols.html(name) for name in names.split(", ")))


def _picked(
    own: pd.DataFrame, names: list[str], kind: str, argument: str, column: str = "elasticity"
) -> list[float]:
    chosen = own[(own["kind"] == kind) & (own["argument"] == argument)].set_index("name")[column]
    return [float(chosen.get(name, np.nan)) for name in names]


def _signed(value: float) -> str:
    text = numbers.fixed(value, 2)
    return f"+{text}" if np.isfinite(value) and value > 0.005 else text
