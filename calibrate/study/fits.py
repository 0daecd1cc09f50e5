"""The basic variables of a study that come from records: fit, choose, convert to SI."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from calibrate.distributions import Distribution, distribution
from calibrate.engine import stream
from calibrate.errors import Doubt, InputError, ProblemList
from calibrate.fitting import Comparison, Fit, compare
from calibrate.fitting.fit_tests import FitTests, run_fit_tests
from calibrate.fitting.lots import LotScatter, Pooling, lot_scatter, pooling, population
from calibrate.fitting.lots.grouping import Scale
from calibrate.fitting.modes import ModeFit, fit_modes
from calibrate.fitting.predictive import predictive
from calibrate.records import Sample
from calibrate.records.screening import FailureMode, failure_modes
from calibrate.study.component_tests import ResistanceResult, evaluate, own_scatter
from calibrate.study.exceedances import ExceedanceModel, exceedance_model
from calibrate.study.family_doubts import choice_doubts, rival_doubts
from calibrate.study.maxima import BlockMaxima, block_maxima, observed_blocks
from calibrate.study.model import Study, Variable
from calibrate.study.pooled import PooledStations, Pools, of_one_station, pooled_stations

WORTH_TESTING = 10.0
"""Candidates farther than this from the smallest AICc are out of the question without a test."""


@dataclass(frozen=True, slots=True)
class FittedVariable:
    """The fit that a variable uses, its rivals, and its distribution in SI units.

    Attributes
    ----------
    fit : Fit
        The chosen one.
    comparison : Comparison
        All candidates.
    distribution : Distribution
        As used, in SI units: the fit's, or the one that carries parameter uncertainty, or that of a lot.
    tests : mapping of str to FitTests
        By family; empty for samples with bounds.
    lots : LotScatter or None
        Where the records name lots.
    pooled : Pooling or None
    doubts : tuple of Doubt
        Of lots and of the choice among candidates; the fit has its own.
    """

    fit: Fit
    comparison: Comparison
    distribution: Distribution
    tests: Mapping[str, FitTests] = field(default_factory=dict)
    lots: LotScatter | None = None
    pooled: Pooling | None = None
    doubts: tuple[Doubt, ...] = ()
    fit_factor: float = 1.0
    """SI value of the unit of the records."""
    modes: tuple[ModeFit, ...] = ()
    """Failure modes fitted as competing risks, where the records name several."""
    maxima: BlockMaxima | None = None
    """Return levels, where the variable is an action with a period."""
    stations: PooledStations | None = None
    """The records that share its shape, where it is pooled."""

    @property
    def family(self) -> str:
        """Family of the fit."""
        return self.fit.family

    @property
    def n(self) -> int:
        """Number of specimens."""
        return self.fit.n


RecordModel = FittedVariable | ExceedanceModel
"""What a variable with records rests on."""


def fit_variables(
    study: Study, resistances: Mapping[str, ResistanceResult] | None = None
) -> dict[str, RecordModel]:
    """Fit every variable that names records.

    Parameters
    ----------
    study : Study
    resistances : mapping of str to ResistanceResult, optional
        Its component tests as evaluated; without them they are evaluated where a variable needs them.

    Returns
    -------
    dict
        By variable name, in the order of the study; variables without records
        are left out.

    Raises
    ------
    InputError
        For each variable whose sample is too small for its family or that no
        candidate fits, with the line of the variable in the study file.
    """
    problems = ProblemList(study.shown)
    fitted: dict[str, RecordModel] = {}
    pools: Pools = {}
    for name, variable in study.variables.items():
        if variable.records is None:
            continue
        try:
            if variable.exceedances is None:
                fitted[name] = _fit(study, variable, pools, resistances or {})
            else:
                fitted[name] = exceedance_model(study, variable)
        except InputError as error:
            for problem in error.problems:
                problems.add(f"[variables.{name}] {problem.message}", variable.line, problem.suggestion)
    problems.stop_if_any()
    return fitted


def _fit(
    study: Study, variable: Variable, pools: Pools, resistances: Mapping[str, ResistanceResult]
) -> FittedVariable:
    assert variable.records is not None
    sample = study.records[variable.records]
    fixed = _fixed_in_sample_unit(variable, sample.unit.factor)
    stations = pooled_stations(study, variable, pools)
    if stations is not None:
        fixed["shape"] = stations.found.shape
    modes = _modes(sample)
    blocks = observed_blocks(sample, study.blocks.get(variable.records))
    observations = blocks.observations
    if variable.failure_mode is not None:
        observations = next(m.observations for m in modes if m.name == variable.failure_mode)
    comparison = compare(
        observations,
        variable.families or None,
        method=variable.method,
        fixed=fixed,
        estimate=variable.estimate,
        options=variable.method_options,
    )
    chosen = comparison.best
    if chosen is None or chosen.distribution is None:
        reasons = "; ".join(f"{c.family}: {c.reason}" for c in comparison.candidates)
        raise InputError(f"No distribution can be fitted to records '{variable.records}' ({reasons}).")
    scatter, pooled, doubts = _lots(study, variable, sample, chosen)
    if variable.resistance is not None and not variable.stands_for:
        doubts = ()  # the evaluation of the tests says the same of their clusters
    used = _used(variable, chosen, scatter)
    tests = {
        c.family: found
        for c in comparison.candidates
        if c.converged and c.aicc - chosen.aicc < WORTH_TESTING
        if (found := run_fit_tests(c, stream(study.seed, "fit tests", variable.name, c.family))) is not None
    }
    if variable.resistance is not None:
        used = _own_scatter(study, variable, used, resistances)
    used, normalised = _with_normalisation(used, sample, f"variables.{variable.name}")
    doubts = (
        *doubts,
        *choice_doubts(variable, chosen, tests),
        *rival_doubts(variable, chosen),
        *normalised,
    )
    maxima, maxima_doubts = block_maxima(variable, chosen, blocks)
    if stations is not None:
        maxima_doubts = (*stations.doubts, *of_one_station(maxima_doubts, chosen.n))
    doubts = (*doubts, *maxima_doubts)
    mode_fits = fit_modes(modes, chosen.family) if len(modes) > 1 else ()
    return FittedVariable(
        fit=chosen,
        comparison=comparison,
        distribution=used.scaled(sample.unit.factor),
        tests=tests,
        lots=scatter,
        pooled=pooled,
        doubts=doubts,
        fit_factor=sample.unit.factor,
        modes=mode_fits,
        maxima=maxima,
        stations=stations,
    )


def _own_scatter(
    study: Study, variable: Variable, used: Distribution, resistances: Mapping[str, ResistanceResult]
) -> Distribution:
    """Return a model factor without the scatter that its tests are known to contain beside it."""
    name = variable.resistance or ""
    records = study.resistances[name]
    if not records.known_scatter:
        return used
    found = resistances.get(name) or evaluate(records, study.target_beta, study.seed)
    assert found.separation is not None
    return own_scatter(used, found.separation, name)


def _used(variable: Variable, chosen: Fit, scatter: LotScatter | None) -> Distribution:
    """Return the distribution that the variable stands for, in the unit of the records."""
    assert chosen.distribution is not None
    if variable.stands_for and scatter is not None:
        found = population(scatter, variable.stands_for, lot=variable.lot)  # type: ignore[arg-type]
        return distribution(found.family, **found.parameters)
    if not variable.predictive:
        return chosen.distribution
    wider = predictive(chosen)
    if wider is None:
        raise InputError(
            f"The method '{variable.method}' gives no covariance of the parameters here, so that there is no "
            "predictive distribution; use 'likelihood', or leave 'predictive' out."
        )
    return wider


def _lots(
    study: Study, variable: Variable, sample: Sample, chosen: Fit
) -> tuple[LotScatter | None, Pooling | None, tuple[Doubt, ...]]:
    """Analyse lots for a variable, and take what it stands for into account."""
    where = f"variables.{variable.name}"
    scatter, pooled, doubts = analyse_lots(sample, chosen.family, where, study.seed)
    if variable.stands_for and scatter is not None:
        found = population(scatter, variable.stands_for, lot=variable.lot, where=where)  # type: ignore[arg-type]
        # What was said of pooling is answered by the choice; the other doubts remain.
        doubts = (*(d for d in doubts if d.code != "lots-matter"), *found.doubts)
    return scatter, pooled, doubts


def analyse_lots(
    sample: Sample, family: str, where: str, seed: int
) -> tuple[LotScatter | None, Pooling | None, tuple[Doubt, ...]]:
    """Analyse lots where the records name them, from the specimens that were observed exactly.

    Parameters
    ----------
    sample : Sample
    family : str
        Of the fit: families of the location and scale type are analysed as measured, all others by their logarithms.
    where : str
        Place that doubts name.
    seed : int
    """
    if "lot" not in sample.labels:
        return None, None, ()
    exact = sample.observations.exact
    lots, values = sample.labels["lot"][exact], sample.observations.lower[exact]
    if values.size < 2 or np.ptp(values) == 0.0:
        return None, None, ()
    plain = family in ("normal", "gumbel", "gumbel_min", "student_t") or not (values > 0.0).all()
    scale: Scale = "as measured" if plain else "logarithmic"
    scatter = lot_scatter(values, lots, scale=scale, where=where)
    rng = stream(seed, "pooling", where)
    pooled = pooling(values, lots, rng, scale=scale) if len(scatter.shares) > 1 else None
    doubts = scatter.doubts
    if not sample.observations.complete:
        left = sample.n - int(np.count_nonzero(exact))
        text = (
            f"The scatter between and within lots comes from specimens observed exactly; {left} known by bounds "
            "are left out of it, which makes it smaller than it is."
        )
        doubts = (*doubts, Doubt("lots-of-exact-values", text, where))
    return scatter, pooled, doubts


def _modes(sample: Sample) -> tuple[FailureMode, ...]:
    if "mode" not in sample.labels:
        return ()
    return failure_modes(sample.observations, [str(m) or None for m in sample.labels["mode"]])


def _with_normalisation(
    used: Distribution, sample: Sample, where: str
) -> tuple[Distribution, tuple[Doubt, ...]]:
    """Carry the scatter of fitted exponents: the mean variance that it adds to the logarithm of a specimen."""
    if sample.normalisation is None:
        return used, ()
    added = float(np.mean(sample.normalisation.added_variance))
    if not added > 0.0:
        return used, ()
    share = f"a cov of {np.sqrt(added):.2g}"
    if used.family.name == "lognormal":
        median, log_sd = (float(v) for v in used.values)
        text = f"The exponents of the normalisation are estimates; their scatter, {share}, was added to the variable."
        wider = distribution("lognormal", median=median, log_sd=float(np.sqrt(log_sd**2 + added)))
        return wider, (Doubt("normalisation-carried", text, where),)
    if used.family.name == "normal":
        location, scale = (float(v) for v in used.values)
        text = f"The exponents of the normalisation are estimates; their scatter, {share}, was added to the variable."
        wider = distribution(
            "normal", location=location, scale=float(np.sqrt(scale**2 + location**2 * added))
        )
        return wider, (Doubt("normalisation-carried", text, where),)
    text = (
        f"The exponents of the normalisation are estimates; their scatter, {share}, is not in the variable. It is "
        "carried for the families normal and lognormal."
    )
    return used, (Doubt("normalisation-not-carried", text, where),)


def _fixed_in_sample_unit(variable: Variable, factor: float) -> dict[str, float]:
    """Return the parameters that stay fixed (threshold, bounds) in the unit of the records."""
    fixed: dict[str, float] = {}
    for name, expression in variable.arguments.items():
        value = expression.constant
        if value is None:
            raise InputError(f"'{name}' of a variable with records must be a constant.")
        fixed[name] = value / factor if name in UNIT_BEARING else value
    return fixed


UNIT_BEARING = frozenset({"threshold", "lower", "upper"})


def fit_doubts(fitted: Mapping[str, RecordModel]) -> list[Doubt]:
    """Return the reservations of the chosen fits, placed at their variables."""
    doubts: list[Doubt] = []
    for name, variable in fitted.items():
        if isinstance(variable, FittedVariable):
            doubts += [Doubt(d.code, d.message, f"variables.{name}") for d in variable.fit.doubts]
        doubts += variable.doubts
    return doubts
