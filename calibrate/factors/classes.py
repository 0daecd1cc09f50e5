"""FORM with an action over classes of sites: each class may have a design point of its own, and the nearest counts.

The mixture of unlike classes bends where the rarer class takes over. A search that begins at the medians then ends at
the design point of the commonest class, although that of another may be nearer.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution, Mixture
from calibrate.reliability import Reliability
from calibrate.situations import ConditionalVariable

Array = npt.NDArray[np.float64]
Law = Distribution | ConditionalVariable
Search = Callable[[tuple[Law, ...], Array | None], Reliability]

MOST = 6
"""Classes that are looked at; of more, those evenly spread in the order of their rare values."""
RARE = 1e-3
"""Probability of exceedance by whose value classes are ordered."""
NEAR = 0.3
"""A point of the limit state may lie this much farther than the design point found, and still lead to a nearer one."""
APART = 0.3
"""Points that are nearer to one another than this are of one design point."""
PER_RULE = ("beta", "u", "x", "alpha", "gradient_norm", "code", "iterations")


def nearest_over_classes(
    search: Search, distributions: tuple[Law, ...], row: int, found: Reliability
) -> Reliability:
    """Return the nearest of the design point found and those that the classes lead to.

    Parameters
    ----------
    search : callable
        FORM with these distributions from these starts (m, n), or from the medians.
    distributions : tuple of Distribution
        One of them, number ``row``, is the mixture.
    found : Reliability
        Of the mixture.

    Notes
    -----
    The design point of a class lies on the limit state, so its distance in the space of the mixture bounds beta from
    above; the mixture is searched again only where that bound is of interest.
    That is no proof of the nearest point: at beta above 9 nearer points of rare classes have been seen to be missed.
    """
    law = distributions[row]
    assert isinstance(law, Mixture)
    best = found
    for k in _looked_at(law):
        alone = (*distributions[:row], law.components.take(k), *distributions[row + 1 :])
        point = search(alone, None)
        with np.errstate(all="ignore"):
            u = np.array(point.u)
            u[row] = law.u(point.x[row])
            distance = np.sqrt(np.sum(u * u, axis=0))
            away = np.sqrt(np.sum((u - best.u) ** 2, axis=0))
            promising = (best.beta > 0.0) & (distance < best.beta + NEAR) & (away > APART)
            worth = np.isfinite(distance) & (point.beta > 0.0) & (promising | np.isnan(best.beta))
        if worth.any():
            again = search(distributions, np.where(worth, u, best.u))
            best = _nearer(best, again, worth)
    return best


def _looked_at(law: Mixture) -> Sequence[int]:
    count = law.weights.size
    if count <= MOST:
        return range(count)
    order = np.argsort(np.broadcast_to(law.components.isf(RARE), (count,)), kind="stable")
    return [int(k) for k in order[np.linspace(0, count - 1, MOST).round().astype(np.intp)]]


def _nearer(first: Reliability, second: Reliability, worth: npt.NDArray[np.bool_]) -> Reliability:
    """Return, in the situations that count, the result with the smaller beta."""
    with np.errstate(invalid="ignore"):
        taken = worth & np.isfinite(second.beta) & ~(second.beta >= first.beta)
    picked = {name: np.where(taken, getattr(second, name), getattr(first, name)) for name in PER_RULE}
    for array in picked.values():
        array.setflags(write=False)
    return dataclasses.replace(first, **picked, evaluations=first.evaluations + second.evaluations)
