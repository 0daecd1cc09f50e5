"""Dependence of basic variables: correlated pairs, and variables whose models depend on others."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calibrate.report import numbers, symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, each

if TYPE_CHECKING:
    from calibrate.study.model import Study
    from calibrate.study.result import Result


def correlation_table(result: Result) -> Table | None:
    """Return the correlated pairs: coefficient, kind, interval where estimated; None without any."""
    pairs = [c for c in result.study.correlations if c.pair.coefficient != 0.0]
    if not pairs:
        return None
    columns = [
        Column("variable", [c.pair.first for c in pairs], kind="name"),
        Column("and", [c.pair.second for c in pairs], kind="name"),
        Column("coefficient", [c.pair.coefficient for c in pairs], each(numbers.fixed, 2), "number"),
        Column("kind", [c.pair.kind for c in pairs]),
    ]
    if any(c.estimate is not None for c in pairs):
        shown = [
            ""
            if c.estimate is None
            else f"{numbers.fixed(c.estimate.lower, 2)} … {numbers.fixed(c.estimate.upper, 2)}"
            for c in pairs
        ]
        columns.append(Column("95 % interval", shown))
    columns.append(
        Column(
            "source",
            [
                c.source or ("given" if c.estimate is None else f"paired records, n = {c.estimate.n}")
                for c in pairs
            ],
        )
    )
    return Table(tuple(columns))


def conditional_variables(study: Study) -> list[Html]:
    """Return the variables whose models depend on others, each with those."""
    return [
        Html(f"{symbols.html(name)} (given {', '.join(symbols.html(p) for p in parents)})")
        for name, parents in conditional_names(study).items()
    ]


def conditional_names(study: Study) -> dict[str, list[str]]:
    """Return the variables on which each conditional variable depends."""
    found: dict[str, list[str]] = {}
    for name, variable in study.variables.items():
        used = {n for e in variable.arguments.values() for n in e.names}
        if parents := [n for n in study.variables if n in used]:
            found[name] = parents
    return found
