"""The standard normal distribution between two bounds: probabilities, moments, and the parent with given moments."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.normal_tails import log_ndtr, log_phi
from calibrate.distributions.parameter import Array

_NODES, _WEIGHTS = (0.5 * a for a in np.polynomial.legendre.leggauss(64))
_NODES = _NODES + 0.5
_FEW_NODES, _FEW_WEIGHTS = (0.5 * a for a in np.polynomial.legendre.leggauss(12))
_FEW_NODES = _FEW_NODES + 0.5
_DROP = 40.0
_STEPS = 80


def log_interval(a: Array, b: Array, gap: Array) -> Array:
    """Return ``ln(Phi(b) - Phi(a))`` for a < b.

    Parameters
    ----------
    a, b : array
        Ends, possibly infinite.
    gap : array
        b - a, given separately because it may be known more exactly than its parts.

    Notes
    -----
    Short intervals by Gauss-Legendre over the density relative to the end nearer to the centre, others as the
    difference of two tails on the side where they are small.
    """
    flip = np.greater(a, -b)
    low, high = np.where(flip, -b, a), np.where(flip, -a, b)
    short = gap * (np.abs(high) + 1.0) < 1.0
    end, width = np.where(short, high, 0.0), np.where(short, gap, 0.0)
    total = np.zeros(np.shape(end))
    for node, weight in zip(_FEW_NODES, _FEW_WEIGHTS, strict=True):
        s = node * width
        total = total + weight * np.exp(s * (end - 0.5 * s))
    with np.errstate(divide="ignore", invalid="ignore"):
        near = log_phi(end) + np.log(total * width)
        log_low, log_high = log_ndtr(low), log_ndtr(high)
        one_side = log_high + log1mexp(log_low - log_high)
        both = np.log1p(-np.exp(log_low) - np.exp(log_ndtr(-high)))
    return np.where(short, near, np.where(high > 0.0, both, one_side))


@dataclass(frozen=True, slots=True)
class TruncatedMoments:
    """Moments of y with density proportional to exp(eta_1 y + eta_2 y**2) on an interval.

    Parameters
    ----------
    log_mass : array
        Logarithm of the integral of the density's kernel.
    mean, m2, m3, m4 : array
        Mean and central moments.
    """

    log_mass: Array
    mean: Array
    m2: Array
    m3: Array
    m4: Array


def truncated_moments(eta_1: Array, eta_2: Array, lower: Array, upper: Array) -> TruncatedMoments:
    """Return the moments by a fixed Gauss-Legendre rule over the part that matters; no closed form cancels here.

    Parameters
    ----------
    eta_1, eta_2 : array
        Natural parameters, eta_2 < 0: location/scale**2 and -1/(2 scale**2) of the parent.
    lower, upper : array
        Bounds, possibly infinite.
    """
    mode = np.clip(eta_1 / (-2.0 * eta_2), lower, upper)
    slope = eta_1 + 2.0 * eta_2 * mode
    # Either way from the mode the exponent falls by |slope| s + |eta_2| s^2; cut where that is _DROP.
    reach = 2.0 * _DROP / (np.abs(slope) + np.sqrt(slope**2 - 4.0 * _DROP * eta_2))
    left = np.maximum(lower - mode, -reach)
    length = np.minimum(upper - mode, reach) - left
    offsets = [left + node * length for node in _NODES]
    masses = [w * np.exp(s * (slope + eta_2 * s)) for s, w in zip(offsets, _WEIGHTS, strict=True)]
    total = sum(masses[1:], masses[0])
    centre = (
        sum((m * s for m, s in zip(masses[1:], offsets[1:], strict=True)), masses[0] * offsets[0]) / total
    )
    m2 = m3 = m4 = np.zeros(np.shape(centre))
    for m, s in zip(masses, offsets, strict=True):
        d = s - centre
        square = m * d * d
        m2, m3, m4 = m2 + square, m3 + square * d, m4 + square * d * d
    log_mass = np.log(total * length) + mode * (eta_1 + eta_2 * mode)
    return TruncatedMoments(log_mass, mode + centre, m2 / total, m3 / total, m4 / total)


def solve_parent(lower: Array, upper: Array) -> tuple[Array, Array, npt.NDArray[np.bool_]]:
    """Return the natural parameters for which the truncated variable has mean 0 and variance 1.

    Parameters
    ----------
    lower, upper : array
        Bounds, lower < 0 < upper.

    Returns
    -------
    eta_1, eta_2 : array
        Natural parameters of the parent.
    converged : array of bool
        Whether the moments were met.

    Notes
    -----
    Matching moments of an exponential family minimises the convex function ``ln mass - eta . (0, 1)``
    (O. Barndorff-Nielsen, Information and Exponential Families, 1978). Newton's method with a line search, kept
    within eta_2 < 0.
    """
    lower, upper = np.broadcast_arrays(lower, upper)
    eta_1, eta_2 = np.zeros(lower.shape), np.full(lower.shape, -0.5)
    m = truncated_moments(eta_1, eta_2, lower, upper)
    # An element that is done rests, so that its bits do not depend on its neighbours.
    done = np.zeros(lower.shape, dtype=np.bool_)
    for _ in range(_STEPS):
        g1, g2 = m.mean, m.m2 + m.mean**2 - 1.0
        cross = m.m3 + 2.0 * m.mean * m.m2
        square = m.m4 + 4.0 * m.mean * m.m3 + 4.0 * m.mean**2 * m.m2 - m.m2**2
        determinant = m.m2 * square - cross**2
        step_1 = (cross * g2 - square * g1) / determinant
        step_2 = (cross * g1 - m.m2 * g2) / determinant
        active = ~done & ((np.abs(g1) > 1e-15) | (np.abs(g2) > 1e-15))
        descent = g1 * step_1 + g2 * step_2
        # At most nine tenths of the way to eta_2 = 0.
        with np.errstate(divide="ignore", invalid="ignore"):
            share = np.where(step_2 > 0.0, np.minimum(1.0, -0.9 * eta_2 / step_2), 1.0)
        merit = m.log_mass - eta_2
        best = m
        new_1, new_2 = eta_1, eta_2
        waiting = active & np.isfinite(descent)
        for _ in range(40):
            trial_1 = np.where(waiting, eta_1 + share * step_1, new_1)
            trial_2 = np.where(waiting, eta_2 + share * step_2, new_2)
            best = truncated_moments(trial_1, trial_2, lower, upper)
            # Rounding of the merit must not reject the last, tiny steps.
            slack = 1e-4 * share * descent + 1e-13 * (1.0 + np.abs(merit))
            accepted = waiting & (best.log_mass - trial_2 <= merit + slack)
            new_1, new_2 = np.where(accepted, trial_1, new_1), np.where(accepted, trial_2, new_2)
            waiting = waiting & ~accepted
            if not np.any(waiting):
                break
            share = np.where(waiting, 0.5 * share, share)
        moved = np.maximum(np.abs(new_1 - eta_1), np.abs(new_2 - eta_2) / np.abs(eta_2))
        if np.any(waiting):
            best = truncated_moments(new_1, new_2, lower, upper)
        eta_1, eta_2, m = new_1, new_2, best
        done |= moved < 1e-14
        if np.all(done):
            break
    error = np.maximum(np.abs(m.mean), np.abs(m.m2 + m.mean**2 - 1.0))
    return eta_1, eta_2, error < 1e-11


def largest_sd(mean: Array, lower: Array, upper: Array) -> Array:
    """Return the supremum of the sd of truncated normal variables with this mean.

    Notes
    -----
    As the parent's scale grows the density tends to an exponential one, exp(theta y), on the interval; beyond it
    no parent exists. On (-1, 1) its mean is the Langevin function ``coth(theta) - 1/theta``.
    """
    mean, lower, upper = np.broadcast_arrays(mean, lower, upper)
    both = np.isfinite(lower) & np.isfinite(upper)
    half = np.where(both, 0.5 * (upper - lower), 1.0)
    with np.errstate(invalid="ignore"):
        place = np.where(both, ((mean - lower) - (upper - mean)) / (2.0 * half), 0.0)
    m = np.abs(place)
    # Start of A. Cohen, Rheologica Acta 30 (1991) 270; Newton's method finishes.
    theta = m * (3.0 - m * m) / (1.0 - m * m)
    done = np.zeros(np.shape(m), dtype=np.bool_)
    for _ in range(30):
        value, slope = _langevin(theta)
        step = (value - m) / slope
        theta = np.where(done, theta, np.maximum(theta - step, 0.0))
        done |= np.abs(step) / (1.0 + theta) < 1e-14
        if np.all(done):
            break
    with np.errstate(invalid="ignore"):
        one_sided = np.minimum(mean - lower, upper - mean)
    return np.where(both, half * np.sqrt(_langevin(theta)[1]), one_sided)


def _langevin(theta: Array) -> tuple[Array, Array]:
    """Return coth(theta) - 1/theta and its slope for theta >= 0."""
    near = theta < 0.1
    t = np.where(near, theta, 0.0)
    far = np.where(near, 1.0, theta)
    q = t * t
    value = t * (1 / 3 - q * (1 / 45 - q * (2 / 945 - q / 4725)))
    slope = 1 / 3 - q * (1 / 15 - q * (2 / 189 - q / 675))
    decay = np.exp(-2.0 * far)
    gap = -np.expm1(-2.0 * far)
    far_value = (1.0 + decay) / gap - 1.0 / far
    far_slope = 1.0 / far**2 - 4.0 * decay / gap**2
    return np.where(near, value, far_value), np.where(near, slope, far_slope)
