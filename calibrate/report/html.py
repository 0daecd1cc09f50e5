"""report.html: one file that holds everything it needs, the same byte for byte for the same result."""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import cache
from typing import TYPE_CHECKING, Any

from calibrate.report import (
    dependence,
    elasticities,
    evidence,
    inputs,
    numbers,
    outcome,
    pooled,
    return_figure,
    sample_figure,
    sites,
    symbols,
    systems,
    tail_figure,
    threshold_figure,
    verification,
    verification_figure,
)
from calibrate.report.axis_figure import BY_RULE, panel_axes
from calibrate.report.exceedance_tables import exceedance_sentence, exceedance_table
from calibrate.report.figures import tail_of
from calibrate.report.fit_files import candidate_table
from calibrate.report.ladder_table import ladder_table
from calibrate.report.outcome import CONVERGED, GROUP_ALPHA, GROUP_POINT
from calibrate.report.probability_paper import CAPTION
from calibrate.report.resistance_section import resistance_sections
from calibrate.report.sensitivities import sensitivities, sensitivity_table
from calibrate.report.symbols import Html
from calibrate.study.other_periods import WHY

if TYPE_CHECKING:
    from jinja2 import Environment

    from calibrate.report.style import Rendered
    from calibrate.report.table import Table
    from calibrate.study.result import Result

MOST_ROWS = 2000
"""A longer table of situations shows only its extremes; situations.csv has all rows."""
EXTREMES = 25
WINNERS = 5

_IDENTIFIER = re.compile(r'\b(id="|xlink:href="#|href="#|url\(#)')
_SIZE = re.compile(r'<svg [^>]*?viewBox="([^"]*)"[^>]*>', re.DOTALL)
_PROLOGUE = re.compile(r"^.*?(?=<svg )", re.DOTALL)
_METADATA = re.compile(r"<metadata>.*?</metadata>\s*", re.DOTALL)


def inline_svg(svg: bytes, prefix: str, title: str) -> Html:
    """Return an SVG file as an element of a page.

    Its identifiers get a prefix, so that figures do not borrow one another's
    parts; size follows the page; the title is read to those who cannot see it.
    """
    text = _METADATA.sub("", _PROLOGUE.sub("", svg.decode("utf-8"), count=1))
    text = _IDENTIFIER.sub(lambda m: m[1] + prefix + "-", text)
    box = _SIZE.search(text)
    assert box is not None, "an SVG of matplotlib has a view box"
    width, height = box[1].split()[2:]
    opening = (
        '<svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" '
        f'viewBox="{box[1]}" style="max-width:{float(width):.0f}pt;aspect-ratio:{width}/{height}" '
        f'role="img" aria-label="{symbols.escaped(title)}">'
    )
    return Html(text[: box.start()] + opening + text[box.end() :].rstrip())


def report_html(result: Result, figures: Mapping[str, Rendered]) -> bytes:
    """Return the report of a result with its figures as one HTML page."""
    return environment().get_template("report.html.j2").render(_content(result, figures)).encode("utf-8")


def prepare() -> None:
    """Compile the templates and climb the ladder of checks, which a page needs later."""
    ladder()
    for name in environment().list_templates(extensions=["j2"]):
        environment().get_template(name)


@cache
def ladder() -> Table:
    """Return the checks of the tool on problems with known answers; the same for every result."""
    from calibrate.study.ladder import run_ladder

    return ladder_table(run_ladder())


@cache
def environment() -> Environment:
    """Return the templates, which escape everything."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("calibrate.report", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters["name"] = symbols.html
    environment.filters["path"] = symbols.path
    environment.filters["running"] = symbols.running
    return environment


def _content(result: Result, figures: Mapping[str, Rendered]) -> dict[str, Any]:
    study = result.study
    changes = outcome.size_changes(result)
    found = sensitivities(result)
    losers = outcome.extreme_rows(changes, WINNERS)
    shown = _shown_rows(result)
    drawn = {name: inline_svg(f.svg, f"f{i}", name) for i, (name, f) in enumerate(figures.items(), 1)}
    return {
        "n": numbers,
        "study": study,
        "digest": study.sha256[: inputs.DIGEST_SHOWN],
        "summary": [" ".join(p.split()) for p in re.split(r"\n\s*\n", study.summary.strip())],
        "period": numbers.years(study.reference_period),
        "count": len(result.situations),
        "result": result,
        "figures": drawn,
        "axis_figures": [] if (axes := panel_axes(result)) == [BY_RULE] else axes,
        "brief": _brief(result, changes),
        "factors": outcome.factor_table(result),
        "beta": outcome.beta_table(result),
        "brief_factors": outcome.factor_table(result).without("optimal", "bounds", "step"),
        "brief_beta": outcome.beta_table(result).without("objective", "worst", "rms from target"),
        "records": inputs.record_table(result),
        "variables": inputs.variable_table(result),
        "one_period": all(v.parameters_period == study.reference_period for v in result.variables.values()),
        "correlations": dependence.correlation_table(result),
        "conditional": dependence.conditional_variables(study),
        "parameters": inputs.parameter_table(result),
        "quantities": inputs.quantity_table(result),
        "axes": inputs.axis_table(result),
        "derived": inputs.derived_formulas(result),
        "rules": inputs.rule_texts(result),
        "fitted": {
            name: (v, candidate_table(v.comparison))
            for name, v in result.variables.items()
            if v.comparison is not None
        },
        "how_read": evidence.how_read(study.records),
        "exclusions": evidence.exclusion_table(study.records),
        "screening": evidence.screening_table(result.screenings) if result.screenings else None,
        "findings": evidence.findings(result.screenings),
        "tests": {
            name: evidence.comparison_table(f.comparison, f.tests) for name, f in result.fitted.items()
        },
        "verdicts": {
            name: evidence.verdict(f.comparison, f.tests, tail_of(result, name))
            for name, f in result.fitted.items()
        },
        "lots": {
            name: (
                evidence.lot_table(f.lots),
                evidence.lot_sentences(f.lots, f.pooled, study.variables[name].stands_for),
            )
            for name, f in result.fitted.items()
            if f.lots is not None
        },
        "shapes": {name: pooled.shape_sentence(f) for name, f in result.fitted.items()},
        "stations": {
            name: pooled.station_table(f.stations)
            for name, f in result.fitted.items()
            if f.stations is not None
        },
        "return_levels": {
            name: evidence.return_level_table(levels) for name, levels in result.return_levels.items()
        },
        "exceedances": {
            name: (exceedance_table(f, inputs.unit_of_records(result, name)), exceedance_sentence(f))
            for name, f in result.exceedances.items()
        },
        "resistances": resistance_sections(result),
        "modes": {name: evidence.mode_table(f.modes) for name, f in result.fitted.items() if f.modes},
        "bonds": evidence.bond_table(result),
        "pedigree": evidence.pedigree_table(result),
        "captions": {
            "sample": sample_figure.CAPTION,
            "tail": tail_figure.CAPTION,
            "return": return_figure.CAPTION,
            "return_of_events": return_figure.CAPTION_OF_EVENTS,
            "threshold": threshold_figure.CAPTION,
        },
        "periods": outcome.period_table(result),
        "combination": outcome.combination_table(result),
        "accompanying": outcome.accompanying_table(result),
        "sites": sites.site_beta_table(result),
        "site_classes": sites.class_table(result),
        "why_periods": WHY,
        "systems": systems.system_table(result),
        "systems_described": systems.described(result),
        "by_rule": outcome.judged_table(result),
        "verification": verification.verification_table(result),
        "verification_brief": verification.brief_sentence(result),
        "verification_rows": {k: verification.simulated_table(result, k) for k in result.verifications},
        "verification_shown": {k: verification.shown_sentence(result, k) for k in result.verifications},
        "verification_caption": verification_figure.CAPTION,
        "sized": any(r.size is not None for r in study.rules.values()),
        "sizes": outcome.size_table(result, changes) if changes else None,
        "smaller": _rows(result, losers[0]),
        "larger": _rows(result, losers[1]),
        "lattice": outcome.lattice_table(result),
        "rounding": outcome.rounding_cost(result),
        "sensitivity": sensitivity_table(result, found) if found else None,
        "elasticities": elasticities.variable_elasticities(result),
        "other_elasticities": elasticities.other_elasticities(result),
        "situations": outcome.situation_table(result, shown),
        "all_converged": bool((result.situations["status"] == CONVERGED).all()),
        "all_shown": shown is None,
        "extremes": EXTREMES,
        "missing": _rows(result, outcome.without_beta(result)[:EXTREMES]),
        "classes": {GROUP_ALPHA: "ga", GROUP_POINT: "gp"},
        "described_factors": [
            (f.name, t) for f in study.factors if (t := study.factor_descriptions.get(f.name))
        ],
        "weight_formula": _weight(study.weight_text),
        "axis_caption": _axis_caption(result),
        "fit_methods": _fit_methods(result),
        "paper_caption": CAPTION,
        "unit_of": inputs.unit_of,
        "unit_of_records": inputs.unit_of_records,
        "ladder": ladder(),
        "penalty": symbols.formula(_penalty(study.objective.penalty)),
    }


def _rows(result: Result, rows: list[int]) -> Table | None:
    return outcome.place_table(result, rows) if rows else None


def _shown_rows(result: Result) -> list[int] | None:
    """Return None for all rows, or those with the smallest and largest beta and those without."""
    if len(result.situations) <= MOST_ROWS:
        return None
    beta = result.situations["beta_proposed"]
    low, high = beta.nsmallest(EXTREMES).index, beta.nlargest(EXTREMES).index[::-1]
    missing = outcome.without_beta(result)[:EXTREMES]
    return list(dict.fromkeys([*map(int, low), *map(int, high), *missing]))


def _brief(result: Result, changes: list[outcome.SizeChange]) -> dict[str, Any]:
    """Return the sentences of the first page: what moved, and by how much."""
    calibration = result.calibration
    present, proposed = calibration.present, calibration.proposed
    moved = []
    for factor in result.study.factors:
        before, after = present.factors[factor.name], proposed.factors[factor.name]
        if not factor.held and before != after:
            moved.append(
                Html(
                    f"{symbols.html(factor.name)} from {numbers.factor(before, factor.step)} "
                    f"to {numbers.factor(after, factor.step)}"
                )
            )
    worst = proposed.worst
    return {
        "moved": moved,
        "unmoved": [f.name for f in result.study.factors if f.name not in _moved_names(result)],
        "worst": None if worst is None else outcome.place(result, worst),
        "worst_row": None if worst is None else result.situations.iloc[worst],
        "sizes": changes,
        "present": present,
        "proposed": proposed,
    }


def _moved_names(result: Result) -> set[str]:
    calibration = result.calibration
    return {
        f.name
        for f in result.study.factors
        if calibration.present.factors[f.name] != calibration.proposed.factors[f.name]
    }


def _penalty(name: str) -> Any:
    from calibrate.expressions import parse

    texts = {
        "squared": "(beta - beta_T)**2",
        "asymmetric": "(beta - beta_T)/d - 1 + exp(-(beta - beta_T)/d)",
        "minimax": "abs(beta - beta_T)",
    }
    return parse(texts[name])


def _weight(text: str) -> Html:
    from calibrate.expressions import parse

    try:
        return symbols.formula(parse(text))
    except ValueError:  # a column of the table whose name the study gives in another form
        return symbols.escaped(text)


def _fit_methods(result: Result) -> str:
    words = {"likelihood": "maximum likelihood", "moments": "the method of moments"}
    used = dict.fromkeys(result.study.variables[name].method for name in result.fitted)
    return " or ".join(words.get(method, method.replace("_", " ")) for method in used)


def _axis_caption(result: Result) -> str:
    floor = ", dashed: floor" if result.study.objective.floor is not None else ""
    marks = "Marks by rule," if len(result.study.judged) > 1 else "Marks are"
    return (
        f"every design situation with present and proposed factors; horizontal line: target{floor}. "
        f"{marks} larger with more weight; lines: weighted means of several situations."
    )
