"""FORM of one rule with one set of variables, its derivatives by factor, and the worst of several alternatives."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.factors.classes import nearest_over_classes
from calibrate.factors.model import RuleModel
from calibrate.factors.turning import alpha_slopes
from calibrate.reliability import (
    Correlation,
    ExpressionLimitState,
    Problem,
    Reliability,
    design_points,
    nataf_correlation,
    physical_slopes,
)
from calibrate.reliability.importance import slopes_through_correlation
from calibrate.situations import BasicVariable, ConditionalVariable, Sizing, law_of

Array = npt.NDArray[np.float64]
Law = Distribution | ConditionalVariable


@dataclass(frozen=True, slots=True, eq=False)
class BranchResult:
    """The limit state on standard normal space, reliability and d beta/d gamma, shape (f, n), of one branch."""

    problem: Problem
    reliability: Reliability
    jacobian: Array
    alpha_slopes: Array | None = None
    """d alpha/d gamma, shape (f, m, n), where a system asks for it."""


class Branch:
    """The limit state of a rule with one set of variables; what does not depend on factors is prepared.

    Parameters
    ----------
    rule : RuleModel
    variables : tuple of BasicVariable
        In the order of the limit state.
    free : sequence of str
        Free factors.
    check_free : tuple of str
        Those that the design check contains.
    workers : int
    """

    def __init__(
        self,
        rule: RuleModel,
        variables: tuple[BasicVariable, ...],
        free: Sequence[str],
        check_free: tuple[str, ...],
        workers: int,
    ) -> None:
        self.rule, self.variables, self.workers = rule, variables, workers
        self.free, self.check_free = list(free), check_free
        self.names = tuple(v.name for v in variables)
        self.direct = tuple(f for f in free if rule.limit_state.depends_on(f))
        size = rule.size_name
        self.sized = tuple(i for i, v in enumerate(variables) if size is not None and v.depends_on(size))
        self.conditional = any(v.parents(self.names) for v in variables)
        self.fixed = tuple(
            None if i in self.sized else law_of(v, self.names, rule.values) for i, v in enumerate(variables)
        )
        self.by = (*self.direct, *([size] if size is not None else []), *(self.names[i] for i in self.sized))
        laws = tuple(law for law in self.fixed if law is not None)
        self.correlation = self._correlation(laws) if len(laws) == len(variables) else None

    def _correlation(self, laws: tuple[Distribution | ConditionalVariable, ...]) -> Correlation | None:
        return nataf_correlation(self.rule.correlations, self.names, laws, self.rule.n)

    def __call__(
        self, values: Mapping[str, Any], sizing: Sizing, start: Array | None, turning: bool = False
    ) -> BranchResult:
        """Return FORM and its derivatives for these values, among them the size; with those of alpha where wanted."""
        distributions = tuple(
            law_of(self.variables[i], self.names, values) if d is None else d
            for i, d in enumerate(self.fixed)
        )
        needed = {n: values[n] for n in self.rule.limit_state.names if n not in self.names}
        limit_state = ExpressionLimitState(self.rule.limit_state, self.names, needed)

        problem = Problem(
            limit_state,
            distributions,
            self.rule.n,
            self._correlation(distributions) if self.sized else self.correlation,
        )

        def search(laws: tuple[Law, ...], begin: Array | None) -> Reliability:
            begin = None if begin is None else np.where(np.isfinite(begin), begin, 0.0)
            return design_points(replace(problem, distributions=laws), start=begin, workers=self.workers)

        reliability = search(distributions, start)
        for i, variable in enumerate(self.variables):
            if variable.of_classes:
                reliability = nearest_over_classes(search, distributions, i, reliability)
        jacobian = self._jacobian(values, sizing, problem, reliability)
        turned = None
        if turning:
            turned = alpha_slopes(
                self.rule, problem, reliability, values, sizing, self.free, self.check_free, jacobian
            )
        return BranchResult(problem, reliability, jacobian, turned)

    def _jacobian(
        self,
        values: Mapping[str, Any],
        sizing: Sizing,
        problem: Problem,
        reliability: Reliability,
    ) -> Array:
        """Return d beta/d gamma = (dg/d gamma at fixed u*) / |grad_u g|, the size carried along."""
        rule = self.rule
        jacobian = np.zeros((len(self.free), rule.n))
        if not self.by:
            return jacobian
        point = {**values, **dict(zip(self.names, reliability.x, strict=True))}
        _, slopes = rule.limit_state.program(self.by, 1)(point)
        by = dict(zip(self.by, slopes, strict=True))
        with np.errstate(all="ignore"):
            for name in self.direct:
                jacobian[self.free.index(name)] += by[name]
            if rule.size_name is not None:
                by_size = np.array(np.broadcast_to(by[rule.size_name], (rule.n,)))
                if self.sized:
                    by_size += self._through_variables(values, problem, reliability, by)
                for name, slope in zip(self.check_free, sizing.slopes, strict=True):
                    jacobian[self.free.index(name)] += by_size * slope
            jacobian /= reliability.gradient_norm
            if self.sized and problem.correlation is not None:
                by_size = self._through_correlation(values, problem, reliability)
                for name, slope in zip(self.check_free, sizing.slopes, strict=True):
                    jacobian[self.free.index(name)] += by_size * slope
        return jacobian

    def _through_correlation(
        self, values: Mapping[str, Any], problem: Problem, reliability: Reliability
    ) -> Array:
        """Return d beta/d(size) through the coefficients in normal space, which follow the shapes of the models."""
        size = self.rule.size_name
        assert size is not None
        turned = slopes_through_correlation(problem, reliability, self.rule.correlations)
        total = np.zeros(self.rule.n)
        for i in self.sized:
            for parameter, by_size in self.variables[i].parameters_by(values, size).items():
                if parameter in turned[i]:
                    total = total + turned[i][parameter] * by_size
        return total

    def _through_variables(
        self, values: Mapping[str, Any], problem: Problem, reliability: Reliability, by: Mapping[str, Any]
    ) -> Array:
        """Return dg/d(size) at fixed u through the variables whose models depend on the size."""
        size = self.rule.size_name
        assert size is not None
        total = np.zeros(self.rule.n)
        z = problem.z(reliability.u)
        slopes = physical_slopes(reliability, problem) if self.conditional else None
        for i in self.sized:
            law = problem.distributions[i]
            if isinstance(law, ConditionalVariable):
                moved = law.slope(z[i], [reliability.x[j] for j in law.parents], size)
            else:
                assert isinstance(law, Distribution)
                moved = self.variables[i].slope(law, z[i], values, size)
            if moved is not None:
                total += (by[self.names[i]] if slopes is None else slopes[i]) * moved
        return total


def worst_of(parts: Sequence[BranchResult]) -> tuple[Reliability, Array, npt.NDArray[np.intp]]:
    """Return, in every situation, the result of the alternative with the smallest beta, and which one that is.

    A situation in which an alternative has no beta has none itself, unless that alternative has no failure region
    within reach: then the others decide.
    """
    beta = np.array([p.reliability.beta for p in parts])
    out_of_reach = np.array([p.reliability.status == OUT_OF_REACH for p in parts])
    rank = np.where(np.isnan(beta), np.where(out_of_reach, np.inf, -np.inf), beta)
    chosen = np.argmin(rank, axis=0)
    columns = np.arange(beta.shape[1])

    def picked(arrays: Sequence[npt.NDArray[Any]]) -> npt.NDArray[Any]:
        stacked = np.array(arrays)
        return np.asarray(stacked[chosen, ..., columns].T if stacked.ndim == 3 else stacked[chosen, columns])

    found = [p.reliability for p in parts]
    merged = Reliability(
        found[0].variables,
        picked([r.beta for r in found]),
        picked([r.u for r in found]),
        picked([r.x for r in found]),
        picked([r.alpha for r in found]),
        picked([r.gradient_norm for r in found]),
        picked([r.code for r in found]),
        picked([r.iterations for r in found]),
        sum(r.evaluations for r in found),
    )
    return merged, picked([p.jacobian for p in parts]), chosen


OUT_OF_REACH = "no failure region within reach"
