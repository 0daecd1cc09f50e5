"""``calibrate resistance``: a table of component tests against prediction, evaluated by every route."""

from __future__ import annotations

import json as json_module
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from calibrate.cli import console
from calibrate.cli.options import Json, Quiet, Seed

if TYPE_CHECKING:
    from calibrate.errors import InputError, Problem
    from calibrate.study.component_records import TestTable
    from calibrate.units import Unit

HELP = "Evaluate component tests against prediction: model factor, design value and factor by every route."


def resistance(
    file: Annotated[
        Path, typer.Argument(metavar="FILE", help="CSV, XLSX or Parquet file.", show_default=False)
    ],
    measured: Annotated[
        str,
        typer.Option(
            "--measured", metavar="NAME", help="Column of the measured capacity.", show_default=False
        ),
    ],
    prediction: Annotated[
        str,
        typer.Option(
            "--prediction", metavar="TEXT", help="Column, or expression in columns.", show_default=False
        ),
    ],
    unit: Annotated[str, typer.Option("--unit", metavar="U", help="Unit of the capacity, such as kN.")] = "",
    units: Annotated[
        str,
        typer.Option("--units", metavar="LIST", help="Units of columns, such as 'f_y=MPa,t=mm'."),
    ] = "",
    column_unit: Annotated[
        list[str] | None,
        typer.Option(
            "--column-unit", metavar="NAME=U", help="Unit of one column; may be repeated.", show_default=False
        ),
    ] = None,
    survived: Annotated[
        str | None,
        typer.Option("--survived", metavar="NAME", help="Column that flags survivors.", show_default=False),
    ] = None,
    subgroup: Annotated[
        str | None,
        typer.Option("--subgroup", metavar="NAME", help="Column of subgroups.", show_default=False),
    ] = None,
    cluster: Annotated[
        str | None,
        typer.Option(
            "--cluster", metavar="NAME", help="Column of sites, studies or laboratories.", show_default=False
        ),
    ] = None,
    inputs: Annotated[
        list[str] | None,
        typer.Option(
            "--input",
            metavar="NAME",
            help="A column to search for a trend; may be repeated. By default those of the prediction.",
            show_default=False,
        ),
    ] = None,
    nominal: Annotated[
        list[str] | None,
        typer.Option(
            "--nominal",
            metavar="NAME",
            help="A column of nominal values, which the prediction must not use; may be repeated.",
            show_default=False,
        ),
    ] = None,
    cov: Annotated[
        list[str] | None,
        typer.Option(
            "--cov",
            metavar="NAME=X",
            help="Coefficient of variation of a basic variable; may be repeated.",
            show_default=False,
        ),
    ] = None,
    nominal_ratio: Annotated[
        float | None,
        typer.Option(
            "--nominal-ratio",
            metavar="X",
            help="Prediction from nominal over that from mean values, for gamma_M*.",
            show_default=False,
        ),
    ] = None,
    known: Annotated[
        list[str] | None,
        typer.Option(
            "--known",
            metavar="NAME=X",
            help="Scatter in the tests that is not the model's, such as measurement=0.03; may be repeated.",
            show_default=False,
        ),
    ] = None,
    target: Annotated[
        float, typer.Option("--target", metavar="BETA", help="Target reliability index.")
    ] = 3.8,
    table_factors: Annotated[
        bool, typer.Option("--table-factors", help="Factors k as printed in EN 1990, Tables D1 and D2.")
    ] = False,
    sheet: Annotated[
        str | None, typer.Option("--sheet", help="Sheet of an XLSX file.", show_default=False)
    ] = None,
    json: Json = False,
    seed: Seed = None,
    quiet: Quiet = False,
) -> None:
    """Read, check, evaluate, print."""
    with console.guarded():
        from calibrate.errors import InputError
        from calibrate.records import TextForm
        from calibrate.study.component_records import TestTable, component_records
        from calibrate.study.component_tests import evaluate
        from calibrate.study.resistance_export import FORMAT, resistance_content

        asked = TestTable(
            name=file.stem,
            file=str(file),
            measured=measured,
            prediction=prediction,
            unit=_unit(unit, "--unit"),
            units=_units(units, column_unit or []),
            inputs=tuple(inputs or ()),
            nominal=tuple(nominal or ()),
            survived=survived,
            subgroup=subgroup,
            cluster=cluster,
            sheet=sheet,
            form=TextForm(),
            covs=_numbers(cov or [], "--cov"),
            known_scatter=_numbers(known or [], "--known"),
        )
        _check(asked, nominal_ratio, target)
        records = component_records(file, asked, nominal_ratio=nominal_ratio, table_factors=table_factors)
        try:
            found = evaluate(records, target, seed or 0)
        except InputError as error:
            raise InputError(_at(str(file), error)) from error
        if json:
            content = {
                "format": FORMAT,
                "target_beta": target,
                "seed": seed or 0,
                **resistance_content(found),
            }
            console.data(json_module.dumps(content, indent=2, ensure_ascii=False, allow_nan=False))
        elif not quiet:
            from calibrate.cli.resistance_page import print_evaluation

            print_evaluation(found, target)


def _at(place: str, error: InputError) -> list[Problem]:
    from calibrate.errors import Problem

    return [p if p.file else Problem(p.message, place, p.line, p.suggestion) for p in error.problems]


def _unit(text: str, option: str) -> Unit:
    from calibrate.errors import InputError
    from calibrate.units import ONE, parse_unit

    try:
        return parse_unit(text) if text else ONE
    except InputError as error:
        raise InputError(_at(option, error)) from None


def _pairs(texts: list[str], option: str, example: str) -> dict[str, str]:
    from calibrate.errors import InputError, Problem

    found: dict[str, str] = {}
    for text in texts:
        name, mark, value = (part.strip() for part in text.partition("="))
        if not (name and mark and value):
            raise InputError(Problem(f"'{text}' is no NAME=VALUE.", option, None, f"Write {example}."))
        if name in found:
            raise InputError(Problem(f"'{name}' is given twice.", option))
        found[name] = value
    return found


def _units(text: str, single: list[str]) -> dict[str, Unit]:
    from calibrate.errors import InputError, Problem

    listed = _pairs([t for t in text.split(",") if t.strip()], "--units", "'f_y=MPa,t=mm'")
    alone = _pairs(single, "--column-unit", "f_y=MPa")
    if both := [name for name in alone if name in listed]:
        raise InputError(Problem(f"'{both[0]}' has a unit in --units as well.", "--column-unit"))
    found = {name: _unit(value, "--units") for name, value in listed.items()}
    return {**found, **{name: _unit(value, "--column-unit") for name, value in alone.items()}}


def _numbers(texts: list[str], option: str) -> dict[str, float]:
    from calibrate.errors import InputError, Problem

    found = {}
    for name, value in _pairs(texts, option, "NAME=NUMBER, such as f_y=0.05").items():
        try:
            found[name] = float(value)
        except ValueError:
            hint = "Write NAME=NUMBER, such as f_y=0.05."
            raise InputError(Problem(f"'{value}' of '{name}' is no number.", option, None, hint)) from None
    return found


_OPTIONS = {"prediction": "--prediction", "units": "--units", "covs": "--cov", "known_scatter": "--known"}


def _check(asked: TestTable, nominal_ratio: float | None, target: float) -> None:
    """Tell everything that is wrong with the options at once."""
    import math

    from calibrate.errors import InputError, Problem
    from calibrate.study.component_records import slips

    problems = [Problem(f"{_OPTIONS[key]} {p.message}", suggestion=p.suggestion) for key, p in slips(asked)]
    for option, number in (("--nominal-ratio", nominal_ratio), ("--target", target)):
        if number is not None and not (math.isfinite(number) and number > 0.0):
            problems.append(Problem(f"{option} is {number:g}; it must be above zero."))
    if problems:
        raise InputError(problems)
