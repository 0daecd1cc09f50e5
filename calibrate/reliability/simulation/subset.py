"""Subset simulation: a small probability as a product of larger ones, by Markov chains.

References
----------
.. [1] S.-K. Au and J. L. Beck, "Estimation of small failure probabilities in high dimensions by subset simulation",
   Probabilistic Engineering Mechanics 16 (2001).
.. [2] I. Papaioannou, W. Betz, K. Zwirglmaier and D. Straub, "MCMC algorithms for subset simulation", Probabilistic
   Engineering Mechanics 41 (2015): conditional sampling in standard normal space, and its step.
.. [3] C.-E. Brehier, M. Gazeau, L. Goudenege, T. Lelievre and M. Rousset, "Unbiasedness of some generalized adaptive
   multilevel splitting algorithms", Annals of Applied Probability 26 (2016) (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.simulation.base import Array, Counts, Flags, Task, evaluated

LENGTH = 10
"""Samples of a chain, its seed among them; one in so many samples of a level survives."""

# Probability of a level below which a run is given up: beyond the reach of 15.
LEVELS = 50
# Acceptance aimed at, and spread of the first proposals, of [2].
ACCEPTANCE = 0.44
SPREAD = 0.6


@dataclass(frozen=True, slots=True, eq=False)
class Runs:
    """What independent runs gave, (w,) each.

    Attributes
    ----------
    probability : array
        Estimate of each run; 0 where the other side was not reached.
    variation : array
        Square of its coefficient of variation, with the correlation within chains.
    evaluations : int array
        Evaluations of the limit state.
    undefined : bool array
        Whether the limit state was NaN anywhere.
    """

    probability: Array
    variation: Array
    evaluations: Counts
    undefined: Flags


@dataclass(frozen=True, slots=True, eq=False)
class Crowd:
    """The samples of one level of w runs, chain by chain.

    Attributes
    ----------
    z : array (d, w, LENGTH, chains)
        Samples, rows that vary only.
    h : array (w, LENGTH, chains)
        Limit state, negative or zero on the side that is sampled for.
    """

    z: Array
    h: Array


def run(task: Task, owner: Counts, generators: list[np.random.Generator], size: int, levels: Counts) -> Runs:
    """Return the results of runs that go on together; each depends on its own generator only.

    Parameters
    ----------
    owner : int array (w,)
        Situation of each run.
    generators : list of Generator
        One for each run.
    size : int
        Samples of a level, a multiple of ``LENGTH``.
    levels : int array (w,)
        Levels after which a run is given up.

    Notes
    -----
    The next level begins at the best sample that does not survive, and only what lies strictly beyond it is kept: so
    the estimate is unbiased although the levels are found by the samples themselves [3]_.
    """
    w, chains, d = owner.size, size // LENGTH, len(task.random)
    result = Runs(np.zeros(w), np.zeros(w), np.full(w, size), np.zeros(w, dtype=np.bool_))
    z = np.empty((d, w, LENGTH, chains))
    for k, generator in enumerate(generators):
        z[:, k] = generator.standard_normal((d, LENGTH, chains))
    crowd = Crowd(z, _limit(task, owner, z))
    at, log_part, spread = np.arange(w), np.zeros(w), np.full(w, SPREAD)
    level = 0
    while at.size:
        h = crowd.h.reshape(at.size, size)
        result.undefined[at] |= np.isnan(h).any(axis=1)
        order = np.argsort(h, axis=1, kind="stable")
        threshold = np.take_along_axis(h, order[:, chains : chains + 1], axis=1)[:, 0]
        last = ~(threshold > 0.0) | (level >= levels[at]) | result.undefined[at]
        # A level that nothing has passed, on a plain of equal values, leads no further.
        survivors = np.sum(h < threshold[:, None], axis=1)
        last |= survivors == 0
        border = np.where(last, 0.0, threshold)
        inside = np.where(last[:, None, None], crowd.h <= 0.0, crowd.h < border[:, None, None])
        part, variation = _part(inside, level > 0)
        log_part += np.log(np.where(part > 0.0, part, 1.0))
        result.variation[at] += variation
        result.probability[at[last]] = np.where(part > 0.0, np.exp(log_part), 0.0)[last]
        go = np.flatnonzero(~last)
        if go.size == 0:
            break
        # Where equal values leave fewer survivors than chains, they begin several chains.
        pick = np.arange(chains) % survivors[go, None]
        seeds = np.take_along_axis(order[go], pick, axis=1)
        moved = _Chains(task, owner[at[go]], [generators[k] for k in at[go]], threshold[go], spread[go])
        old = crowd.z.reshape(d, at.size, size)[:, go]
        crowd, accepted = moved.follow(
            np.take_along_axis(old, seeds[None], axis=2), np.take_along_axis(h[go], seeds, axis=1)
        )
        spread = np.clip(spread[go] * np.exp(accepted - ACCEPTANCE), 0.05, 1.0)
        at, log_part = at[go], log_part[go]
        result.evaluations[at] += size - chains
        level += 1
    return result


@dataclass(frozen=True, slots=True, eq=False)
class _Chains:
    """The chains of one level."""

    task: Task
    owner: Counts
    generators: list[np.random.Generator]
    threshold: Array
    spread: Array

    def follow(self, z: Array, h: Array) -> tuple[Crowd, Array]:
        """Return the samples of chains from their seeds, (d, w, chains), and the part of accepted steps."""
        d, w, chains = z.shape
        noise = np.empty((d, w, LENGTH - 1, chains))
        for k, generator in enumerate(self.generators):
            noise[:, k] = generator.standard_normal((d, LENGTH - 1, chains))
        # Each candidate is standard normal itself and correlated with the sample: it is taken if it lies beyond.
        noise *= self.spread[:, None, None]
        keep = np.sqrt(1.0 - self.spread * self.spread)[:, None]
        all_z, all_h = np.empty((d, w, LENGTH, chains)), np.empty((w, LENGTH, chains))
        all_z[:, :, 0], all_h[:, 0] = z, h
        problem = _repeated(self.task.problem, self.owner, chains)
        taken = np.zeros(w)
        for step in range(1, LENGTH):
            candidate = keep * z + noise[:, :, step - 1]
            value = _limit(self.task, self.owner, candidate[:, :, None, :], problem)[:, 0]
            # NaN is let in, so that it is noticed.
            accept = ~(value >= self.threshold[:, None])
            z, h = np.where(accept, candidate, z), np.where(accept, value, h)
            all_z[:, :, step], all_h[:, step] = z, h
            taken += np.sum(accept, axis=1)
        return Crowd(all_z, all_h), taken / ((LENGTH - 1) * chains)


def _repeated(problem: Problem, owner: Counts, times: int) -> Problem:
    return problem.take(np.repeat(owner, times), owner.size * times)


def _limit(task: Task, owner: Counts, z: Array, problem: Problem | None = None) -> Array:
    """Return the limit state at samples (d, w, length, chains), negative or zero on the side sampled for."""
    d, w, length, chains = z.shape
    if problem is None:
        problem = _repeated(task.problem, owner, length * chains)
    g = evaluated(problem, task.placed(z.reshape(d, -1))).reshape(w, length, chains)
    complement = task.complement[owner][:, None, None]
    # Zero counts as failure, whichever side is sampled for.
    return np.where(complement, np.where(g == 0.0, np.finfo(np.float64).tiny, -g), g)


def _part(inside: npt.NDArray[np.bool_], chained: bool) -> tuple[Array, Array]:
    """Return the part of the samples inside, and the square of its coefficient of variation by [1]_.

    Parameters
    ----------
    inside : bool array (w, LENGTH, chains)
        Where samples are inside.
    chained : bool
        Whether the second axis is a Markov chain.
    """
    _, length, chains = inside.shape
    count = np.sum(inside, axis=(1, 2)).astype(np.float64)
    part = count / (length * chains)
    variance = part - part * part
    factor = np.zeros(part.size)
    if chained:
        for lag in range(1, length):
            both = np.sum(inside[:, lag:] & inside[:, :-lag], axis=(1, 2)) / ((length - lag) * chains)
            with np.errstate(divide="ignore", invalid="ignore"):
                correlation = np.where(variance > 0.0, (both - part * part) / variance, 0.0)
            factor += 2.0 * (1.0 - lag / length) * correlation
    with np.errstate(divide="ignore", invalid="ignore"):
        variation = variance / (part * part * length * chains) * (1.0 + np.maximum(factor, 0.0))
    return part, np.where(part > 0.0, variation, 0.0)
