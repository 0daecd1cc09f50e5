"""The reliability of a system from the design points of its components, and its exact derivatives.

Each component event is replaced by the half space behind its design point: the first-order approximation of systems of
M. Hohenbichler and R. Rackwitz, "First-order concepts in system reliability", Structural Safety 1 (1983) 177-188. Only
the curvature of the components' limit states is neglected; the probability of the half spaces is computed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.errors import InputError
from calibrate.reliability.systems.bounds import ditlevsen_bounds, simple_bounds
from calibrate.reliability.systems.cubes import failure, survival
from calibrate.reliability.systems.half_spaces import HalfSpaces
from calibrate.reliability.systems.logic import FailureLogic, Sets
from calibrate.reliability.systems.multinormal import check_points, checked, neutral, unusable
from calibrate.reliability.systems.planes import correlation_of
from calibrate.reliability.systems.separation import POINTS
from calibrate.reliability.systems.slopes import by_beta, by_correlation, density, direction

Array = npt.NDArray[np.float64]

# From this probability on the index is taken from the probability of survival.
_LIKELY = 0.5
_NO_DENSITY = 1e-290


@dataclass(frozen=True, slots=True, eq=False)
class SystemResult:
    """The system in n situations; k components, m variables.

    Attributes
    ----------
    probability : array (n,)
        First-order probability of failure.
    beta : array (n,)
        Its index, -Phi^-1(probability), negative where failure is likely.
    error : array (n,)
        Estimate of the error of integration of ``probability``, not of the approximation by planes.
    lower, upper : array (n,)
        Bounds of ``probability`` from pairs of events: of Ditlevsen for the union of the cut sets; for a single cut
        set from the probabilities of its pairs of components.
    simple_lower, simple_upper : array (n,)
        Bounds from single events.
    correlation : array (k, k, n)
        Of the linear margins of the components.
    by_beta : array (k, n) or None
        d beta / d beta_i at fixed correlation; NaN where beta is beyond about 36 in size.
    by_correlation : array (k, k, n) or None
        d beta / d rho_ij, symmetric, each entry for a change of the pair ij = ji; zero diagonal. 0 for planes that
        coincide or oppose each other, where no derivative exists.
    equivalent_alpha : array (m, n) or None
        Unit vector along which beta grows most when the components are shifted together: alpha of the equivalent
        component of S. Gollwitzer and R. Rackwitz, Reliability Engineering 5 (1983) 227-243 (from memory). NaN where
        shifts cancel, as in symmetric systems.
    """

    probability: Array
    beta: Array
    error: Array
    lower: Array
    upper: Array
    simple_lower: Array
    simple_upper: Array
    correlation: Array
    by_beta: Array | None
    by_correlation: Array | None
    equivalent_alpha: Array | None


def system_probability(
    beta: npt.ArrayLike,
    logic: FailureLogic,
    *,
    alpha: npt.ArrayLike | None = None,
    correlation: npt.ArrayLike | None = None,
    slopes: bool = True,
    points: int = POINTS,
) -> SystemResult:
    """Return probability, bounds and derivatives of a system.

    Parameters
    ----------
    beta : array (k, n)
        Reliability index of each component, in the order of ``logic.names``. A situation with NaN gets NaN.
    logic : FailureLogic
        When the system fails.
    alpha : array (k, m, n), optional
        Sensitivity factors of each component in one common standard normal space: 0 for variables that a component
        does not have.
    correlation : array (k, k) or (k, k, n), optional
        Correlation of the margins; needed where ``alpha`` is not given, and not allowed beside it.
    slopes : bool
        Whether derivatives are wanted. They cost k (k + 1) / 2 probabilities of one and two dimensions less.
    points : int
        See :func:`~calibrate.reliability.systems.multinormal.orthant`.

    Raises
    ------
    InputError
        The arguments do not fit together, or the logic falls into too many cases.
    """
    if (alpha is None) == (correlation is None):
        raise InputError("Give either alpha or correlation.")
    shape = np.shape(beta)
    directions = None if alpha is None else np.asarray(alpha, dtype=np.float64)
    if directions is not None:
        if directions.ndim != 3 or (directions.shape[0], directions.shape[2]) != shape:
            text = f"alpha has shape {directions.shape} and beta {shape}"
            raise InputError(
                f"{text}; expected (components, variables, situations) and (components, situations)."
            )
        correlation = correlation_of(directions)
    values, matrix = checked(np.asarray(beta), np.asarray(correlation))
    if len(values) != len(logic.names):
        text = f"The logic has {len(logic.names)} components, beta {len(values)}"
        raise InputError(f"{text}; they must be as many, in the order {', '.join(logic.names)}.")
    check_points(points)
    bad = unusable(values, matrix)
    planes = HalfSpaces(*neutral(values, matrix, bad), points, tuple(range(len(values))))
    sets: Sets = frozenset(frozenset(s) for s in logic.cut_sets)

    def told(found: Array) -> Array:
        return np.where(bad, np.nan, found)

    probability, index, error = _index(planes, sets)
    bounds = _intersection(planes) if logic.is_parallel else _union(planes, logic.cut_sets)
    lower, upper, simple_lower, simple_upper = map(told, bounds)
    by_index, by_rho, equivalent = None, None, None
    if slopes:
        # d P = -phi(beta) d beta; there is no slope where failure or survival is next to impossible.
        scale = density(index)
        scale = np.where(scale > _NO_DENSITY, scale, np.nan)
        by_index = told(by_beta(planes, sets) / scale)
        by_rho = told(by_correlation(planes, sets) / scale)
        equivalent = None if directions is None else told(direction(by_index, directions))
    return SystemResult(
        told(probability), told(index), told(error), lower, upper, simple_lower, simple_upper,
        matrix, by_index, by_rho, equivalent,
    )  # fmt: skip


def _index(planes: HalfSpaces, sets: Sets) -> tuple[Array, Array, Array]:
    """Return probability, index and error."""
    probability, error = planes.mean(failure(sets))
    index = -special.ndtri(probability)
    at = np.flatnonzero(probability > _LIKELY)
    if at.size:
        safe, error[at] = planes.take(at).mean(survival(sets))
        index[at] = special.ndtri(safe)
        probability[at] = 1.0 - safe
    return probability, index, error


def _associated(correlation: Array) -> npt.NDArray[np.bool_]:
    """Return where no correlation is negative: failures then support each other (L. D. Pitt, 1982)."""
    k = len(correlation)
    return np.asarray(np.min(correlation.reshape(k * k, -1), axis=0) >= 0.0)


def _union(planes: HalfSpaces, cut_sets: tuple[tuple[int, ...], ...]) -> tuple[Array, Array, Array, Array]:
    """Return bi-modal and uni-modal bounds of the union of the cut sets."""
    together = _remembered(planes.together)
    c = len(cut_sets)
    single = np.array([together(s) for s in cut_sets])
    pair = np.zeros((c, *single.shape))
    for i in range(c):
        for j in range(i):
            pair[i, j] = together(tuple(sorted({*cut_sets[i], *cut_sets[j]})))
            pair[j, i] = pair[i, j]
    return (*ditlevsen_bounds(single, pair), *simple_bounds(single, _associated(planes.correlation)))


def _intersection(planes: HalfSpaces) -> tuple[Array, Array, Array, Array]:
    """Return the bounds of a single cut set, by its pairs of components and by its components."""
    k = len(planes.beta)
    single = np.array([planes.together((i,)) for i in range(k)])
    simple_upper = np.min(single, axis=0)
    product = single[0]
    for row in single[1:]:
        product = product * row
    lower = np.where(_associated(planes.correlation), product, 0.0) if k > 1 else product
    if k == 1:
        return lower, simple_upper, lower, simple_upper
    upper = np.min(np.array([planes.together((j, i)) for i in range(k) for j in range(i)]), axis=0)
    return (upper if k == 2 else lower), upper, lower, simple_upper


def _remembered(function: Callable[[tuple[int, ...]], Array]) -> Callable[[tuple[int, ...]], Array]:
    known: dict[tuple[int, ...], Array] = {}

    def remembered(key: tuple[int, ...]) -> Array:
        if key not in known:
            known[key] = function(key)
        return known[key]

    return remembered
