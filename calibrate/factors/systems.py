"""Systems of rules: reliability of components that share basic variables, and its exact derivatives by factor.

Each component is replaced by the tangent plane at its design point; planes are correlated through the variables that
components have in common (M. Hohenbichler and R. Rackwitz, "First-order concepts in system reliability", Structural
Safety 1, 1983).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.factors.model import RuleModel, SystemModel
from calibrate.reliability import Correlation, Problem, Reliability, nataf_correlation
from calibrate.reliability.rows import dot
from calibrate.reliability.systems import SystemResult, system_limit_state, system_probability
from calibrate.situations import ConditionalVariable

Array = npt.NDArray[np.float64]
Law = Distribution | ConditionalVariable

NO_INDEX = "not converged: a component of the system has no reliability index"
OUT_OF_REACH = "no failure region within reach"


@dataclass(frozen=True, slots=True, eq=False)
class Component:
    """One rule as a component: its limit state, design points and derivatives, for n situations."""

    problem: Problem
    reliability: Reliability
    valid: npt.NDArray[np.bool_]
    jacobian: Array
    """d beta/d gamma, (f, n)."""
    alpha_slopes: Array | None
    """d alpha/d gamma, (f, m, n), in the standard normal space of the component; None where no slopes are wanted."""


@dataclass(frozen=True, slots=True, eq=False)
class SystemEvaluation:
    """One system for one set of factors; k components, m variables of all of them.

    Attributes
    ----------
    name : str
    variables : tuple of str
        The basic variables of all components, in the order of the study.
    problem : Problem
        The true limit state of the system, least and greatest of those of the components.
    points : array (k, m, n)
        Design points of the components in the common standard normal space.
    result : SystemResult
        From the tangent planes.
    component_beta : array (k, n)
    weight : array (n,)
        Of the situations.
    """

    name: str
    variables: tuple[str, ...]
    problem: Problem
    points: Array
    result: SystemResult
    component_beta: Array
    weight: Array


def evaluate_system(
    model: SystemModel, rules: Sequence[RuleModel], components: Sequence[Component]
) -> tuple[SystemEvaluation, Array, Array, npt.NDArray[Any]]:
    """Return a system with its index (n,), the derivatives of that by factor (f, n), and status in words (n,).

    Parameters
    ----------
    model : SystemModel
    rules : sequence of RuleModel
        Its components, in the order of ``model.logic.names``.
    components : sequence of Component
        The same, evaluated.

    Raises
    ------
    InputError
        The correlations of all variables together cannot be.
    """
    n = rules[0].n
    names = _names(model, rules)
    laws = _laws(names, rules, components)
    correlation = nataf_correlation(rules[0].correlations, names, laws, n)
    turns = [_Turn.of(names, r, c.problem, correlation) for r, c in zip(rules, components, strict=True)]
    beta = np.array([np.where(c.valid, c.reliability.beta, np.nan) for c in components])
    alpha = np.array([t(c.reliability.alpha) for t, c in zip(turns, components, strict=True)])
    wanted = all(c.alpha_slopes is not None for c in components)
    result = system_probability(beta, model.logic, alpha=alpha, slopes=wanted)
    jacobian = (
        _jacobian(result, alpha, turns, components)
        if wanted
        else np.full_like(components[0].jacobian, np.nan)
    )
    status = np.where(np.isfinite(result.beta), "converged", NO_INDEX).astype(object)
    parts = {name: c.problem.limit_state for name, c in zip(model.logic.names, components, strict=True)}
    state = system_limit_state(model.logic, parts, names)
    evaluation = SystemEvaluation(
        model.name,
        names,
        Problem(state, tuple(laws), n, correlation),
        -beta[:, None, :] * alpha,
        result,
        beta,
        model.weight,
    )
    return evaluation, result.beta, jacobian, status


def _jacobian(
    result: SystemResult, alpha: Array, turns: Sequence[_Turn], components: Sequence[Component]
) -> Array:
    """Return d beta/d gamma of a system: by the indices of its components, and by the correlation of their planes."""
    assert result.by_beta is not None
    assert result.by_correlation is not None
    jacobian = np.zeros_like(components[0].jacobian)
    moved = [
        [t(slope) for slope in ([] if c.alpha_slopes is None else c.alpha_slopes)]
        for t, c in zip(turns, components, strict=True)
    ]
    for f in range(len(jacobian)):
        for i, c in enumerate(components):
            jacobian[f] += result.by_beta[i] * c.jacobian[f]
            for j in range(i):
                along = dot(moved[i][f], alpha[j]) + dot(alpha[i], moved[j][f])
                jacobian[f] += result.by_correlation[i, j] * along
    return jacobian


def _names(model: SystemModel, rules: Sequence[RuleModel]) -> tuple[str, ...]:
    used = {v.name for rule in rules for v in rule.variables}
    return tuple(name for name in model.order if name in used)


def _laws(names: Sequence[str], rules: Sequence[RuleModel], components: Sequence[Component]) -> list[Law]:
    """Return the model of each variable, that of the first component that has it."""
    laws: dict[str, Law] = {}
    for rule, component in zip(rules, components, strict=True):
        own = [v.name for v in rule.variables]
        for name, law in zip(own, component.problem.distributions, strict=True):
            if name in laws:
                continue
            assert isinstance(law, Distribution | ConditionalVariable)
            if isinstance(law, ConditionalVariable):
                parents = tuple(names.index(own[j]) for j in law.parents)
                law = ConditionalVariable(law.variable, parents, law.names, law.values)
            laws[name] = law
    return [laws[name] for name in names]


@dataclass(frozen=True, slots=True, eq=False)
class _Turn:
    """From the standard normal space of a component to that of the system.

    Both stand for the same correlated variables z: a gradient by u is L^T times that by z.
    """

    places: tuple[int, ...]
    size: int
    own: Correlation | None
    common: Correlation | None

    @classmethod
    def of(cls, names: Sequence[str], rule: RuleModel, problem: Problem, common: Correlation | None) -> _Turn:
        places = tuple(names.index(v.name) for v in rule.variables)
        return cls(places, len(names), problem.correlation, common)

    def __call__(self, gradient: Array) -> Array:
        by_z = gradient if self.own is None else self.own.solve_transposed(gradient)
        whole = np.zeros((self.size, gradient.shape[1]))
        whole[list(self.places)] = by_z
        if self.common is not None:
            self.common.backward(whole)
        return whole
