"""What went in, at full precision: records, basic variables, quantities, rules, design situations."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from calibrate.report import numbers, symbols
from calibrate.report.dependence import conditional_names
from calibrate.report.outcome import column_unit
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table, each
from calibrate.study.model import Variable
from calibrate.study.result import Result, VariableResult
from calibrate.units import format_unit

DIGEST_SHOWN = 12
"""Characters of a digest that a report shows; result.json has all of them."""
MOST_LEVELS_LISTED = 12
FEW_LEVELS = 5


def unit_of(text: str) -> str:
    """Return a unit for display; nothing where there is none."""
    return format_unit(text) if text else ""


def unit_of_records(result: Result, name: str) -> str:
    """Return the unit of the records of a variable for display."""
    return unit_of(result.study.records[result.study.variables[name].records or ""].unit.text)


def record_table(result: Result) -> Table:
    """Return the records: where they come from, how many, their range."""
    samples = result.study.records
    users: dict[str, list[str]] = {name: [] for name in samples}
    for variable in result.study.variables.values():
        for name in dict.fromkeys(filter(None, (variable.records, *variable.pooled_shape))):
            users[name].append(variable.name)
    return Table(
        (
            Column("records", list(samples)),
            Column("used by", [_names(users[n]) for n in samples]),
            Column("file", [_file(s.file, s.sheet) for s in samples.values()]),
            Column("column", [s.name for s in samples.values()]),
            Column("unit", [unit_of(s.unit.text) for s in samples.values()]),
            Column("n", [s.n for s in samples.values()], kind="number"),
            Column(
                "smallest",
                [s.values.min() for s in samples.values()],
                each(numbers.significant),
                "number",
            ),
            Column("mean", [s.values.mean() for s in samples.values()], each(numbers.significant), "number"),
            Column(
                "largest", [s.values.max() for s in samples.values()], each(numbers.significant), "number"
            ),
            Column("SHA-256", [_digest(s.sha256) for s in samples.values()]),
        )
    )


def _file(name: str, sheet: str | None) -> Html:
    shown = symbols.path(name)
    return Html(f"{shown}, sheet {symbols.escaped(sheet)}") if sheet else shown


def _digest(sha256: str) -> Html:
    return Html(f'<span class="nm">{symbols.path(sha256[:DIGEST_SHOWN] + "…", title=sha256)}</span>')


def _names(names: list[str]) -> Html:
    return Html(", ".join(symbols.html(n) for n in names)) if names else Html(numbers.NONE)


def variable_table(result: Result) -> Table:
    """Return the basis of variables: family, moments for the reference period, where they come from."""
    found = list(result.variables.values())
    defined = [result.study.variables[v.name] for v in found]
    given = conditional_names(result.study)
    columns = [
        Column("variable", [v.name for v in found], kind="name"),
        Column("family", [_family(v.family, given.get(v.name, [])) for v in found]),
        Column("unit", [unit_of(v.unit.text) for v in found]),
        Column("mean", [numbers.span(v.mean) for v in found], kind="number"),
        Column("sd", [numbers.span(v.sd) for v in found], kind="number"),
        Column("cov", [numbers.span(v.cov, 3) for v in found], kind="number"),
    ]
    if any(d.description for d in defined):
        columns.insert(1, Column("meaning", [d.description for d in defined]))
    if any(v.period is not None for v in found):
        columns.append(Column("given for", [numbers.years(v.period) if v.period else "" for v in found]))
    columns.append(Column("source", [_source(d, v.n) for d, v in zip(defined, found, strict=True)]))
    return Table(tuple(columns))


def _family(family: str, parents: list[str]) -> Html:
    """Return a family, with the variables on whose values its parameters depend."""
    text = symbols.escaped(family)
    return Html(f"{text}, given {', '.join(symbols.html(p) for p in parents)}") if parents else text


def _source(variable: Variable, n: int | None) -> str:
    known = [] if n is None else [f"own records, n = {n}"]
    if n is not None and variable.exceedances is not None:
        known = [f"own records, {numbers.count(n, 'event')} above the threshold"]
    grade = "" if known and variable.grade == "own data" else variable.grade
    known += [text for text in (variable.source, grade) if text]
    return "; ".join(known) or "given"


def parameter_table(result: Result) -> Table:
    """Return the own parameters of every variable, for the period they hold for, and how they are defined."""
    found = list(result.variables.values())
    columns = [
        Column("variable", [v.name for v in found], kind="name"),
        Column("family", [v.family for v in found]),
        Column("unit", [unit_of(v.unit.text) for v in found]),
        Column("parameters", [_parameters(v) for v in found]),
        Column("defined by", [_definition(result, v) for v in found]),
    ]
    if any(v.parameters_period != result.study.reference_period for v in found):
        columns.insert(4, Column("for", [numbers.years(v.parameters_period) for v in found]))
    return Table(tuple(columns))


def _parameters(variable: VariableResult) -> str:
    return ", ".join(f"{n} = {numbers.span(v, 5)}" for n, v in variable.parameters.items())


def _definition(result: Result, variable: VariableResult) -> Html | str:
    given = result.study.variables[variable.name]
    if given.exceedances is not None:
        return f"exceedances in records {given.records}"
    parts: list[str] = []
    if given.records is not None:
        parts.append(symbols.escaped(f"fit to records {given.records}"))
        kept = [f"{name} = {given.texts[name]} given" for name in given.arguments]
        if given.pooled_shape:
            kept = [f"shape pooled over {len(given.pooled_shape)} stations"]
        parts += [symbols.escaped(text) for text in kept]
    for argument, expression in given.arguments.items() if given.records is None else ():
        text = given.texts.get(argument, expression.text)
        shown = symbols.formula(expression) if expression.names else symbols.escaped(text)
        parts.append(f"{symbols.escaped(argument)} = {shown}")
    for what, weakest in (("size ratio", given.size_ratio), ("stress profile", given.stress_profile)):
        if weakest is not None:
            parts.append(f"{what} = {symbols.formula(weakest)}")
    over = f", by class of sites.{symbols.escaped(given.sites)}" if given.sites is not None else ""
    return Html(", ".join(parts) + over)


def quantity_table(result: Result) -> Table:
    """Return the deterministic values with their units; expressions as formulas."""
    from calibrate.expressions import parse

    found = list(result.study.quantities.values())
    formulas: list[Html] = []
    for q in found:
        try:
            expression = parse(q.text)
            formulas.append(symbols.formula(expression) if expression.names else Html(""))
        except ValueError:  # a number with its unit
            formulas.append(Html(""))
    columns = [
        Column("quantity", [q.name for q in found], kind="name"),
        Column("value", [q.value / q.unit.factor for q in found], each(numbers.significant, 6), "number"),
        Column("unit", [unit_of(q.unit.text) for q in found]),
    ]
    if any(formulas):
        columns.append(Column("defined by", formulas))
    return Table(tuple(columns))


def axis_table(result: Result) -> Table:
    """Return the axes or table columns with their levels and the weight that each level carries."""
    frame, names = result.situations, list(result.study.situations.columns)
    described = result.study.axis_descriptions
    levels, shares = [], []
    for name in names:
        texts, weights = _levels(frame[name], frame["weight"].to_numpy(float), result.study.situations.n)
        levels.append(texts)
        shares.append(weights)
    columns = [
        Column("axis", names, kind="name"),
        Column("unit", [column_unit(result, n) for n in names]),
        Column("values", levels),
    ]
    if any(shares):
        columns.append(Column("share of weight", shares))
    if any(described.get(n) for n in names):
        columns.insert(1, Column("meaning", [described.get(n, "") for n in names]))
    return Table(tuple(columns))


def _levels(values: Any, weight: Any, situations: int) -> tuple[str, str]:
    """Return the values of an axis and their shares of weight, or the range where there are many.

    Where every situation has a value of its own, the table of situations says more than a list.
    """
    numeric = values.dtype.kind in "fiu"
    found = sorted(values.unique()) if numeric else list(dict.fromkeys(values))
    if len(found) > (MOST_LEVELS_LISTED if len(found) < situations else FEW_LEVELS):
        text = f"{len(found)} different values"
        return (f"{text}, {numbers.span(found)}" if numeric else text), ""
    texts = numbers.column(found) if numeric else [str(v) for v in found]
    parts = [float(weight[(values == v).to_numpy()].sum()) for v in found]
    decimals = min(max(numbers.decimals_of(100.0 * p, 1) for p in parts), 1)
    shares = [numbers.share(p, decimals) for p in parts]
    same = len(set(shares)) == 1 and len(shares) > 1
    return " · ".join(texts), f"{shares[0]} each" if same else " · ".join(shares)


@dataclass(frozen=True, slots=True)
class RuleText:
    """One rule as it is printed."""

    name: str
    description: str
    check: Html | None
    size: Html | None
    size_unit: str
    limit_state: Html
    variables: Html
    weight: str


def rule_texts(result: Result) -> list[RuleText]:
    """Return the rules with their formulas; the factors stand out."""
    factors = frozenset(f.name for f in result.study.factors)
    total = result.study.total_weight
    return [
        RuleText(
            name=rule.name,
            description=rule.description,
            check=None if rule.design_check is None else symbols.formula(rule.design_check, factors),
            size=None if rule.size is None else symbols.html(rule.size),
            size_unit=column_unit(result, "size_proposed", rule.name),
            limit_state=symbols.formula(rule.limit_state, factors),
            variables=_names(list(rule.variables)),
            weight=numbers.share(rule.weight / total, 0),
        )
        for rule in result.study.rules.values()
    ]


def derived_formulas(result: Result) -> list[tuple[Html, Html]]:
    """Return the derived quantities: name and formula."""
    return [(symbols.html(n), symbols.formula(e)) for n, e in result.study.derived.items()]
