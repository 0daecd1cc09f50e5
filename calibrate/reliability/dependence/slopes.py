"""Exact derivatives of the correlation in standard normal space, by the stated coefficient and by parameters.

With h the standardised transforms and rho(rho0, p) = E[h_1(z_1) h_2(z_2)], a stated product-moment coefficient is
held by d rho0/d p = -(d rho/d p)/(d rho/d rho0). Since mean and sd move with the parameter,
d h/d p = (d x/d p - E[d x/d p] - h E[h d x/d p])/sd, whose series with that of the other transform is d rho/d p.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property, partial

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution, Extreme, ratio_slope
from calibrate.reliability.dependence.hermite import Expanded, Standardised, long_series, table
from calibrate.reliability.dependence.power_series import pair_series
from calibrate.reliability.dependence.shapes import Shapes, distinct_shapes

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.intp]

RATIO = "ratio"
"""Name of the number of repetitions of an extreme, beside the own parameters of its base."""


@dataclass(frozen=True, slots=True, eq=False)
class EquivalentSlopes:
    """Derivatives of the correlation rho0 in standard normal space of one pair, each of shape (n,).

    Attributes
    ----------
    by_coefficient : array
        d rho0/d rho by the stated coefficient, the distributions held.
    by_first, by_second : mapping of str to array
        d rho0/d p, the stated coefficient held, by the parameters that change the shape of each distribution; own
        parameters that are missing here change nothing. ``ratio`` is that of an extreme.
    """

    by_coefficient: Array
    by_first: Mapping[str, Array]
    by_second: Mapping[str, Array]


class Margin:
    """A distribution among n situations as one of a pair: its series are computed once for all its pairs.

    Parameters
    ----------
    distribution : Distribution
        Shape () or (n,).
    n : int
        Number of situations.
    """

    def __init__(self, distribution: Distribution, n: int) -> None:
        self.distribution, self.n = distribution, n

    @cached_property
    def of_situation(self) -> Index:
        """Which of the distinct shapes each situation has, (n,)."""
        return self._shapes.of_situation

    @cached_property
    def standardised(self) -> Standardised:
        """The standardised transforms of the distinct shapes."""
        return Standardised(self._shapes.distribution)

    @cached_property
    def moved(self) -> Mapping[str, Expanded]:
        """Derivatives of the standardised transforms, by the parameters of the distinct shapes that change them."""
        names = shape_parameters(self.distribution)
        if not names:
            return {}
        shapes = self._shapes.distribution
        return _moved(self.standardised, names, lambda part, z: self._slopes(shapes, names, part, z))

    @cached_property
    def unit(self) -> Array:
        """Size of a unit of the distinct shapes in each situation, (n,)."""
        of_shape = np.broadcast_to(self._shapes.distribution.sd, (self._shapes.distinct,))
        return np.asarray(np.broadcast_to(self.distribution.sd, (self.n,)) / of_shape[self.of_situation])

    @cached_property
    def _shapes(self) -> Shapes:
        return distinct_shapes(self.distribution, self.n)

    def _slopes(self, shapes: Distribution, names: tuple[str, ...], part: slice, z: Array) -> list[Array]:
        """Return dx/dp of some elements at z, (elements, nodes), for each name."""
        chosen = shapes.take(part)
        points = z if not chosen.shape else np.broadcast_to(z[:, None], (z.size, *chosen.shape))
        found = dict(chosen.parameter_slopes(points))
        if RATIO in names:
            base, ratio = (
                (chosen.base, chosen.ratio) if isinstance(chosen, Extreme) else (chosen, np.ones(()))
            )
            found[RATIO] = ratio_slope(base, ratio, points, of_maxima=_of_maxima(self.distribution))
        spread = [np.broadcast_to(found[name], points.shape) for name in names]
        return [np.ascontiguousarray(s.T) if chosen.shape else s[None] for s in spread]


def shape_parameters(distribution: Distribution) -> tuple[str, ...]:
    """Return the own parameters, and ``ratio``, that change more than location and scale of a distribution."""
    if distribution.is_normal or distribution.is_constant:
        return ()
    one = distribution.take(slice(0, 1))
    own = tuple(one.parameter_slopes(np.zeros(one.shape)))
    kinds = {q.name: q.kind for q in distribution.family.parameters}
    extreme = distribution if isinstance(distribution, Extreme) else None
    base = distribution if extreme is None else extreme.base
    if type(base) is Distribution and not (
        "bound" in kinds.values() and {"location", "scale"} & set(kinds.values())
    ):
        # Location and scale, or two bounds, move and stretch the variable and change nothing else.
        own = tuple(name for name in own if kinds[name] == "shape")
    return own if extreme is None or extreme.equivalent is not None else (*own, RATIO)


def equivalent_slopes(
    first: Margin, second: Margin, equivalent: npt.ArrayLike, *, kind: str = "product-moment"
) -> EquivalentSlopes:
    """Return the derivatives of the correlation in standard normal space of a pair.

    Parameters
    ----------
    first, second : Margin
        The two distributions, over the same n situations.
    equivalent : array, shape () or (n,)
        The correlation rho0 in standard normal space, inside (-1, 1).
    kind : {"product-moment", "rank"}
        What is stated, and held while parameters move.

    Returns
    -------
    EquivalentSlopes
        NaN where a distribution has no finite standard deviation.

    Notes
    -----
    Ranks do not change with the distributions: rho0 = 2 sin(pi rho/6), d rho0/d rho = (pi/3) cos(pi rho/6).
    """
    n = first.n
    r = np.array(np.broadcast_to(np.asarray(equivalent, dtype=np.float64), (n,)))
    if n == 0:
        return EquivalentSlopes(r, {}, {})
    if kind == "rank":
        return EquivalentSlopes(math.pi / 3.0 * np.sqrt((1.0 - 0.5 * r) * (1.0 + 0.5 * r)), {}, {})
    i, j = first.of_situation, second.of_situation
    # What overflows far out, where the variance does not exist, is NaN in the end.
    with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
        by_equivalent = _summed(first.standardised, i, second.standardised, j, r)[1]
        by_first = {
            name: -_summed(moved, i, second.standardised, j, r)[0] / by_equivalent / _unit(first, name)
            for name, moved in first.moved.items()
        }
        by_second = {
            name: -_summed(first.standardised, i, moved, j, r)[0] / by_equivalent / _unit(second, name)
            for name, moved in second.moved.items()
        }
        return EquivalentSlopes(1.0 / by_equivalent, by_first, by_second)


class _Moved:
    """Derivatives of standardised transforms by one parameter, expanded like the transforms themselves."""

    def __init__(self, of: Standardised, slopes: Callable[[slice, Array], Array], values: Array) -> None:
        self.of, self._slopes = of, slopes
        _, weights, rows = table()
        self._mean, self._sd = np.empty(len(of.series)), np.empty(len(of.series))
        self.values = np.empty_like(of.values)
        self.series: list[Array] = []
        self.panels = list(of.panels)
        for i, (series, panels) in enumerate(zip(of.series, of.panels, strict=True)):
            if panels is None:
                h, dx, w = of.values[i], values[i], weights
            else:
                h, dx, w = panels.values, slopes(slice(i, i + 1), panels.nodes)[0], panels.weights
            self._mean[i], self._sd[i] = np.sum(w * dx), np.sum(w * h * dx)
            self.values[i] = self._combined(i, of.values[i], values[i])
            if panels is not None:
                own = panels._replace(values=self._combined(i, h, dx))
                self.panels[i] = own
                self.series.append(long_series(own))
            else:
                # Rows of one length: the same order of addition whatever else is computed.
                self.series.append(np.sum(rows * self.values[i], axis=1) if series.size else series)

    def at(self, i: int, z: Array) -> Array:
        """Return the derivative of element i at z, (nodes,)."""
        return self._combined(i, self.of.at(i, z), self._slopes(slice(i, i + 1), z)[0])

    def _combined(self, i: int, h: Array, dx: Array) -> Array:
        return np.asarray((dx - self._mean[i] - h * self._sd[i]) / self.of.sd[i])


def _moved(
    of: Standardised, names: tuple[str, ...], slopes: Callable[[slice, Array], list[Array]]
) -> dict[str, Expanded]:
    chunk, count, nodes = 1024, len(of.series), table()[0]
    parts = [slopes(slice(at, at + chunk), nodes) for at in range(0, count, chunk)]
    found: dict[str, Expanded] = {}
    for k, name in enumerate(names):
        values = np.concatenate([part[k] for part in parts])
        found[name] = _Moved(of, partial(_chosen, slopes, k), values)
    return found


def _chosen(slopes: Callable[[slice, Array], list[Array]], k: int, part: slice, z: Array) -> Array:
    return slopes(part, z)[k]


def _summed(a: Expanded, i: Index, b: Expanded, j: Index, r: Array) -> tuple[Array, Array]:
    """Return E[f(z_1) g(z_2)] for the elements i of a and j of b at correlation r, (n,), and its derivative by r."""
    # Situations share few pairs of shapes and few correlations; each combination is summed once.
    pairs, pair_of = np.unique(i * len(b.series) + j, return_inverse=True)
    known, known_of = np.unique(r, return_inverse=True)
    cases, case_of = np.unique(pair_of * known.size + known_of, return_inverse=True)
    value, slope = np.full(cases.size, np.nan), np.full(cases.size, np.nan)
    of_pair, of_r = np.divmod(cases, max(known.size, 1))
    for at, series in pair_series(a, b, *np.divmod(pairs, len(b.series))):
        place = np.full(pairs.size, -1)
        place[at] = np.arange(at.size)
        mine = np.flatnonzero(place[of_pair] >= 0)
        value[mine], slope[mine] = series.of(place[of_pair[mine]]).value(known[of_r[mine]])
    return value[case_of], slope[case_of]


def _unit(margin: Margin, name: str) -> Array | float:
    carries = any(q.name == name and q.carries_unit for q in margin.distribution.family.parameters)
    return margin.unit if carries else 1.0


def _of_maxima(distribution: Distribution) -> bool:
    return distribution.of_maxima if isinstance(distribution, Extreme) else True
