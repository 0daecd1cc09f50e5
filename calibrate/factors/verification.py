"""Is the reliability index that factors rest on real? FORM against second order and against simulation.

Curvature is cheap and taken into account everywhere. Simulation is done where it matters: in the worst and the best
situation of each rule, where the second-order correction is largest, where there are several design points, and in a
random sample of the rest; or everywhere, where asked for.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.engine import stream
from calibrate.factors.response import Evaluation, RuleEvaluation
from calibrate.factors.systems import SystemEvaluation
from calibrate.reliability import Problem, Reliability, design_points
from calibrate.reliability.further_points import further_points
from calibrate.reliability.second_order import second_order
from calibrate.reliability.series_of_points import series_probability
from calibrate.reliability.simulation import Simulation, simulate
from calibrate.reliability.systems import SystemLimitState, parallel, system_limit_state

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]
Counts = npt.NDArray[np.int64]

SECOND_ORDER_ONLY = "sorm"
NONE = "none"
RELIABLE = 0.1
"""Coefficient of variation of a failure probability up to which a simulation counts; 0.03 or less in the index."""
CORRECTIONS, SAMPLE, DOUBTFUL = 2, 6, 6
"""Situations of each rule that are simulated: with the largest corrections, at random, without a sound second order."""


@dataclass(frozen=True, slots=True)
class VerificationSettings:
    """How the index is verified.

    Attributes
    ----------
    method : str
        A method of simulation, ``sorm`` for second order alone, or ``none``.
    cov : float
        Coefficient of variation of the simulated failure probability.
    samples : int
        Most evaluations of the limit state for one situation.
    everywhere : bool
        Whether all situations are simulated.
    sobol : bool
        Whether the samples are scrambled Sobol points.
    tolerance : float
        Difference of the index that is reported as large.
    """

    method: str = "importance sampling"
    cov: float = 0.02
    samples: int = 200_000
    everywhere: bool = False
    sobol: bool = False
    tolerance: float = 0.1


@dataclass(frozen=True, slots=True, eq=False)
class Verification:
    """The index of every row by several methods; NaN where there is none.

    Attributes
    ----------
    form, sorm : array (N,)
        By FORM; from the exact probability beyond the paraboloid that is fitted to the limit state.
    sorm_sound : bool array (N,)
        Where nothing was seen that speaks against the second order.
    sorm_status : array of str (N,)
    points : int array (N,)
        Design points that were found; 0 where no further ones were looked for.
    nearer : bool array (N,)
        Where one of them is nearer than the design point of FORM.
    series : array (N,)
        From all design points as a series system.
    simulated, lower, upper : array (N,)
        By simulation, with its confidence interval.
    cov : array (N,)
        Coefficient of variation of the simulated probability.
    samples : int array (N,)
        Evaluations of the limit state; 0 where nothing was simulated.
    status : array of str (N,)
        How the simulation ended; empty where there was none.
    settings : VerificationSettings
    """

    form: Array
    sorm: Array
    sorm_sound: Flags
    sorm_status: npt.NDArray[Any]
    points: Counts
    nearer: Flags
    series: Array
    simulated: Array
    lower: Array
    upper: Array
    cov: Array
    samples: Counts
    status: npt.NDArray[Any]
    settings: VerificationSettings

    @property
    def is_simulated(self) -> Flags:
        """Where there is a simulated index that can be relied upon."""
        with np.errstate(invalid="ignore"):
            near = self.cov <= max(RELIABLE, 2.0 * self.settings.cov)
        return np.asarray(np.isfinite(self.simulated) & near)

    @property
    def verified(self) -> Array:
        """The best index that is known: simulated, else of second order where that is sound, else of FORM."""
        by_curvature = np.where(self.sorm_sound & np.isfinite(self.sorm), self.sorm, self.form)
        return np.where(self.is_simulated, self.simulated, by_curvature)

    @property
    def basis(self) -> npt.NDArray[Any]:
        """On what each verified index rests: ``simulation``, ``second order`` or ``first order``."""
        curved = np.where(self.sorm_sound & np.isfinite(self.sorm), "second order", "first order")
        return np.where(self.is_simulated, "simulation", curved)

    @property
    def difference(self) -> Array:
        """Verified index less that of FORM."""
        return self.verified - self.form

    @property
    def ratio(self) -> Array:
        """Verified failure probability over that of FORM, without loss in either tail."""
        with np.errstate(all="ignore"):
            return np.asarray(np.exp(special.log_ndtr(-self.verified) - special.log_ndtr(-self.form)))


def verify(
    evaluation: Evaluation,
    weight: Array,
    settings: VerificationSettings,
    *,
    seed: int,
    workers: int = 1,
    progress: Callable[[float], None] | None = None,
) -> Verification:
    """Verify the index of every row of an evaluation.

    Parameters
    ----------
    evaluation : Evaluation
        Of N rows, the rules one after the other.
    weight : array (N,)
        Only rows with weight are simulated.
    settings : VerificationSettings
    seed : int
        Of everything random.
    workers : int
        Threads; results do not depend on it.
    progress : callable, optional
        Called with the fraction that is done.

    Notes
    -----
    Where actions are combined, the alternative that governs a situation is verified.
    """
    parts, row = [], 0
    for k, rule in enumerate(evaluation.per_rule):
        n = rule.reliability.n
        rows = slice(row, row + n)
        part = _Part(rule, evaluation.valid[rows], weight[rows], settings, seed, workers)
        parts.append(part.run())
        row += n
        if progress is not None:
            progress((k + 1) / (len(evaluation.per_rule) + len(evaluation.systems)))
    parts += [_of_system(system, settings, seed, workers) for system in evaluation.systems]
    columns = {name: np.concatenate([p[name] for p in parts]) for name in parts[0]}
    for array in columns.values():
        array.setflags(write=False)
    form = np.concatenate(
        [*(r.reliability.beta for r in evaluation.per_rule), *(s.result.beta for s in evaluation.systems)]
    )
    return Verification(np.where(evaluation.valid, form, np.nan), **columns, settings=settings)


@dataclass(slots=True)
class _Part:
    """One rule."""

    rule: RuleEvaluation
    valid: Flags
    weight: Array
    settings: VerificationSettings
    seed: int
    workers: int

    def run(self) -> dict[str, npt.NDArray[Any]]:
        found = _nothing(self.valid.size)
        if self.settings.method == NONE:
            return found
        for problem, reliability, at in self._groups(np.flatnonzero(self.valid)):
            curved = second_order(problem, reliability, workers=self.workers)
            found["sorm"][at] = curved.beta
            found["sorm_sound"][at] = curved.sound
            found["sorm_status"][at] = curved.status
        chosen = np.flatnonzero(self._chosen(found["sorm"], found["sorm_sound"]))
        for problem, reliability, at in self._groups(chosen):
            self._simulated(found, problem, reliability, at)
        return found

    def _groups(self, rows: npt.NDArray[np.intp]) -> list[tuple[Problem, Reliability, npt.NDArray[np.intp]]]:
        """Return the problem and design points of these situations, for each alternative that governs some of them."""
        groups = []
        for k, problem in enumerate(self.rule.problems):
            at = rows[self.rule.governing[rows] == k]
            if at.size:
                groups.append((problem.take(at, at.size), self.rule.reliability.take(at), at))
        return groups

    def _chosen(self, sorm: Array, sound: Flags) -> Flags:
        """Return the situations that are simulated."""
        there = self.valid & (self.weight > 0.0)
        if self.settings.method == SECOND_ORDER_ONLY or not there.any():
            return np.zeros_like(there)
        if self.settings.everywhere:
            return there
        beta = self.rule.reliability.beta
        chosen = np.zeros_like(there)
        for order in (beta, -beta):
            chosen[int(np.argmin(np.where(there, order, np.inf)))] = True
        correction = np.where(there & np.isfinite(sorm), np.abs(sorm - beta), -1.0)
        chosen[np.argsort(-correction, kind="stable")[:CORRECTIONS]] = True
        doubtful = np.flatnonzero(there & ~sound)
        chosen[doubtful[np.argsort(beta[doubtful], kind="stable")][:DOUBTFUL]] = True
        rest = np.flatnonzero(there & ~chosen)
        rng = stream(self.seed, "verification sample", self.rule.name)
        chosen[rng.permutation(rest)[:SAMPLE]] = True
        return chosen & there

    def _simulated(
        self,
        found: dict[str, npt.NDArray[Any]],
        problem: Problem,
        reliability: Reliability,
        at: npt.NDArray[np.intp],
    ) -> None:
        several = further_points(problem, reliability, seed=self.seed)
        found["points"][at] = several.count
        found["nearer"][at] = several.nearer
        probability = series_probability(several.beta, several.alpha)
        found["series"][at] = -special.ndtri(probability)
        purpose = f"verification of {self.rule.name}"
        result = _sampled(
            problem, self.settings, self.seed, at, reliability, several.u, purpose, self.workers
        )
        _enter(found, at, result)


def _nothing(n: int) -> dict[str, npt.NDArray[Any]]:
    return {
        **{k: np.full(n, np.nan) for k in ("sorm", "series", "simulated", "lower", "upper", "cov")},
        **{k: np.zeros(n, dtype=np.int64) for k in ("points", "samples")},
        **{k: np.zeros(n, dtype=np.bool_) for k in ("sorm_sound", "nearer")},
        **{k: np.full(n, "", dtype=object) for k in ("sorm_status", "status")},
    }


def _sampled(
    problem: Problem,
    settings: VerificationSettings,
    seed: int,
    at: npt.NDArray[np.intp],
    reliability: Reliability,
    points: Array,
    purpose: str,
    workers: int,
) -> Simulation:
    return simulate(
        problem,
        settings.method,
        seed=seed,
        keys=at.astype(np.int64),
        cov=settings.cov,
        most=settings.samples,
        reliability=reliability,
        points=points,
        purpose=purpose,
        sobol=settings.sobol,
        workers=workers,
    )


def _enter(found: dict[str, npt.NDArray[Any]], at: npt.NDArray[np.intp], result: Simulation) -> None:
    found["simulated"][at] = np.where(np.isfinite(result.beta), result.beta, np.nan)
    for name, values in (("lower", result.beta_lower), ("upper", result.beta_upper), ("cov", result.cov)):
        found[name][at] = values
    found["samples"][at] = result.samples
    found["status"][at] = result.status


def _of_system(
    system: SystemEvaluation, settings: VerificationSettings, seed: int, workers: int
) -> dict[str, npt.NDArray[Any]]:
    """Simulate the true system: around the design points of its components, and around its own nearest point."""
    beta = system.result.beta
    found = _nothing(beta.size)
    there = np.isfinite(beta) & (system.weight > 0.0)
    if settings.method in (NONE, SECOND_ORDER_ONLY) or not there.any():
        return found
    chosen = there.copy()
    if not settings.everywhere:
        chosen[:] = False
        for order in (beta, -beta):
            chosen[int(np.argmin(np.where(there, order, np.inf)))] = True
        rest = np.flatnonzero(there & ~chosen)
        chosen[stream(seed, "verification sample", system.name).permutation(rest)[:SAMPLE]] = True
    at = np.flatnonzero(chosen)
    problem = system.problem.take(at, at.size)
    points, nearest = _centres(system, problem, at, workers)
    purpose = f"verification of {system.name}"
    _enter(found, at, _sampled(problem, settings, seed, at, nearest, points, purpose, workers))
    return found


def _centres(
    system: SystemEvaluation, problem: Problem, at: npt.NDArray[np.intp], workers: int
) -> tuple[Array, Reliability]:
    """Return where failures of a system are likely, (k, m, n): the nearest point of each cut set, and that of all.

    The design point of a component that fails with others only is no such place.
    """
    state = problem.limit_state
    assert isinstance(state, SystemLimitState)
    nearest = design_points(problem, workers=workers)
    points = [nearest.u]
    for cut in state.logic.cut_sets:
        if len(cut) == 1:
            points.append(system.points[cut[0]][:, at])
            continue
        names = [state.logic.names[i] for i in cut]
        joint = system_limit_state(
            parallel(names),
            {n: state.components[i] for n, i in zip(names, cut, strict=True)},
            state.variables,
        )
        points.append(design_points(replace(problem, limit_state=joint), workers=workers).u)
    return np.array(points), nearest
