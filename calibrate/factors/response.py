"""From factors to the reliability of every design situation, with the exact derivatives."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.factors.model import Factor, RuleModel
from calibrate.reliability import ExpressionLimitState, Reliability, form
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
        Meaningless in situations without size.
    """

    name: str
    size: Array | None
    sizing_code: npt.NDArray[np.int8]
    distributions: tuple[Distribution, ...]
    reliability: Reliability


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
    """

    gamma: Array
    beta: Array
    jacobian: Array
    valid: npt.NDArray[np.bool_]
    status: npt.NDArray[Any]
    per_rule: tuple[RuleEvaluation, ...]


class Response:
    """Reliability of all design situations as a function of the free factors.

    Parameters
    ----------
    rules : sequence of RuleModel
    factors : sequence of Factor
        Free and held.
    workers : int
        Threads of FORM; results do not depend on it.
    """

    def __init__(self, rules: Sequence[RuleModel], factors: Sequence[Factor], workers: int = 1) -> None:
        self.rules = tuple(rules)
        self.factors = tuple(factors)
        self.free = tuple(f for f in factors if not f.held)
        self.weight = np.concatenate([r.rule_weight * r.weight for r in rules])
        self.workers = workers
        self._rules = tuple(_Rule(r, [f.name for f in self.free], workers) for r in self.rules)

    def values(self, gamma: Array) -> dict[str, float]:
        """Return all factors by name, free ones from ``gamma``."""
        free = dict(zip((f.name for f in self.free), gamma, strict=True))
        return {f.name: float(free.get(f.name, f.present)) for f in self.factors}

    def __call__(self, gamma: Array, start: Evaluation | None = None) -> Evaluation:
        """Size, and compute beta and its derivatives, in every situation of every rule.

        Parameters
        ----------
        gamma : array (f,) or (f, N)
            Free factors, the same in all rows or each row's own.
        start : Evaluation, optional
            For similar factors; its sizes and design points save passes.

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
            parts.append(rule(factors, None if start is None else start.per_rule[k]))
        beta = np.concatenate([p[1] for p in parts])
        return Evaluation(
            np.array(gamma, dtype=np.float64),
            beta,
            np.concatenate([p[2] for p in parts], axis=1),
            np.isfinite(beta),
            np.concatenate([p[3] for p in parts]),
            tuple(p[0] for p in parts),
        )

    def thinned(self, most: int) -> Response:
        """Return the response for at most about ``most`` situations with weight, evenly spread."""
        rules = []
        for rule in self.rules:
            columns = np.flatnonzero(rule.weight > 0)
            share = max(most // len(self.rules), 1)
            if columns.size > share:
                columns = columns[np.unique(np.linspace(0, columns.size - 1, share).round().astype(np.intp))]
            rules.append(rule.take(columns))
        return Response(rules, self.factors, self.workers)


class _Rule:
    """One rule, with everything prepared that does not depend on factors."""

    def __init__(self, rule: RuleModel, free: Sequence[str], workers: int) -> None:
        self.rule = rule
        self.workers = workers
        self.free = list(free)
        self.names = tuple(v.name for v in rule.variables)
        self.solver = (
            SizeSolver(rule.check, rule.size_name)
            if rule.check is not None and rule.size_name is not None
            else None
        )
        self.check_free = tuple(f for f in free if rule.check is not None and rule.check.depends_on(f))
        self.direct = tuple(f for f in free if rule.limit_state.depends_on(f))
        size = rule.size_name
        self.sized = tuple(i for i, v in enumerate(rule.variables) if size is not None and v.depends_on(size))
        self.fixed = tuple(
            None if i in self.sized else v.distribution(rule.values) for i, v in enumerate(rule.variables)
        )
        wanted = [*self.direct, *([size] if size is not None else []), *(self.names[i] for i in self.sized)]
        self.by = tuple(wanted)

    def __call__(
        self, factors: Mapping[str, Any], start: RuleEvaluation | None
    ) -> tuple[RuleEvaluation, Array, Array, npt.NDArray[Any]]:
        rule, n = self.rule, self.rule.n
        values: dict[str, Any] = {**rule.values, **factors}
        sizing = self._sized(values, start)
        solved = sizing.code == SOLVED
        if rule.size_name is not None and self.solver is not None:
            # Situations without size get a stand-in, so that the batch stays whole; their result is not used. A size of
            # another situation is one that FORM does not search for long.
            usual = float(np.median(sizing.size[solved])) if solved.any() else 1.0
            values[rule.size_name] = sizing.size if solved.all() else np.where(solved, sizing.size, usual)
        distributions = tuple(
            rule.variables[i].distribution(values) if d is None else d for i, d in enumerate(self.fixed)
        )
        reliability = form(
            ExpressionLimitState(rule.limit_state, self.names, _needed(values, rule, self.names)),
            distributions,
            n,
            start=None if start is None else _usable(start.reliability.u),
            workers=self.workers,
        )
        beta = np.where(solved, reliability.beta, np.nan)
        jacobian = self._jacobian(values, sizing, distributions, reliability, beta)
        status = np.array(reliability.status, dtype=object)
        for code in np.unique(sizing.code[~solved]):
            status[sizing.code == code] = f"not converged: {sizing_reason(int(code))}"
        size = sizing.size if self.solver is not None else None
        evaluation = RuleEvaluation(rule.name, size, sizing.code, distributions, reliability)
        return evaluation, beta, jacobian, status

    def _sized(self, values: Mapping[str, Any], start: RuleEvaluation | None) -> Sizing:
        n = self.rule.n
        if self.solver is None:
            return Sizing(np.full(n, np.nan), np.zeros((0, n)), np.zeros(n, dtype=np.int8))
        near = None if start is None else start.size
        return self.solver(values, n, self.check_free, near)

    def _jacobian(
        self,
        values: Mapping[str, Any],
        sizing: Sizing,
        distributions: Sequence[Distribution],
        reliability: Reliability,
        beta: Array,
    ) -> Array:
        """Return d beta/d gamma = (dg/d gamma at fixed u*) / |grad_u g|, the size carried along."""
        rule = self.rule
        jacobian = np.zeros((len(self.free), rule.n))
        if not self.by:
            jacobian[:, ~np.isfinite(beta)] = np.nan
            return jacobian
        point = {**values, **dict(zip(self.names, reliability.x, strict=True))}
        _, slopes = rule.limit_state.program(self.by, 1)(point)
        by = dict(zip(self.by, slopes, strict=True))
        with np.errstate(all="ignore"):
            for name in self.direct:
                jacobian[self.free.index(name)] += by[name]
            if rule.size_name is not None:
                by_size = np.array(np.broadcast_to(by[rule.size_name], (rule.n,)))
                for i in self.sized:
                    moved = rule.variables[i].slope(
                        distributions[i], reliability.u[i], values, rule.size_name
                    )
                    if moved is not None:
                        by_size += by[self.names[i]] * moved
                for name, slope in zip(self.check_free, sizing.slopes, strict=True):
                    jacobian[self.free.index(name)] += by_size * slope
            jacobian /= reliability.gradient_norm
        jacobian[:, ~np.isfinite(beta)] = np.nan
        return jacobian


def _needed(values: Mapping[str, Any], rule: RuleModel, variables: Sequence[str]) -> dict[str, Any]:
    return {n: values[n] for n in rule.limit_state.names if n not in variables}


def _usable(u: Array) -> Array:
    """Return design points to start from; the origin where there is none."""
    return np.where(np.isfinite(u), u, 0.0)
