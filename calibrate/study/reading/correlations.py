"""``[correlations]``: coefficients of pairs of basic variables, stated or estimated from records."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, did_you_mean
from calibrate.fitting.correlation import estimate_correlation
from calibrate.records import Sample
from calibrate.reliability import CorrelatedPair
from calibrate.reliability.correlated_pairs import indefinite
from calibrate.study.model import CombinedAction, Correlated, Variable
from calibrate.study.reading.conditional import conditional_on
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import read_entry, read_table
from calibrate.study.reading.names import NameSpace
from calibrate.study.reading.reliability_sections import CorrelationTable
from calibrate.study.reading.sentences import describe
from calibrate.study.reading.toml_lines import Place

_PAIR = 2
_FEW = 20
"""Pairs below which an estimated coefficient is doubted."""


def read_correlations(
    reading: Reading,
    names: NameSpace,
    raw: Any,
    variables: Mapping[str, Variable | None],
    records: Mapping[str, Sample | None],
    combination: Sequence[CombinedAction],
) -> tuple[Correlated, ...]:
    """Return the pairs in the order of the study; faulty ones are reported and left out."""
    seen: dict[frozenset[str], str] = {}
    found: list[Correlated] = []
    keys: list[str] = []
    combined = {a.name for a in combination}
    for key, value in read_table(reading, raw, ("correlations",)).items():
        place = ("correlations", key)
        pair = _pair(reading, names, key, place)
        if pair is None:
            continue
        before = seen.setdefault(frozenset(pair), key)
        if before != key:
            reading.raw_problem(
                f"correlations: '{key}' is the same pair as '{before}'.", place, "Keep one of them."
            )
            continue
        first, second = (variables.get(name) for name in pair)
        content = _content(reading, key, value, place)
        if content is None or first is None or second is None:
            continue
        if not _can_be(reading, key, (first, second), variables, combined, place):
            continue
        correlated = _correlated(reading, content, (first, second), records, place)
        if correlated is not None:
            found.append(correlated)
            keys.append(key)
    _check_together(reading, found, keys)
    return tuple(found)


def _check_together(reading: Reading, found: Sequence[Correlated], keys: Sequence[str]) -> None:
    """Report coefficients that no variables can have together."""
    if not found:
        return
    pairs = [c.pair for c in found]
    names = list(dict.fromkeys(name for p in pairs for name in (p.first, p.second)))
    wrong = indefinite(pairs, names)
    if wrong is not None:
        key = next(k for k, p in zip(keys, pairs, strict=True) if p.line == wrong.line)
        reading.raw_problem(wrong.message, ("correlations", key), wrong.suggestion)


def _pair(reading: Reading, names: NameSpace, key: str, place: Place) -> tuple[str, str] | None:
    pair = [part.strip() for part in key.split(",")]
    if len(pair) != _PAIR or not all(pair):
        reading.raw_problem(
            f"correlations: '{key}' is not a pair of variables.", place, 'Write "f_u, theta_R" = 0.2.'
        )
        return None
    variables = names.of_kind("variable")
    unknown = [name for name in pair if name not in variables]
    for name in unknown:
        hint = did_you_mean(name, variables)
        reading.raw_problem(f"correlations: '{name}' is not a basic variable.", place, hint)
    if pair[0] == pair[1]:
        reading.raw_problem(f"correlations: '{key}' pairs a variable with itself.", place)
        return None
    return None if unknown else (pair[0], pair[1])


def _content(reading: Reading, key: str, value: Any, place: Place) -> CorrelationTable | None:
    """Return what is said of a pair; a bare number is a product-moment coefficient."""
    if isinstance(value, dict):
        entry = read_entry(reading, CorrelationTable, value, place)
        content = entry.content if entry.sound else None
        if content is not None and (content.coefficient is None) == (not content.from_records):
            reading.raw_problem(
                f"correlations: '{key}' needs either a coefficient or from_records = true.", place
            )
            return None
        return content
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not np.isfinite(value):
        reading.raw_problem(
            f"correlations: '{key}' must be a number or a table; got {describe(value)}.",
            place,
            'Write 0.2, or { coefficient = 0.2, kind = "rank" }, or { from_records = true }.',
        )
        return None
    if abs(value) > 1.0:
        reading.raw_problem(f"correlations: '{key}' must lie between -1 and 1; got {value:g}.", place)
        return None
    return CorrelationTable(coefficient=float(value))


def _can_be(
    reading: Reading,
    key: str,
    pair: tuple[Variable, Variable],
    names: Collection[str],
    combined: set[str],
    place: Place,
) -> bool:
    """Check that neither variable is one of which a correlation means nothing."""
    for variable in pair:
        if variable.name in combined:
            reading.raw_problem(
                f"correlations: '{key}': '{variable.name}' is combined by its repetitions, whose maxima need not occur "
                "together with anything.",
                place,
                "Remove the pair, or take the action out of [combination].",
            )
            return False
        if variable.families == ("constant",):
            reading.raw_problem(
                f"correlations: '{key}': '{variable.name}' is constant.", place, "Remove the pair."
            )
            return False
        if conditional_on(variable, names):
            reading.raw_problem(
                f"correlations: '{key}': the model of '{variable.name}' depends on other basic variables already.",
                place,
                "Say either a correlation or a model that depends on the other.",
            )
            return False
        if variable.sites is not None:
            reading.raw_problem(
                f"correlations: '{key}': '{variable.name}' is an action over sites, of which one coefficient says "
                "nothing about the class of the site and the value at it.",
                place,
                "Remove the pair, or give the variable for one class.",
            )
            return False
    return True


def _correlated(
    reading: Reading,
    content: CorrelationTable,
    variables: tuple[Variable, Variable],
    records: Mapping[str, Sample | None],
    place: Place,
) -> Correlated | None:
    line = reading.line(place)
    first, second = variables
    if content.coefficient is not None:
        pair = CorrelatedPair(first.name, second.name, content.coefficient, content.kind, line)
        return Correlated(pair, None, content.source.strip())
    paired = _paired_values(reading, variables, records, place)
    if paired is None:
        return None
    try:
        estimate = estimate_correlation(*paired, content.kind)
    except InputError as error:
        for problem in error.problems:
            reading.problem(problem.message, place, problem.suggestion)
        return None
    where = f"correlations.{first.name}, {second.name}"
    told = (
        f"The {content.kind} correlation of {first.name} and {second.name} is estimated as "
        f"{estimate.coefficient:.2f} from {estimate.n} specimens; 95 % interval {estimate.lower:.2f} to "
        f"{estimate.upper:.2f}."
    )
    samples = [records[v.records] for v in variables if v.records is not None]
    if any(s is not None and "lot" in s.labels for s in samples):
        text = "Specimens of one lot are not independent, so that the interval is too narrow."
        reading.doubt("correlation-in-lots", f"{told} {text}", where)
    if estimate.n < _FEW:
        reading.doubt("correlation-from-few", f"{told} The coefficient is used as if it were known.", where)
    elif estimate.lower <= 0.0 <= estimate.upper:
        reading.doubt("correlation-not-established", f"{told} They may be independent.", where)
    pair = CorrelatedPair(first.name, second.name, estimate.coefficient, content.kind, line)
    return Correlated(pair, estimate, content.source.strip())


def _paired_values(
    reading: Reading,
    variables: tuple[Variable, Variable],
    records: Mapping[str, Sample | None],
    place: Place,
) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
    """Return the values of both variables in the rows of one file where both are known exactly."""
    samples = []
    for variable in variables:
        if variable.records is None:
            reading.problem(
                f"asks for an estimate from records, but '{variable.name}' has none.",
                place,
                "Give a coefficient, or records of both variables in one file.",
            )
            return None
        sample = records.get(variable.records)
        if sample is None:
            return None
        samples.append(sample)
    first, second = samples
    if (first.sha256, first.sheet) != (second.sha256, second.sheet):
        reading.problem(
            f"asks for an estimate from records, but those of '{variables[0].name}' and '{variables[1].name}' are not "
            f"columns of one table ({first.file}, {second.file}).",
            place,
            "Rows of one table are the same specimen; give a coefficient otherwise.",
        )
        return None
    exact = [
        dict(zip(s.rows[s.observations.exact], s.values[s.observations.exact], strict=True)) for s in samples
    ]
    common = sorted(set(exact[0]) & set(exact[1]))
    x, y = (np.array([values[row] for row in common], dtype=np.float64) for values in exact)
    return x, y
