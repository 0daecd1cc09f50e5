"""Beta by the exact maximum of combined actions, with the proposed factors: how good the alternatives are."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.combination import Action
from calibrate.actions.combined_limit_state import MAXIMUM, CombinedLimitState, combined_limit_state
from calibrate.distributions import distribution
from calibrate.errors import Doubt, InputError
from calibrate.factors import Calibration, RuleEvaluation, RuleModel
from calibrate.reliability import FormSettings, Problem, form, nataf_correlation
from calibrate.situations import BasicVariable, law_of
from calibrate.study.assemble import values_at
from calibrate.study.model import Study

Array = NDArray[np.float64]

GAP = 0.1
"""Difference in beta between the exact maximum and the worst alternative from which a doubt is recorded."""


@dataclass(frozen=True, slots=True, eq=False)
class ExactCombination:
    """Beta of the exact maximum for each rule, shape (n,), NaN where there is none, with what is doubtful."""

    beta: tuple[Array, ...]
    doubts: tuple[Doubt, ...]


def exact_combination(
    study: Study,
    variables: Mapping[str, BasicVariable],
    models: Sequence[RuleModel],
    calibration: Calibration,
    workers: int = 1,
) -> ExactCombination | None:
    """Return beta by the exact distribution of the maximum of the combined actions; None without any.

    All situations of a rule are one FORM, begun at the design points of their worst alternatives.
    """
    if not study.combination:
        return None
    betas, doubts = [], []
    proposed = calibration.proposed
    for model, e in zip(models, proposed.evaluation.per_rule, strict=True):
        try:
            betas.append(_exact(study, variables, model, e, proposed.factors, workers))
        except InputError as error:
            betas.append(np.full(model.n, np.nan))
            text = f"Rule {model.name} has no β by the exact combination. {error}"
            doubts.append(Doubt("combination-not-exact", text, f"rules.{model.name}"))
            continue
        doubts += _gap(model.name, betas[-1], e.reliability.beta, model.weight)
    return ExactCombination(tuple(betas), tuple(doubts))


def _exact(
    study: Study,
    variables: Mapping[str, BasicVariable],
    model: RuleModel,
    found: RuleEvaluation,
    factors: Mapping[str, float],
    workers: int,
) -> Array:
    acting = [a for a in study.combination if any(v.name == a.name for v in model.variables)]
    if not acting:
        return np.full(model.n, np.nan)
    values = values_at(model, found, factors)
    actions = []
    for a in acting:
        one = dataclasses.replace(variables[a.name], ratio=1.0, presence=1.0)
        actions.append(Action(one.distribution(values), a.repetitions, a.presence, a.name))
    names = [a.name for a in acting]
    rows = [i for i, v in enumerate(model.variables) if v.name not in names]
    others = [model.variables[i] for i in rows]
    fixed = {n: values[n] for n in model.limit_state.names if n in values}
    state = combined_limit_state(model.limit_state, [v.name for v in others], actions, fixed)
    standard = distribution("normal", location=0.0, scale=1.0)
    names_of_rows = [*(v.name for v in others), MAXIMUM]
    laws = [*(law_of(v, names_of_rows, values) for v in others), standard]
    correlation = nataf_correlation(model.correlations, names_of_rows, laws, model.n)
    start = np.nan_to_num(np.array([found.reliability.u[i] for i in rows]).reshape(len(rows), model.n))
    # The maximum with which the other variables at the design point are just safe: the limit state at zero of it.
    still = np.concatenate((start, np.zeros((1, model.n))))
    last = Problem(state, tuple(laws), model.n, correlation).value(still)
    # The nearest point was made sure of for the alternatives; the exact surface lies beside theirs.
    settings = FormSettings(verify=False)
    result = form(
        state,
        laws,
        model.n,
        correlation=correlation,
        start=np.concatenate((start, last[None])),
        settings=settings,
        workers=workers,
    )
    return np.where(np.isfinite(found.reliability.beta) & _acts(state, result.x), result.beta, np.nan)


def _acts(state: CombinedLimitState, x: Array) -> NDArray[np.bool_]:
    """Return where no action works against failure and at least one towards it."""
    weights = state.weights(x)
    return np.asarray(np.all(weights >= 0.0, axis=0) & np.any(weights > 0.0, axis=0))


def _gap(rule: str, exact: Array, worst: Array, weight: Array) -> list[Doubt]:
    gap = np.where(np.isfinite(exact) & (weight > 0.0), worst - exact, 0.0)
    most = int(np.argmax(np.abs(gap))) if gap.size else 0
    if not gap.size or abs(gap[most]) < GAP:
        return []
    text = (
        f"In situation {most + 1} the worst single alternative has β {worst[most]:.2f}, the exact maximum of the "
        f"combined actions {exact[most]:.2f}; factors rest on the first. combinations.csv has both for every situation."
    )
    return [Doubt("combination-gap", text, f"rules.{rule}")]
