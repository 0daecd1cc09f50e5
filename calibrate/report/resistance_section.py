"""All that the report shows of the component tests of a study, in the order of its templates."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from calibrate.report import resistance, resistance_evidence, resistance_routes
from calibrate.report.resistance_figures import covariate_figures
from calibrate.study.uncertainty_ledger import uncertainty_ledger

if TYPE_CHECKING:
    from calibrate.study.component_tests import ResistanceResult
    from calibrate.study.result import Result


def resistance_sections(result: Result) -> dict[str, dict[str, Any]]:
    """Return tables and sentences of every resistance by its name; a table that is not there is None."""
    drawn = covariate_figures(result.resistances)
    return {
        name: {
            **_section(result, found),
            "covariate_figures": [(c, figure) for (owner, c), figure in drawn.items() if owner == name],
        }
        for name, found in result.resistances.items()
    }


def _section(result: Result, found: ResistanceResult) -> dict[str, Any]:
    evidence = resistance_evidence
    clusters, separation, american = found.clusters, found.separation, found.north_american
    return {
        "description": found.records.description,
        "sentence": resistance.tests_sentence(found),
        "stopped": found.records.tests.n - found.records.tests.n_failed,
        "measured": found.records.measured,
        "unit": found.records.unit.text,
        "formula": resistance.prediction_formula(found.records),
        "columns": resistance.prediction_units(found.records),
        "steps": resistance.steps_table(found.annex),
        "normality": resistance.normality_sentence(found.annex),
        "subsets": resistance.subsets_table(found),
        "subsets_sentence": resistance.subsets_sentence(found),
        "trends": evidence.trend_table(found.trends),
        "trend_sentence": evidence.trend_sentence(found.trends),
        "options": [(o.covariate, evidence.options_table(o)) for o in found.options],
        "options_sentence": evidence.options_sentence(found),
        "clusters": None
        if clusters is None
        else (
            evidence.cluster_table(clusters, found.direct.n),
            evidence.left_out_table(clusters),
            evidence.cluster_sentence(clusters),
        ),
        "separation": None
        if separation is None
        else (evidence.separation_table(separation), evidence.separation_sentence(separation)),
        "american": None
        if american is None
        else (
            resistance_routes.american_table(american),
            resistance_routes.american_sentence(american),
            american.format.name,
        ),
        "mean_value": None
        if found.mean_value is None
        else (resistance_routes.mean_value_table(found), resistance_routes.mean_value_sentence(found)),
        "routes": resistance_routes.routes_table(found),
        "why": resistance_routes.why_routes_differ(found),
        "ledger": resistance_routes.ledger_table(uncertainty_ledger(result.study, found)),
    }
