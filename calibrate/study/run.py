"""The main job: a study in, a result out."""

from __future__ import annotations

import dataclasses
import datetime
import time
from collections.abc import Callable

import numpy as np

from calibrate.errors import Doubt, InputError, Problem
from calibrate.factors import Calibration, Response, RuleModel, calibrate_factors, make_penalty
from calibrate.provenance import Provenance, versions
from calibrate.study.accompanying import accompanying_table
from calibrate.study.assemble import basic_variables, rule_models, system_models
from calibrate.study.bonds import implied_biases
from calibrate.study.combinations import combination_table, doubts_of_combination
from calibrate.study.component_tests import evaluate_resistances
from calibrate.study.doubts import study_doubts
from calibrate.study.evidence_doubts import pedigree
from calibrate.study.exact_combination import exact_combination
from calibrate.study.exceedances import ExceedanceModel
from calibrate.study.fits import FittedVariable, fit_variables
from calibrate.study.model import Study
from calibrate.study.other_periods import other_periods, period_doubts
from calibrate.study.result import Result
from calibrate.study.screening import screen_records
from calibrate.study.sensitivity import elasticity_table
from calibrate.study.sites import site_beta, site_doubts, site_table
from calibrate.study.systems import system_doubts, system_table
from calibrate.study.tables import (
    factor_table,
    required_table,
    row_weights,
    situation_table,
    used_distributions,
    variable_results,
)
from calibrate.study.tested_range import beyond_tests
from calibrate.study.uncertainty_ledger import uncertainty_ledger
from calibrate.study.verification import (
    calibrate_verified,
    verification_doubts,
    verification_table,
    verifications,
)

Progress = Callable[[str, float], None]


def _silent(text: str, fraction: float) -> None:
    del text, fraction


def run(
    study: Study,
    *,
    workers: int = 1,
    seed: int | None = None,
    command: str = "python",
    progress: Progress | None = None,
) -> Result:
    """Calibrate the factors of a study.

    Parameters
    ----------
    study : Study
        As returned by ``read_study``.
    workers : int
        Threads that share the design situations; results do not depend on it.
    seed : int, optional
        Replaces the study's seed.
    command : str
        Recorded in the provenance.
    progress : callable, optional
        Called as ``progress(text, fraction)`` while the run goes on.

    Returns
    -------
    Result
        Factors, reliability of every design situation, doubts, provenance.

    Raises
    ------
    InputError
        Where the study cannot be computed as it stands: samples too small for
        their family, models without meaning in some situation, fewer
        situations with weight than free factors, negative mass that matters.
    """
    report = progress or _silent
    started, clock = datetime.datetime.now(datetime.UTC), time.perf_counter()
    if seed is not None:
        study = dataclasses.replace(study, seed=seed)

    report("Fitting distributions", 0.0)
    resistances = evaluate_resistances(study)
    fitted = fit_variables(study, resistances)
    screenings = screen_records(study)
    variables = basic_variables(study, fitted)
    models = rule_models(study, variables)
    response, calibration, unsettled = _calibrate(study, models, workers, report)
    report("Verifying the reliability index", 0.8)
    weight = row_weights(study)
    verified = verifications(
        study,
        calibration,
        weight,
        workers,
        lambda f: report("Verifying the reliability index", 0.8 + 0.1 * f),
    )

    of_systems = system_table(study, calibration, verified)

    report("Collecting results", 0.95)
    sets = (calibration.present, calibration.optimal, calibration.proposed)
    table, units = situation_table(study, calibration, verified.get("proposed"))
    biases, bias_doubts = implied_biases(study, used_distributions(study, calibration))
    periods = other_periods(study, fitted, calibration, response.correction, workers)
    exact = exact_combination(study, variables, models, calibration, workers)
    by_site = site_beta(study, variables, models, calibration, workers)
    screening_doubts = [d for name, s in screenings.items() for d in s.doubts(f"records.{name}")]
    doubts = (
        *study.doubts,
        *screening_doubts,
        *bias_doubts,
        *study_doubts(study, fitted, calibration),
        *period_doubts(study, periods),
        *doubts_of_combination(study, calibration),
        *(d for r in resistances.values() for d in (*r.doubts, *uncertainty_ledger(study, r).doubts)),
        *beyond_tests(study),
        *(() if exact is None else exact.doubts),
        *site_doubts(study, by_site, weight),
        *verification_doubts(study, verified, weight),
        *unsettled,
        *system_doubts(study, of_systems),
        *calibration.doubts,
    )
    unconverged = sum(int(np.count_nonzero(~np.isfinite(s.evaluation.beta))) for s in sets[2:])
    return Result(
        study=study,
        variables=variable_results(study, fitted, calibration),
        factors=factor_table(study, calibration),
        situations=table,
        units=units,
        required=required_table(study, response, calibration),
        fitted={name: f for name, f in fitted.items() if isinstance(f, FittedVariable)},
        exceedances={name: f for name, f in fitted.items() if isinstance(f, ExceedanceModel)},
        screenings=screenings,
        biases=biases,
        pedigree=pedigree(study, calibration),
        resistances=resistances,
        other_periods=periods,
        combinations=combination_table(study, calibration, exact),
        accompanying=accompanying_table(study, variables, models, calibration),
        sites=site_table(study, by_site),
        site_beta=by_site,
        verifications=verified,
        verification=verification_table(study, verified),
        correction=response.correction,
        systems=of_systems,
        elasticities=elasticity_table(study, calibration),
        calibration=calibration,
        doubts=_unique(doubts),
        constraint_failures=calibration.constraint_failures,
        unconverged=unconverged,
        provenance=Provenance(
            versions(), started.isoformat(timespec="seconds"), time.perf_counter() - clock, command
        ),
    )


def _calibrate(
    study: Study, models: list[RuleModel], workers: int, report: Progress
) -> tuple[Response, Calibration, tuple[Doubt, ...]]:
    """Return the response with what was added to the index of FORM, the calibration, and doubts about these."""
    response = Response(models, study.factors, workers=workers, systems=system_models(study))
    weight = response.weight

    def solve(response: Response) -> Calibration:
        return calibrate_factors(
            response,
            study.factors,
            weight,
            study.target_beta,
            make_penalty(study.objective.penalty, study.objective.scale),
            study.objective.floor,
            progress=lambda text, fraction: report(text, 0.05 + 0.75 * fraction),
        )

    try:
        if study.objective.index == "verified":
            return calibrate_verified(study, response, weight, solve, workers)
        return response, solve(response), ()
    except InputError as error:
        raise InputError(
            [p if p.file else Problem(p.message, study.shown, p.line, p.suggestion) for p in error.problems]
        ) from error


def _unique(doubts: tuple[Doubt, ...]) -> tuple[Doubt, ...]:
    return tuple(dict.fromkeys(doubts))
