"""``calibrate check``: what a study says, before anything is computed."""

from __future__ import annotations

import json as json_module
from typing import Any

from calibrate.cli import console
from calibrate.cli.options import Json, Outside, Quiet, Seed, StudyFile

HELP = "Read a study, check names, units and dimensions, build the grid, and print what was understood."

_TEST_COUNTS = ("n", "survived", "subgroups", "clusters")


def check(
    study: StudyFile,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
    allow_outside: Outside = False,
) -> None:
    """Read, check, print."""
    with console.guarded():
        import dataclasses

        from calibrate.study import check_summary, read_study

        content = read_study(study, allow_outside=allow_outside)
        if seed is not None:
            content = dataclasses.replace(content, seed=seed)
        summary = check_summary(content)
        if json:
            console.data(json_module.dumps(summary, indent=2, ensure_ascii=False, allow_nan=False))
        elif not quiet:
            _print(summary, content.shown)


def _print(summary: dict[str, Any], shown: str) -> None:
    from calibrate.report import numbers

    console.line(f"{summary['study']['title']}  ({shown})")
    console.line(
        f"Target β = {numbers.significant(summary['target_beta'])} for {numbers.years(summary['reference_period'])}."
    )
    if summary["records"]:
        console.heading("Records")
        rows = [
            [name, _short(r["file"]), r["value"] or r["column"], _unit(r["unit"]), str(r["n"]), _kinds(r)]
            for name, r in summary["records"].items()
        ]
        heads = ["name", "file", "column or value", "unit", "n", "of these"]
        console.table(heads, rows, [False, False, False, False, True, False])
    if summary["resistances"]:
        console.heading("Component tests")
        rows = [
            [name, _short(r["file"]), *(str(r[key]) if r[key] else "–" for key in _TEST_COUNTS)]
            for name, r in summary["resistances"].items()
        ]
        console.table(["name", "file", *_TEST_COUNTS], rows, [False, False, *[True] * len(_TEST_COUNTS)])
    if summary["quantities"]:
        console.heading("Quantities")
        rows = [
            [name, numbers.significant(q["value"], 6), _unit(q["unit"]), _stands_for(q)]
            for name, q in summary["quantities"].items()
        ]
        console.table(["name", "value", "unit", "stands for"], rows, [False, True, False, False])
    if summary["variables"]:
        console.heading("Basic variables")
        rows = [_variable_row(name, v) for name, v in summary["variables"].items()]
        console.table(["name", "family", "from", "unit", "dimension"], rows, [False] * 5)
    if summary["correlations"]:
        console.heading("Correlations")
        rows = [
            [", ".join(c["variables"]), f"{c['coefficient']:.3g}", c["kind"], _estimated(c["n"])]
            for c in summary["correlations"]
        ]
        console.table(["pair", "coefficient", "kind", "from"], rows, [False, True, False, False])
    for name, table in summary["sites"].items():
        source = f", from {table['file']}" if table["file"] else ""
        console.heading(f"Classes of sites.{name} ({len(table['classes'])}{source})")
        console.table(
            ["class", "share"], [[c, numbers.share(w)] for c, w in table["classes"].items()], [False, True]
        )
    _print_situations(summary)
    console.heading("Rules")
    for name, rule in summary["rules"].items():
        console.listed([(name, "\n".join(_rule_lines(rule)))])
    if summary["systems"]:
        console.heading("Systems")
        rows = [
            [name, s["fails_when"], numbers.significant(s["weight"])]
            for name, s in summary["systems"].items()
        ]
        console.table(["name", "fails when", "weight"], rows, [False, False, True])
    console.heading("Factors")
    rows = [
        [
            name,
            numbers.significant(f["present"], 6),
            "held" if f["held"] else f"{f['lower']:g} … {f['upper']:g}",
            "–" if f["step"] is None else f"{f['step']:g}",
        ]
        for name, f in summary["factors"].items()
    ]
    console.table(["name", "present", "bounds", "step"], rows, [False, True, False, True])
    if summary["doubts"]:
        console.heading(f"Doubts ({len(summary['doubts'])})")
        console.listed([(f"{d['code']}, {d['where']}", d["message"]) for d in summary["doubts"]])
    console.line("\nThe study is consistent. Nothing was fitted, sized or computed.")


def _estimated(n: int | None) -> str:
    return "given" if n is None else f"{n} paired values"


def _unit(text: str) -> str:
    from calibrate.units import format_unit

    return format_unit(text)


def _short(path: str) -> str:
    """Return the last two parts of a path; the study has the whole."""
    parts = path.split("/")
    return path if len(parts) <= 2 else "…/" + "/".join(parts[-2:])


def _kinds(record: dict[str, Any]) -> str:
    """Return how the specimens are known, and how many were left out."""
    parts = []
    if record["n_exact"] < record["n"]:
        parts.append(f"{record['n'] - record['n_exact']} bounds")
    if record["excluded"]:
        parts.append(f"{record['excluded']} left out")
    return ", ".join(parts)


def _stands_for(quantity: dict[str, Any]) -> str:
    return f"{quantity['value_type']} of {quantity['of']}" if quantity["of"] else ""


def _variable_row(name: str, variable: dict[str, Any]) -> list[str]:
    from calibrate.report import numbers

    family = variable["family"]
    family = ", ".join(family) if isinstance(family, list) else family
    given = ", ".join(f"{k} = {v}" for k, v in variable["arguments"].items())
    source = (
        ", ".join(filter(None, [f"records {variable['records']}", given])) if variable["records"] else given
    )
    if (above := variable["exceedances"]) is not None:
        threshold = f"{numbers.significant(above['threshold'])} {_unit(above['unit'])}".rstrip()
        source += f", {numbers.count(above['events'], 'event')} above {threshold} in {numbers.years(above['years'])}"
    if variable["sites"]:
        source += f", by class of sites.{variable['sites']}"
    if variable["pooled_shape"]:
        source += f", shape pooled over {', '.join(variable['pooled_shape'])}"
    if variable["period"] is not None:
        source += f", for {numbers.years(variable['period'])}"
    return [name, family, source, _unit(variable["unit"]), str(variable["dimension"])]


def _print_situations(summary: dict[str, Any]) -> None:
    situations = summary["situations"]
    source = f", from {situations['table']}" if situations["table"] else ""
    console.heading(f"Design situations ({situations['count']}{source})")
    rows = [_column_row(n, c) for n, c in (situations["axes"] | situations["columns"]).items()]
    rows += [_column_row(f"{n} (derived)", c) for n, c in situations["derived"].items()]
    if rows:
        console.table(
            ["axis or column", "levels", "smallest", "largest", "unit"],
            rows,
            [False, True, True, True, False],
        )
    weights = summary["weights"]
    console.line(
        f"Weight: {weights['expression']}; positive in {weights['positive']} of {situations['count']}."
    )


def _column_row(name: str, column: dict[str, Any]) -> list[str]:
    from calibrate.report import numbers

    if "labels" in column:
        return [name, str(column["labels"]), "–", "–", "labels"]
    low, high = (numbers.significant(column[k]) for k in ("smallest", "largest"))
    return [name, str(column["n"]), low, high, _unit(column["unit"])]


def _rule_lines(rule: dict[str, Any]) -> list[str]:
    lines = []
    if rule.get("design_check"):
        lines.append(f"design check  {rule['design_check']}")
    if rule.get("size"):
        unit = f" in {_unit(rule['size_unit'])}" if rule["size_unit"] else ""
        lines.append(f"sizes         {rule['size']}{unit} ({rule['size_dimension']})")
    lines.append(f"limit state   {rule['limit_state']}")
    lines.append(f"variables     {', '.join(rule['variables'])}")
    lines.append(f"factors       {', '.join(rule['factors'])}")
    return lines
