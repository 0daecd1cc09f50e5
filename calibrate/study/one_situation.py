"""One design situation under the lens: every method on one limit state, and what its index depends on."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution, Extreme, Mixture
from calibrate.factors import NONE
from calibrate.reliability import Problem as LimitStateProblem
from calibrate.reliability import Reliability
from calibrate.reliability.conditional import Conditional
from calibrate.reliability.further_points import FurtherPoints, further_points
from calibrate.reliability.second_order import SecondOrder, second_order
from calibrate.reliability.series_of_points import series_probability
from calibrate.reliability.simulation import Simulation, simulate
from calibrate.reliability.solvers import solve
from calibrate.reliability.trace import SEARCHED, STEP, Trace, trace
from calibrate.study.assemble import basic_variables, rule_models
from calibrate.study.fits import fit_variables
from calibrate.study.index_curve import Curve, curve, values_between
from calibrate.study.index_inverse import Required, required
from calibrate.study.index_question import Asked, check_question
from calibrate.study.index_scene import Scene, chosen_rule, chosen_situation, evaluated, scene
from calibrate.study.index_varied import present_size, varied
from calibrate.study.model import Rule, Study
from calibrate.study.run import run
from calibrate.study.tables import size_unit
from calibrate.units import Unit

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

SAME_POINT = 1e-6
"""Difference of beta from which the iteration from the medians did not lead to the design point."""


@dataclass(frozen=True, slots=True)
class Place:
    """An axis or column of the situation: a number in ``unit``, or a text."""

    name: str
    value: float | str
    unit: Unit


@dataclass(frozen=True, slots=True)
class VariableAt:
    """A basic variable in the situation; moments in ``unit``.

    ``given`` names the variables on which its model depends; family and moments are then those at their medians.
    """

    name: str
    family: str
    mean: float
    sd: float
    cov: float
    unit: Unit
    given: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Analysis:
    """What the methods found; every array is of one situation.

    Attributes
    ----------
    problem : Problem
        The limit state on standard normal space.
    reliability : Reliability
    trace : Trace
    second_order : SecondOrder
    further : FurtherPoints
    series : float
        Index from all design points as a series system.
    simulation : Simulation or None
        None where none was asked for.
    solvers : tuple of (str, Reliability)
        Those asked for.
    """

    problem: LimitStateProblem
    reliability: Reliability
    trace: Trace
    second_order: SecondOrder
    further: FurtherPoints
    series: float
    simulation: Simulation | None
    solvers: tuple[tuple[str, Reliability], ...]


@dataclass(frozen=True, slots=True, eq=False)
class OneSituation:
    """Everything that was found about one rule in one design situation.

    Attributes
    ----------
    study : Study
    rule : Rule
    number : int
        From 1.
    asked : Asked
    place : tuple of Place
    factors : mapping of str to float
        All of them, as used.
    size : float
        In ``size_unit``; NaN where there is none.
    size_unit : Unit or None
        None where the rule sizes nothing.
    variables : tuple of VariableAt
        In the order of the limit state.
    alternatives : mapping of str to float
        Index of each alternative by its leading action; empty without combination.
    leading : str
        Leading action of the alternative that is looked at; empty without combination.
    beta : float
        By FORM; NaN where there is none.
    status : str
        How FORM ended.
    analysis : Analysis or None
        None where there is no size.
    curve : Curve or None
    required : Required or None
    """

    study: Study
    rule: Rule
    number: int
    asked: Asked
    place: tuple[Place, ...]
    factors: Mapping[str, float]
    size: float
    size_unit: Unit | None
    variables: tuple[VariableAt, ...]
    alternatives: Mapping[str, float]
    leading: str
    beta: float
    status: str
    analysis: Analysis | None
    curve: Curve | None
    required: Required | None

    @property
    def dependent(self) -> bool:
        """Whether basic variables depend on one another."""
        return self.analysis is not None and self.analysis.problem.dependent


def one_situation(
    study: Study, asked: Asked, *, seed: int | None = None, progress: Progress | None = None
) -> OneSituation:
    """Look at one rule in one design situation.

    Parameters
    ----------
    study : Study
        As returned by ``read_study``.
    asked : Asked
    seed : int, optional
        Replaces the study's seed.
    progress : callable, optional
        Called as ``progress(text, fraction)``.

    Raises
    ------
    InputError
        What is asked does not fit the study, or the study cannot be computed.
    """
    say = progress or _silent
    if seed is not None:
        study = dataclasses.replace(study, seed=seed)
    rule, number = chosen_rule(study, asked.rule), chosen_situation(study, asked.situation)
    check_question(study, asked)
    say("Fitting distributions", 0.05)
    fitted = fit_variables(study)
    models = rule_models(study, basic_variables(study, fitted))
    model = models[list(study.rules).index(rule.name)]
    factors = {f.name: float(f.present) for f in study.factors}
    # What is asked is checked before a long calibration.
    here = scene(study, rule, number, model, {**factors, **asked.factors}, asked.leading)
    if asked.on != "present":
        calibration = run(study, progress=lambda text, part: say(text, 0.1 + 0.6 * part)).calibration
        factors = dict(getattr(calibration, asked.on).factors)
        here = scene(study, rule, number, model, {**factors, **asked.factors}, asked.leading)
    say("Reliability of the situation", 0.7)
    answer = evaluated(here.model)
    size = present_size(answer)
    what = None if asked.against is None else varied(here, asked.against, size)
    values = None if what is None else values_between(what, asked.low, asked.high, asked.count)
    answered = None if asked.target is None else required(here, asked.vary, asked.target, size)
    sized = here.model.size_name is None or math.isfinite(size)
    leading = answer.governing()[0] or here.leading
    unit = None if rule.size is None else size_unit(study, rule)
    problem = answer.found.problems[int(answer.found.governing[0])]
    say("Second order, further design points, simulation", 0.8)
    analysis = _analysis(here, asked, problem, answer.found.reliability) if sized else None
    say("The index against what is varied", 0.9)
    return OneSituation(
        study=study,
        rule=rule,
        number=number,
        asked=asked,
        place=_place(study, number),
        factors=here.factors,
        size=math.nan if unit is None else size / unit.factor,
        size_unit=unit,
        variables=_variables(study, problem),
        alternatives={k: float(v[0]) for k, v in answer.found.by_alternative.items()},
        leading=leading,
        beta=float(answer.beta[0]),
        status=str(answer.status[0]),
        analysis=analysis,
        curve=None if what is None or values is None else curve(what, values),
        required=answered,
    )


def _silent(text: str, fraction: float) -> None:
    del text, fraction


def _place(study: Study, number: int) -> tuple[Place, ...]:
    found = []
    for name, column in study.situations.columns.items():
        unit, value = study.situations.units[name], column[number - 1]
        found.append(
            Place(name, float(value) / unit.factor if column.dtype.kind == "f" else str(value), unit)
        )
    return tuple(found)


def _variables(study: Study, problem: LimitStateProblem) -> tuple[VariableAt, ...]:
    names = problem.limit_state.variables
    medians = problem.x(np.zeros((problem.m, problem.n)))
    found = []
    for name, law in zip(names, problem.distributions, strict=True):
        unit = study.variables[name].unit
        given: tuple[str, ...] = ()
        if isinstance(law, Conditional):
            given = tuple(names[j] for j in law.parents)
            law = law.given([medians[j] for j in law.parents])
        mean, sd, cov = (float(np.ravel(v)[0]) for v in (law.mean, law.sd, law.cov))
        found.append(
            VariableAt(name, family_name(law), mean / unit.factor, sd / unit.factor, cov, unit, given)
        )
    return tuple(found)


def family_name(law: Distribution) -> str:
    """Return the family of a distribution in words."""
    if isinstance(law, Mixture):
        return f"mixture of {law.weights.size} {law.family.name}"
    if isinstance(law, Extreme):
        if law.equivalent is not None:
            return law.equivalent.family.name
        kind = "maximum" if law.of_maxima else "minimum"
        return f"{kind} of {float(np.ravel(law.ratio)[0]):.6g} {family_name(law.base)}"
    return law.family.name if type(law) is Distribution else f"{law.family.name}, not always there"


def _analysis(here: Scene, asked: Asked, problem: LimitStateProblem, found: Reliability) -> Analysis:
    seed = here.study.seed
    several = further_points(problem, found, seed=seed)
    with np.errstate(all="ignore"):
        series = _index_of(series_probability(several.beta, several.alpha))
    return Analysis(
        problem,
        found,
        _trace(problem, found),
        second_order(problem, found),
        several,
        series,
        _simulation(here, asked, problem, found, several),
        tuple((name, solve(problem, name)) for name in dict.fromkeys(asked.solvers)),
    )


def _index_of(probability: Array) -> float:
    from scipy.special import ndtri

    return float(-ndtri(probability)[0])


def _simulation(
    here: Scene, asked: Asked, problem: LimitStateProblem, found: Reliability, several: FurtherPoints
) -> Simulation | None:
    if asked.method == NONE or not problem.random:
        return None
    return simulate(
        problem,
        asked.method,
        seed=here.study.seed,
        keys=np.array([here.number], dtype=np.int64),
        cov=asked.cov,
        most=here.study.verification.settings.samples,
        reliability=found,
        points=several.u if found.converged[0] else None,
        purpose=f"index of {here.rule.name}",
    )


def _trace(problem: LimitStateProblem, found: Reliability) -> Trace:
    """Return the iteration from the medians, ended at the design point where it led elsewhere."""
    steps = trace(problem)
    if not found.converged[0] or abs(steps.beta[-1] - found.beta[0]) <= SAME_POINT:
        return steps
    with np.errstate(all="ignore"):
        g = problem.value(found.u)
    return Trace(
        steps.variables,
        np.concatenate([steps.u, found.u.T]),
        np.concatenate([steps.x, found.x.T]),
        np.concatenate([steps.g, g]),
        np.concatenate([steps.beta, found.beta]),
        np.concatenate([steps.distance, np.abs(found.beta)]),
        (*(STEP for _ in steps.what), SEARCHED),
        str(found.status[0]),
    )
