"""One rule in one design situation, ready for evaluation; and the exact derivative of its index by anything."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import Expression
from calibrate.factors import Response, RuleEvaluation, RuleModel
from calibrate.reliability import Problem as LimitStateProblem
from calibrate.reliability import Reliability, physical_slopes
from calibrate.situations import BasicVariable, ConditionalVariable
from calibrate.study.assemble import values_at
from calibrate.study.model import Rule, Study

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """One rule in one design situation, with the factors that are given.

    Attributes
    ----------
    study : Study
    rule : Rule
    number : int
        Of the situation, from 1.
    factors : mapping of str to float
        All factors of the study.
    model : RuleModel
        Of one situation, the factors among its values; without alternatives where a leading action was chosen.
    leading : str
        The leading action that was chosen; empty where the worst alternative counts, or nothing is combined.
    """

    study: Study
    rule: Rule
    number: int
    factors: Mapping[str, float]
    model: RuleModel
    leading: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Evaluated:
    """A model over n situations, and its reliability.

    Attributes
    ----------
    model : RuleModel
    found : RuleEvaluation
    beta : array (n,)
        NaN where there is none.
    status : array of str (n,)
    """

    model: RuleModel
    found: RuleEvaluation
    beta: Array
    status: NDArray[Any]

    def groups(self) -> list[tuple[int, LimitStateProblem, Reliability, NDArray[np.intp]]]:
        """Return each alternative that governs situations with an index: its number, these situations, and where."""
        parts = []
        for k, problem in enumerate(self.found.problems):
            at = np.flatnonzero(np.isfinite(self.beta) & (self.found.governing == k))
            if at.size:
                parts.append((k, problem.take(at, at.size), self.found.reliability.take(at), at))
        return parts

    def governing(self) -> list[str]:
        """Return the leading action of the governing alternative in each situation; empty without combination."""
        names = [a.leading for a in self.model.alternatives]
        return [names[k] if names else "" for k in self.found.governing]


def chosen_rule(study: Study, name: str | None) -> Rule:
    """Return the rule of a name, or the only one.

    Raises
    ------
    InputError
        There is no such rule, or the name is missing and there are several.
    """
    if name is None:
        if len(study.rules) == 1:
            return next(iter(study.rules.values()))
        known = ", ".join(study.rules)
        raise InputError(
            Problem("The study has several rules; name one with --rule.", suggestion=f"Known: {known}.")
        )
    if name not in study.rules:
        hint = did_you_mean(name, study.rules)
        raise InputError(Problem(f"There is no rule '{name}'.", suggestion=hint))
    return study.rules[name]


def chosen_situation(study: Study, number: int | None) -> int:
    """Return the number of a situation, from 1.

    Raises
    ------
    InputError
        It is missing and there are several, or it is out of range.
    """
    n = study.situations.n
    if number is None:
        if n == 1:
            return 1
        raise InputError(f"The study has {n} design situations; name one with --situation, from 1 to {n}.")
    if not 1 <= number <= n:
        only = "the only design situation is number 1" if n == 1 else f"design situations run from 1 to {n}"
        raise InputError(f"There is no situation {number}; {only}.")
    return number


def scene(
    study: Study,
    rule: Rule,
    number: int,
    model: RuleModel,
    factors: Mapping[str, float],
    leading: str | None = None,
) -> Scene:
    """Return a rule in one situation.

    Parameters
    ----------
    model : RuleModel
        Of the rule over all situations.
    leading : str, optional
        The action that leads, where the worst alternative is not wanted.

    Raises
    ------
    InputError
        There is no such alternative.
    """
    one = model.take(np.array([number - 1]))
    one = dataclasses.replace(one, values={**one.values, **factors})
    if leading is None:
        return Scene(study, rule, number, factors, one)
    if not one.alternatives:
        raise InputError(f"Rule '{rule.name}' combines no actions, so that none of them leads.")
    actions = [a.leading for a in one.alternatives]
    if leading not in actions:
        hint = did_you_mean(leading, actions)
        raise InputError(Problem(f"'{leading}' leads no alternative of rule '{rule.name}'.", suggestion=hint))
    variables = one.alternatives[actions.index(leading)].variables
    return Scene(
        study, rule, number, factors, dataclasses.replace(one, variables=variables, alternatives=()), leading
    )


def evaluated(model: RuleModel) -> Evaluated:
    """Return sizes and reliability of a model whose values hold the factors.

    Raises
    ------
    InputError
        A basic variable has no distribution in some situation.
    """
    answer = Response((model,), ())(np.zeros(0))
    return Evaluated(model, answer.per_rule[0], answer.beta, answer.status)


def index_slope(answer: Evaluated, name: str, follows: Mapping[str, Expression]) -> Array:
    """Return d beta/d(name) in every situation, (n,), NaN where there is no index.

    Parameters
    ----------
    answer : Evaluated
        Of a model among whose values the name is.
    name : str
        A factor, the size where it is given, a quantity, or what a moment was replaced by.
    follows : mapping of str to Expression
        Values that are computed from it, each after those that it uses.

    Notes
    -----
    d beta/dp = (dg/dp at fixed u*) / |grad_u g|, with p's part through the values that follow from it, through the
    size by the implicit function theorem, and through the models of the variables. Coefficients of correlation in
    standard normal space are held.
    """
    slope = np.full(answer.model.n, np.nan)
    values = values_at(answer.model, answer.found, {})
    with np.errstate(all="ignore"):
        for k, problem, reliability, at in answer.groups():
            taken = {key: np.asarray(v)[at] if np.ndim(v) else v for key, v in values.items()}
            alternatives = answer.model.alternatives
            variables = alternatives[k].variables if alternatives else answer.model.variables
            chain = _chain(answer.model, taken, name, follows)
            by = _through_all(answer.model, variables, problem, reliability, taken, chain)
            slope[at] = by / reliability.gradient_norm
    return slope


def _chain(
    model: RuleModel, values: Mapping[str, Any], name: str, follows: Mapping[str, Expression]
) -> dict[str, Any]:
    """Return the derivative of every value, the size among them, by the name."""
    chain: dict[str, Any] = {name: 1.0}
    for other, expression in follows.items():
        through = tuple(n for n in expression.names if n in chain)
        _, slopes = expression.gradient(values, through)
        chain[other] = sum(s * chain[n] for s, n in zip(slopes, through, strict=True))
    if model.check is not None and model.size_name is not None:
        through = tuple(n for n in model.check.names if n in chain)
        if through:
            _, (by_size, *slopes) = model.check.program((model.size_name, *through), 1)(values)
            total = sum(np.asarray(s) * chain[n] for s, n in zip(slopes, through, strict=True))
            chain[model.size_name] = -total / by_size
    return chain


def _through_all(
    model: RuleModel,
    variables: tuple[BasicVariable, ...],
    problem: LimitStateProblem,
    reliability: Reliability,
    values: Mapping[str, Any],
    chain: Mapping[str, Any],
) -> Array:
    """Return dg/dp at fixed u: through the limit state itself, and through the models of its variables."""
    total = np.zeros(problem.n)
    direct = tuple(n for n in model.limit_state.names if n in chain)
    if direct:
        point = {**values, **dict(zip((v.name for v in variables), reliability.x, strict=True))}
        _, slopes = model.limit_state.program(direct, 1)(point)
        total = total + sum(np.asarray(s) * chain[n] for s, n in zip(slopes, direct, strict=True))
    moving = [(i, n) for i, v in enumerate(variables) for n in chain if v.depends_on(n)]
    if moving:
        z, by_x = problem.z(reliability.u), physical_slopes(reliability, problem)
        for i, n in moving:
            law = problem.distributions[i]
            if isinstance(law, ConditionalVariable):
                moved = law.slope(z[i], [reliability.x[j] for j in law.parents], n)
            else:
                moved = variables[i].slope(law, z[i], values, n)  # type: ignore[arg-type]
            if moved is not None:
                total = total + by_x[i] * moved * chain[n]
    return total
