"""Where few tests are allowed for in a study: once between a sample and a rule, not in the value and the variable."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping

from calibrate.errors import InputError
from calibrate.expressions import Expression
from calibrate.fitting.characteristic import CharacteristicValue
from calibrate.records import Sample
from calibrate.resistance import LedgerEntry, ledger
from calibrate.study.model import Quantity, Rule, Variable
from calibrate.study.reading.context import Reading

EN_14358 = (0.05, 0.75, 0.05)
"""Fractile, confidence, and least sd of logarithms of the characteristic strengths of EN 14358 (from memory)."""


def check_allowances(
    reading: Reading,
    rules: Mapping[str, Rule],
    quantities: Mapping[str, Quantity],
    expressions: Mapping[str, Expression],
    variables: Mapping[str, Variable | None],
    records: Mapping[str, Sample | None],
) -> None:
    """Refuse rules in which a characteristic value and a basic variable allow for the same few tests twice.

    Parameters
    ----------
    expressions : mapping of str to Expression
        Of quantities and derived quantities, through which a design check may reach a characteristic value.
    """
    told: set[tuple[LedgerEntry, ...]] = set()
    for rule in rules.values():
        if rule.design_check is None:
            continue
        reached = _reached(rule, expressions)
        values = [q for name, q in quantities.items() if name in reached and q.characteristic is not None]
        for tests in dict.fromkeys(_tests_of(q, variables) for q in values):
            sample = records.get(tests)
            if sample is None:
                continue
            path = f"records.{tests} to rules.{rule.name}"
            own = [q for q in values if _tests_of(q, variables) == tests]
            models = [v for n in rule.variables if (v := variables[n]) is not None and v.records == tests]
            entries = [e for q in own for e in _of_value(q, path)]
            entries += [_of_variable(v, path, sample.n) for v in models]
            _check(reading, entries, own, models, told)


def _reached(rule: Rule, expressions: Mapping[str, Expression]) -> set[str]:
    """Return every name that a design check uses, directly or through definitions."""
    assert rule.design_check is not None
    found: set[str] = set()
    ahead = set(rule.design_check.margin.names)
    while ahead:
        name = ahead.pop()
        found.add(name)
        if name in expressions:
            ahead |= set(expressions[name].names) - found
    return found


def _tests_of(quantity: Quantity, variables: Mapping[str, Variable | None]) -> str:
    variable = variables.get(quantity.of or "")
    return "" if variable is None else variable.records or ""


def _of_value(quantity: Quantity, path: str) -> list[LedgerEntry]:
    value = quantity.characteristic
    assert value is not None
    subject = f"quantities.{quantity.name}"
    procedure = "EN 14358" if _is_en_14358(value) else ""
    found = []
    if value.confidence is not None or value.route.startswith("prediction"):
        found.append(LedgerEntry(subject, "k_n", path, value.n, procedure))
    if value.floored:
        found.append(LedgerEntry(subject, "floor on V", path, value.n, procedure))
    return found or [LedgerEntry(subject, "none", path, value.n)]


def _is_en_14358(value: CharacteristicValue) -> bool:
    fractile, confidence, least = EN_14358
    sd = math.sqrt(math.log1p(value.cov_used**2)) if value.cov_used else math.nan
    return (
        (value.route, value.family) == ("tolerance", "lognormal")
        and (value.fractile, value.confidence) == (fractile, confidence)
        and (not value.floored or math.isclose(sd, least, rel_tol=0.01))
    )


def _of_variable(variable: Variable, path: str, n: int) -> LedgerEntry:
    return LedgerEntry(
        f"variables.{variable.name}", "predictive variable" if variable.predictive else "none", path, n
    )


def _check(
    reading: Reading,
    entries: list[LedgerEntry],
    own: list[Quantity],
    models: list[Variable],
    told: set[tuple[LedgerEntry, ...]],
) -> None:
    same = tuple(dataclasses.replace(e, path="") for e in entries)
    if same in told:
        return  # of another rule; once is enough
    told.add(same)
    try:
        found = ledger(entries)
    except InputError as error:
        lines = [(f"quantities.{q.name}", q.line) for q in own]
        lines += [(f"variables.{v.name}", v.line) for v in models if v.predictive]
        where = ", ".join(f"{name} in line {line}" for name, line in lines if line is not None)
        for problem in error.problems:
            reading.raw_problem(
                f"{problem.message} ({where})", ("quantities", own[0].name), problem.suggestion
            )
        return
    for doubt in found.doubts:
        reading.doubt(doubt.code, doubt.message, doubt.where)
