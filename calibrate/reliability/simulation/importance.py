"""Importance sampling around design points, with their half-spaces as control.

References
----------
.. [1] M. Shinozuka, "Basic analysis of structural safety", Journal of Structural Engineering 109 (1983); G. I.
   Schueller and R. Stix, "A critical appraisal of methods to determine failure probabilities", Structural Safety 4
   (1987): sampling around the design point (from memory).
.. [2] A. Harbitz, "An efficient sampling method for probability of failure calculation", Structural Safety 3 (1986):
   sampling outside a sphere (from memory).
.. [3] A. Owen and Y. Zhou, "Safe and effective importance sampling", Journal of the American Statistical Association 95
   (2000): control variates together with mixtures (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import add_rows, dot
from calibrate.reliability.simulation.base import Array, Flags, Task, Values, evaluated, other_side
from calibrate.reliability.simulation.batches import CELL, FRESH, Block

Columns = npt.NDArray[np.int64]

# The least share of the samples that a design point gets, as part of the likeliest one's.
LEAST_SHARE = 0.1
# Share of the samples that are drawn in any direction outside a sphere, and its radius as part of the least distance.
# Where the limit state bends around the origin they reach what samples around its nearest point do not.
OUTSIDE_SHARE, OUTSIDE = FRESH / CELL, 0.95
# Samples that are counted as seen between plane and limit state beyond those that were: nearly the square of the
# normal deviate of 95 %, as Agresti and Coull (1998) add to counts.
UNSEEN = 4.0


@dataclass(frozen=True, slots=True)
class ImportanceSampling:
    """Samples from a mixture of unit normal densities at the design points, weighted by the ratio of the densities.

    Notes
    -----
    Samples come in pairs on both sides of a design point, which halves the normal numbers that are needed; a pair
    counts as one value, so that the error is that of pairs, whatever their correlation.
    The samples of the half-spaces beyond the tangent planes, whose probability is known exactly, serve as control
    variate: only the difference between limit state and planes is left to chance. A part s of the samples lies outside
    a sphere in any direction, with u.u = r^2 + 2 E, E exponential; it keeps the weights there small. The density h of
    the mixture gives phi(u) / h(u) = 1 / (sum_j share_j exp(u.u_j - |u_j|^2 / 2) + [|u| > r] s / (c |u|^(d - 2))).
    """

    name: str = "importance sampling"
    pilot: int = 512
    cost: int = 2
    least: int = 130
    needs_points: bool = True
    binomial: bool = False
    bounded: bool = False

    def sampler(self, task: Task) -> ImportanceSampler:
        """Return the method made ready for the situations of a task."""
        assert task.points is not None
        points = task.points[:, task.random, :]
        valid: Flags = np.asarray(np.isfinite(points).all(axis=1))
        points = np.where(valid[:, None, :], points, 0.0)
        square = np.stack([dot(p, p) for p in points])
        length = np.sqrt(square)
        log_tail = np.where(valid, special.log_ndtr(-length), -np.inf)
        usable: Flags = np.asarray(valid.any(axis=0))
        best = np.where(usable, np.max(log_tail, axis=0), 0.0)
        share = np.where(valid, np.maximum(np.exp(log_tail - best), LEAST_SHARE), 0.0)
        share = (1.0 - OUTSIDE_SHARE) * share / np.where(usable, add_rows(share), 1.0)
        tails = add_rows(np.where(valid, special.ndtr(-length), 0.0))
        # The weight of a sample at a design point; what is not seen is half of a pair.
        at_point = np.where(valid, np.exp(-0.5 * square) / np.where(valid, share, 1.0), 0.0)
        radius = OUTSIDE * np.min(np.where(valid, length, np.inf), axis=0, initial=np.inf)
        radius = np.where(usable, radius, 0.0)
        return ImportanceSampler(
            task,
            usable,
            np.sum(valid, axis=0) > 1,
            0.5 * np.sqrt(UNSEEN) * np.max(at_point, axis=0),
            tails,
            points,
            square,
            share,
            _borders(share),
            valid,
            radius * radius,
            _density(len(task.random), radius * radius),
        )


def _density(d: int, inner: Array) -> Array:
    """Return the constant of phi(u)/h(u) = constant (u.u)^(d/2 - 1) outside the sphere.

    Directions are uniform and u.u = r^2 + 2 E with a standard exponential E.
    """
    half = 0.5 * d
    return np.asarray(np.exp(np.log(2.0) - 0.5 * inner - half * np.log(2.0) - special.gammaln(half)))


def _borders(share: Array) -> Array:
    """Return the uniform numbers at which one point's share ends; the last share that is not zero has no end.

    Below the first share lies that of the samples outside the sphere.
    """
    borders = OUTSIDE_SHARE + np.cumsum(share, axis=0)
    later = np.cumsum(share[::-1], axis=0)[::-1] - share
    borders[(share > 0.0) & (later <= 0.0)] = np.inf
    return borders


@dataclass(frozen=True, slots=True, eq=False)
class ImportanceSampler:
    """Importance sampling of the situations of a task.

    Attributes
    ----------
    points : array (k, d, n)
        Design points, rows that vary only; zero where there is none.
    square, share : array (k, n)
        Squares of their distances from the origin, and shares in the mixture.
    borders : array (k, n)
        Uniform numbers at which one point's share ends and the next one's begins.
    valid : bool array (k, n)
        Where there is a point.
    inner : array (n,)
        Square of the radius of the sphere outside which some of the samples are drawn, in any direction.
    constant : array (n,)
        Of the ratio of the densities there.
    """

    task: Task
    usable: Flags
    mixed: Flags
    atom: Array
    control_mean: Array
    points: Array
    square: Array
    share: Array
    borders: Array
    valid: Flags
    inner: Array
    constant: Array

    def values(self, problem: Problem, block: Block, z: Array, v: Array) -> Values:
        """Return, for each pair, the weights on the other side of the limit state and beyond the tangent planes."""
        centre = self._centre(block, z, v)
        complement = block.of(self.task.complement)
        value, control = np.zeros(v.size), np.zeros(v.size)
        for u in (centre + z, np.subtract(centre, z, out=centre)):
            weight, beyond = self._weigh(block, u)
            g = evaluated(problem, self.task.placed(u))
            control += weight * beyond
            weight *= 0.5 * other_side(g, complement)
            value += weight
        control *= 0.5
        return Values(value, control, 2)

    def _centre(self, block: Block, z: Array, v: Array) -> Array:
        """Return the design points of the samples, chosen by uniform numbers.

        Samples outside the sphere have the origin for centre and are moved there.
        """
        at = np.flatnonzero(v < OUTSIDE_SHARE)
        z[:, at] = self._outwards(z[:, at], v[at], block.columns[at])
        if len(self.points) == 1:
            centre = block.of(self.points[0])
        else:
            chosen = np.zeros(v.size, dtype=np.int64)
            for border in self.borders[:-1]:
                chosen += v >= block.of(border)
            centre = np.array([self.points[chosen, i, block.columns] for i in range(len(z))])
        centre[:, at] = 0.0
        return centre

    def _outwards(self, z: Array, v: Array, situation: Columns) -> Array:
        """Move samples along their rays out of the sphere, how far by their uniform numbers."""
        with np.errstate(divide="ignore", invalid="ignore"):
            square = self.inner[situation] - 2.0 * np.log(v / OUTSIDE_SHARE)
            return np.asarray(z * np.sqrt(square / dot(z, z)))

    def _weigh(self, block: Block, u: Array) -> tuple[Array, Array | Flags]:
        """Return phi(u) / h(u), and in how many of the half-spaces each sample lies."""
        square = dot(u, u)
        with np.errstate(divide="ignore", invalid="ignore"):
            total = block.of(OUTSIDE_SHARE / self.constant) / _power(square, len(u) - 2)
        total[square < block.of(self.inner)] = 0.0
        beyond: Array | Flags | None = None
        for point, length, share, valid in zip(self.points, self.square, self.share, self.valid, strict=True):
            along, size = _along(block, point, u), block.of(length)
            there = along >= size
            if len(self.points) > 1:
                there &= block.of(valid)
            beyond = there if beyond is None else beyond + there.astype(np.float64)
            along -= 0.5 * size
            np.exp(along, out=along)
            along *= block.of(share)
            total += along
        assert beyond is not None
        with np.errstate(divide="ignore"):
            return np.divide(1.0, total, out=total), beyond


def _power(square: Array, exponent: int) -> Array:
    """Return square^(exponent/2) for exponents from -1."""
    if exponent < 0:
        return np.asarray(1.0 / np.sqrt(square))
    found: Array = np.sqrt(square) if exponent % 2 else np.ones(())
    for _ in range(exponent // 2):
        found = found * square
    return found


def _along(block: Block, point: Array, u: Array) -> Array:
    """Return the scalar product of samples with the points of their situations, row by row in order."""
    total: Array = block.of(point[0]) * u[0]
    for own, row in zip(point[1:], u[1:], strict=True):
        total += block.of(own) * row
    return total
