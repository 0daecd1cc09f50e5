"""From factors to the reliability of every design situation, with the exact derivatives."""

from __future__ import annotations

import copy
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.factors.branch import Branch, BranchResult, worst_of
from calibrate.factors.model import Factor, RuleModel, SystemModel
from calibrate.factors.systems import Component, SystemEvaluation, evaluate_system
from calibrate.reliability import Problem, Reliability
from calibrate.situations import SOLVED, SizeSolver, Sizing, sizing_reason

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class RuleEvaluation:
    """One rule for one set of factors.

    Attributes
    ----------
    name : str
        Of the rule.
    size : array (n,) or None
        In SI units; NaN where the design check cannot be solved; None for a rule without size.
    sizing_code : int8 array (n,)
        SOLVED, or why there is no size.
    distributions : tuple of Distribution
        Of the basic variables, as used, in the order of the rule.
    reliability : Reliability
        Meaningless in situations without size; of the worst alternative in each situation.
    branches : tuple of array (m, n)
        Design points of each alternative in standard normal space, to continue from.
    by_alternative : mapping of str to array (n,)
        Beta of each alternative by its leading action; empty without combination.
    problems : tuple of Problem
        The limit state on standard normal space, of each alternative.
    governing : int array (n,)
        Which of them has the smallest beta.
    """

    name: str
    size: Array | None
    sizing_code: npt.NDArray[np.int8]
    distributions: tuple[Distribution, ...]
    reliability: Reliability
    branches: tuple[Array, ...] = ()
    by_alternative: Mapping[str, Array] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()
    governing: npt.NDArray[np.intp] = field(default_factory=lambda: np.zeros(0, dtype=np.intp))
    alpha_slopes: Array | None = None
    """d alpha/d gamma, shape (f, m, n), of a rule that is a component of a system."""


@dataclass(frozen=True, slots=True, eq=False)
class Evaluation:
    """All rules for one set of factors; N rows are the rules one after the other.

    Attributes
    ----------
    gamma : array (f,) or (f, N)
        The free factors, in order.
    beta : array (N,)
        Reliability index; NaN where there is none.
    jacobian : array (f, N)
        Exact derivative of beta by each free factor; NaN where beta is.
    valid : bool array (N,)
        Where there is a beta.
    status : array of str (N,)
        In the words of the result files.
    per_rule : tuple of RuleEvaluation
    systems : tuple of SystemEvaluation
        Their rows follow those of the rules.
    """

    gamma: Array
    beta: Array
    jacobian: Array
    valid: npt.NDArray[np.bool_]
    status: npt.NDArray[Any]
    per_rule: tuple[RuleEvaluation, ...]
    systems: tuple[SystemEvaluation, ...] = ()


class Response:
    """Reliability of all design situations as a function of the free factors.

    Parameters
    ----------
    rules : sequence of RuleModel
    factors : sequence of Factor
        Free and held.
    workers : int
        Threads of FORM; results do not depend on it.
    systems : sequence of SystemModel
        Systems of these rules; each has a row per situation, after those of the rules.
    """

    def __init__(
        self,
        rules: Sequence[RuleModel],
        factors: Sequence[Factor],
        workers: int = 1,
        systems: Sequence[SystemModel] = (),
    ) -> None:
        self.rules = tuple(rules)
        self.systems = tuple(systems)
        self.factors = tuple(factors)
        self.free = tuple(f for f in factors if not f.held)
        self.weight = np.concatenate(
            [*(r.rule_weight * r.weight for r in rules), *(s.share * s.weight for s in systems)]
        )
        self.workers = workers
        self.correction: Array | None = None
        self._components = frozenset(name for s in systems for name in s.logic.names)
        self._rules = tuple(_Rule(r, [f.name for f in self.free], workers) for r in self.rules)

    def values(self, gamma: Array) -> dict[str, float]:
        """Return all factors by name, free ones from ``gamma``."""
        free = dict(zip((f.name for f in self.free), gamma, strict=True))
        return {f.name: float(free.get(f.name, f.present)) for f in self.factors}

    def __call__(self, gamma: Array, start: Evaluation | None = None, *, slopes: bool = True) -> Evaluation:
        """Size, and compute beta and its derivatives, in every situation of every rule.

        Parameters
        ----------
        gamma : array (f,) or (f, N)
            Free factors, the same in all rows or each row's own.
        start : Evaluation, optional
            For similar factors; its sizes and design points save passes.
        slopes : bool
            Whether the derivatives of systems are wanted, which cost more than all the rest; else they are NaN.

        Raises
        ------
        InputError
            A basic variable has no distribution in some situation.
        """
        held = {f.name: float(f.present) for f in self.factors if f.held}
        names = [f.name for f in self.free]
        parts, row = [], 0
        for k, rule in enumerate(self._rules):
            own = gamma if gamma.ndim == 1 else gamma[:, row : row + rule.rule.n]
            row += rule.rule.n
            factors = {**held, **dict(zip(names, own, strict=True))}
            turning = slopes and gamma.ndim == 1 and rule.rule.name in self._components
            parts.append(rule(factors, None if start is None else start.per_rule[k], turning))
        joined = []
        for system in self.systems:
            n = system.weight.size
            each = None if gamma.ndim == 1 else gamma[:, row : row + n]
            row += n
            joined.append(self._system(system, parts, held, each, slopes))
        beta = np.concatenate([*(p[1] for p in parts), *(s[1] for s in joined)])
        if self.correction is not None:
            beta = beta + self.correction
        return Evaluation(
            np.array(gamma, dtype=np.float64),
            beta,
            np.concatenate([*(p[2] for p in parts), *(s[2] for s in joined)], axis=1),
            np.isfinite(beta),
            np.concatenate([*(p[3] for p in parts), *(s[3] for s in joined)]),
            tuple(p[0] for p in parts),
            tuple(s[0] for s in joined),
        )

    def _system(
        self,
        system: SystemModel,
        parts: Sequence[_Part],
        held: Mapping[str, float],
        own: Array | None,
        slopes: bool,
    ) -> tuple[SystemEvaluation, Array, Array, npt.NDArray[Any]]:
        """Return a system from the rules as evaluated, or from its rules with factors of its own rows."""
        places = [[r.name for r in self.rules].index(name) for name in system.logic.names]
        if own is None:
            found = [parts[k] for k in places]
        else:
            factors = {**held, **dict(zip((f.name for f in self.free), own, strict=True))}
            found = [self._rules[k](factors, parts[k][0], slopes) for k in places]
        components = [
            Component(e.problems[0], e.reliability, np.isfinite(beta), jacobian, e.alpha_slopes)
            for e, beta, jacobian, _ in found
        ]
        return evaluate_system(system, [self.rules[k] for k in places], components)

    def corrected(self, correction: Array) -> Response:
        """Return the same response with a correction added to beta in every row, shape (N,); NaN counts as 0."""
        other = copy.copy(self)
        other.correction = np.where(np.isfinite(correction), correction, 0.0)
        return other

    def thinned(self, most: int) -> Response:
        """Return the response for at most about ``most`` situations with weight, evenly spread."""
        rules, kept, row = [], [], 0
        for rule in self.rules:
            columns = np.flatnonzero(rule.weight > 0)
            share = max(most // len(self.rules), 1)
            if columns.size > share:
                columns = columns[np.unique(np.linspace(0, columns.size - 1, share).round().astype(np.intp))]
            rules.append(rule.take(columns))
            kept.append(row + columns)
            row += rule.n
        if self.systems:
            return self  # components need all situations of one another
        thin = Response(rules, self.factors, self.workers)
        return thin if self.correction is None else thin.corrected(self.correction[np.concatenate(kept)])


_Part = tuple[RuleEvaluation, Array, Array, npt.NDArray[Any]]


class _Rule:
    """One rule, with everything prepared that does not depend on factors."""

    def __init__(self, rule: RuleModel, free: Sequence[str], workers: int) -> None:
        self.rule = rule
        self.free = list(free)
        self.solver = (
            SizeSolver(rule.check, rule.size_name)
            if rule.check is not None and rule.size_name is not None
            else None
        )
        self.check_free = tuple(f for f in free if rule.check is not None and rule.check.depends_on(f))
        chosen = [a.variables for a in rule.alternatives] or [rule.variables]
        self.branches = [Branch(rule, variables, self.free, self.check_free, workers) for variables in chosen]

    def __call__(
        self, factors: Mapping[str, Any], start: RuleEvaluation | None, turning: bool = False
    ) -> _Part:
        rule = self.rule
        values: dict[str, Any] = {**rule.values, **factors}
        sizing = self._sized(values, start)
        solved = sizing.code == SOLVED
        if rule.size_name is not None and self.solver is not None:
            # Situations without size get a stand-in, so that the batch stays whole; their result is not used. A size of
            # another situation is one that FORM does not search for long.
            usual = float(np.median(sizing.size[solved])) if solved.any() else 1.0
            values[rule.size_name] = sizing.size if solved.all() else np.where(solved, sizing.size, usual)
        starts = [None] * len(self.branches) if start is None else list(start.branches)
        parts = [branch(values, sizing, u, turning) for branch, u in zip(self.branches, starts, strict=True)]
        reliability, jacobian = parts[0].reliability, parts[0].jacobian
        by_alternative: dict[str, Array] = {}
        governing = np.zeros(rule.n, dtype=np.intp)
        if rule.alternatives:
            reliability, jacobian, governing = worst_of(parts)
            names = [a.leading for a in rule.alternatives]
            by_alternative = {
                n: np.where(solved, p.reliability.beta, np.nan) for n, p in zip(names, parts, strict=True)
            }
        beta = np.where(solved, reliability.beta, np.nan)
        jacobian = np.where(np.isfinite(beta), jacobian, np.nan)
        status = np.array(reliability.status, dtype=object)
        for code in np.unique(sizing.code[~solved]):
            status[sizing.code == code] = f"not converged: {sizing_reason(int(code))}"
        evaluation = RuleEvaluation(
            rule.name,
            sizing.size if self.solver is not None else None,
            sizing.code,
            self._shown(parts),
            reliability,
            tuple(p.reliability.u for p in parts),
            by_alternative,
            tuple(p.problem for p in parts),
            governing,
            parts[0].alpha_slopes,
        )
        return evaluation, beta, jacobian, status

    def _sized(self, values: Mapping[str, Any], start: RuleEvaluation | None) -> Sizing:
        n = self.rule.n
        if self.solver is None:
            return Sizing(np.full(n, np.nan), np.zeros((0, n)), np.zeros(n, dtype=np.int8))
        near = None if start is None else start.size
        return self.solver(values, n, self.check_free, near)

    def _shown(self, parts: Sequence[BranchResult]) -> tuple[Distribution, ...]:
        """Return the distributions for tables: of an action, the one with which it leads.

        Of a variable that depends on others, the one with these at their medians.
        """
        leading = [a.leading for a in self.rule.alternatives]
        return tuple(
            _at_medians(parts[leading.index(v.name) if v.name in leading else 0].problem, i)
            for i, v in enumerate(self.rule.variables)
        )


def _at_medians(problem: Problem, i: int) -> Distribution:
    law = problem.distributions[i]
    if isinstance(law, Distribution):
        return law
    medians = problem.x(np.zeros((problem.m, problem.n)))
    return law.given([medians[j] for j in law.parents])
