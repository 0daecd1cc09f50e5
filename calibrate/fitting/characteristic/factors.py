"""Fractile factors k: the limit is mean - k s for a lower fractile and mean + k s for an upper one."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.errors import InputError

Array = NDArray[np.float64]

EN_1990_TABLE_D1: Mapping[str, Mapping[float, float]] = MappingProxyType(
    {
        "known": {
            1: 2.31, 2: 2.01, 3: 1.89, 4: 1.83, 5: 1.80, 6: 1.77, 8: 1.74, 10: 1.72, 20: 1.68, 30: 1.67,
            math.inf: 1.64,
        },
        "unknown": {
            3: 3.37, 4: 2.63, 5: 2.33, 6: 2.18, 8: 2.00, 10: 1.92, 20: 1.76, 30: 1.73, math.inf: 1.64,
        },
    }
)  # fmt: skip
"""EN 1990:2002 Table D1 as printed: k_n of the 5 % characteristic value, by number of tests; from memory, compared.

The row for a known coefficient of variation is 1.64 sqrt(1 + 1/n), not 1.645; entries differ from
`prediction_factor_known` and `prediction_factor` by up to 0.017 and 0.012.
"""

EN_1990_TABLE_D2: Mapping[str, Mapping[float, float]] = MappingProxyType(
    {
        "known": {
            1: 4.36, 2: 3.77, 3: 3.56, 4: 3.44, 5: 3.37, 6: 3.33, 8: 3.27, 10: 3.23, 20: 3.16, 30: 3.13,
            math.inf: 3.04,
        },
        "unknown": {
            4: 11.40, 5: 7.85, 6: 6.36, 8: 5.07, 10: 4.51, 20: 3.64, 30: 3.44, math.inf: 3.04,
        },
    }
)  # fmt: skip
"""EN 1990:2002 Table D2 as printed: k_d,n of the ULS design value, by number of tests; from memory, compared.

The entries for finite n correspond to a fractile of about 0.1 % (3.08 to 3.09 standard deviations); only the last
column corresponds to the 3.04 = 0.8 x 3.8 of the text, a fractile of 0.12 %. A factor computed for 3.04 is therefore up
to 6 % below the printed one.
"""

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)
_PANELS = 7
_CHUNK = 4096
_REACH = 9.0
"""Standard deviations beyond which nothing counts: Phi(-9) = 1e-19."""


def tolerance_factor(n: ArrayLike, fractile: ArrayLike, confidence: ArrayLike) -> Array:
    """Return k of the one-sided tolerance limit of a normal population whose sd is estimated.

    Parameters
    ----------
    n : array_like
        Number of specimens, at least 2.
    fractile : array_like
        Between 0 and 1. Upper fractiles have the factor of the lower one at the same distance from the end.
    confidence : array_like
        Probability, between 0 and 1, that the limit lies on the safe side of the fractile.

    Returns
    -------
    array
        k, in the shape to which the arguments broadcast. It may be negative for confidences below one half.

    Notes
    -----
    ``k sqrt(n)`` is the ``confidence`` quantile of the non-central t distribution with n - 1 degrees of freedom and
    non-centrality ``z sqrt(n)``, z being the normal distance of the fractile [1]_. The distribution function is
    integrated here over the mean or over the sd, whichever is smoother, to about 1e-13, so that the factor keeps
    ten digits for n from 2 to 1e5, fractiles from 1e-6 and confidences from 0.01 to 0.99.

    References
    ----------
    .. [1] G. J. Hahn, W. Q. Meeker, Statistical Intervals, Wiley 1991, section 4.6.
    """
    size = _count(n, 2)
    return general_tolerance_factor(size, size - 1.0, fractile, confidence)


def general_tolerance_factor(
    size: ArrayLike, freedom: ArrayLike, fractile: ArrayLike, confidence: ArrayLike
) -> Array:
    """Return k where mean and sd are not those of one simple sample.

    Parameters
    ----------
    size : array_like
        Variance of the population over variance of the mean, at least 1.
    freedom : array_like
        Degrees of freedom of the variance, at least 1, not necessarily whole.
    fractile, confidence : array_like
        As in `tolerance_factor`, whose method is used: k sqrt(size) is a quantile of non-central t.
    """
    nu = np.maximum(np.asarray(freedom, dtype=np.float64), 1.0)
    arrays = np.broadcast_arrays(_count(size, 1), nu, _distance(fractile), _level(confidence))
    flat = [np.ravel(a) for a in arrays]
    pieces = [_solved(*(a[at : at + _CHUNK] for a in flat)) for at in range(0, max(flat[0].size, 1), _CHUNK)]
    return np.concatenate(pieces).reshape(arrays[0].shape)


def tolerance_factor_known(n: ArrayLike, fractile: ArrayLike, confidence: ArrayLike) -> Array:
    """Return k of the one-sided tolerance limit of a normal population of known sd, z_p + z_c / sqrt(n).

    Parameters
    ----------
    n, fractile, confidence : array_like
        As in `tolerance_factor`; n is at least 1.

    References
    ----------
    .. [1] ISO 16269-6:2014, Annex A (from memory; the formula is elementary).
    """
    size = _count(n, 1)
    return np.asarray(_distance(fractile) + special.ndtri(_level(confidence)) / np.sqrt(size))


def prediction_factor(n: ArrayLike, fractile: ArrayLike) -> Array:
    """Return k of the predictive fractile with sd estimated, t(n - 1) sqrt(1 + 1/n).

    A further specimen falls beyond the limit with the probability of the fractile, on average over samples.

    Parameters
    ----------
    n, fractile : array_like
        As in `tolerance_factor`.

    References
    ----------
    .. [1] EN 1990:2002, D.7.2 and D.7.3, rows "V_X unknown" (vague prior).
    """
    size, tail = _count(n, 2), _tail(fractile)
    return np.asarray(-special.stdtrit(size - 1.0, tail) * np.sqrt(1.0 + 1.0 / size))


def prediction_factor_known(n: ArrayLike, fractile: ArrayLike) -> Array:
    """Return k of the predictive fractile with known sd, z sqrt(1 + 1/n).

    Parameters
    ----------
    n, fractile : array_like
        As in `tolerance_factor`; n is at least 1.

    References
    ----------
    .. [1] EN 1990:2002, D.7.2 and D.7.3, rows "V_X known" (vague prior of the mean).
    """
    return np.asarray(_distance(fractile) * np.sqrt(1.0 + 1.0 / _count(n, 1)))


def _solved(n: Array, freedom: Array, z: Array, c: Array) -> Array:
    """Return the roots of the distribution function of k, batched."""
    from scipy.optimize.elementwise import find_root

    if n.size == 0:
        return np.zeros(0)
    lower, upper = _bracket(n, freedom, z, c)

    def excess(k: Array, /, *known: Array) -> Array:
        n, freedom, z, c = known
        return _distribution(k, n, freedom, z) - c

    found = find_root(
        excess,
        (lower, upper),
        args=(n, freedom, z, c),
        tolerances={"xatol": 1e-13, "xrtol": 1e-14, "fatol": 0.0, "frtol": 0.0},
    )
    return np.asarray(found.x, dtype=np.float64)


def _bracket(n: Array, freedom: Array, z: Array, c: Array) -> tuple[Array, Array]:
    """Return a k whose probability is at most c and one whose is at least c, each from two separate bounds.

    Either bound, on the mean and on the sd, is broken with half the permitted probability (Bonferroni).
    """
    ends = []
    for broken, sign in ((c, -1.0), (1.0 - c, 1.0)):
        mean = z - sign * special.ndtri(0.5 * broken) / np.sqrt(n)
        small = np.sqrt(special.chdtri(freedom, 1.0 - 0.5 * broken) / freedom)
        large = np.sqrt(special.chdtri(freedom, 0.5 * broken) / freedom)
        k = np.where(sign * mean > 0.0, mean / small, mean / large)
        ends.append(k + sign * 1e-9 * (1.0 + np.abs(k)))
    return ends[0], ends[1]


def _distribution(k: Array, n: Array, freedom: Array, z: Array) -> Array:
    """Return P(mean of n standard normal values + z <= k s)."""
    wide = np.abs(k) > 1.0
    result = np.empty_like(k)
    for chosen, integral in ((wide & (k > 0.0), _over_mean), (~wide, _over_sd)):
        result[chosen] = integral(k[chosen], n[chosen], freedom[chosen], z[chosen])
    turned = wide & (k < 0.0)
    result[turned] = 1.0 - _over_mean(-k[turned], n[turned], freedom[turned], -z[turned])
    return result


def _over_mean(k: Array, n: Array, freedom: Array, z: Array) -> Array:
    """Integrate P(s >= (z + t/sqrt(n))/k) over the standard normal t; k is positive."""
    start = np.clip(-z * np.sqrt(n), -_REACH, _REACH)
    t, weight = _panels(start, np.full_like(start, _REACH))
    limit = np.maximum(z[..., None] + t / np.sqrt(n)[..., None], 0.0) / k[..., None]
    half = 0.5 * freedom[..., None]
    beyond = special.gammaincc(half, half * limit**2)
    density = np.exp(-0.5 * t * t) / math.sqrt(2.0 * math.pi)
    return np.asarray(special.ndtr(-z * np.sqrt(n)) + np.sum(weight * density * beyond, axis=-1))


def _over_sd(k: Array, n: Array, freedom: Array, z: Array) -> Array:
    """Integrate Phi(sqrt(n) (k s - z)) over the distribution of s."""
    reach = (_REACH + 1.0) / np.sqrt(2.0 * freedom)
    s, weight = _panels(np.maximum(1.0 - reach, 0.0), 1.0 + reach)
    half = 0.5 * freedom[..., None]
    # The logarithm of the density of s, free of the cancellation of large terms: it is small near s = 1.
    log_constant = math.log(2.0) + _log_gamma_constant(half)
    log_density = log_constant + (2.0 * half - 1.0) * np.log(s) - half * (s - 1.0) * (s + 1.0)
    below = special.ndtr(np.sqrt(n)[..., None] * (k[..., None] * s - z[..., None]))
    return np.asarray(np.sum(weight * np.exp(log_density) * below, axis=-1))


def _log_gamma_constant(a: Array) -> Array:
    """Return a ln a - a - ln Gamma(a), by Stirling's series for large a."""
    large = np.maximum(a, 10.0)
    inverse = 1.0 / (large * large)
    series = (1.0 / 12.0 - inverse * (1.0 / 360.0 - inverse * (1.0 / 1260.0 - inverse / 1680.0))) / large
    stirling = 0.5 * np.log(large / (2.0 * math.pi)) - series
    small = np.minimum(a, 10.0)
    return np.where(a > 10.0, stirling, small * np.log(small) - small - special.gammaln(small))


def _panels(lower: Array, upper: Array) -> tuple[Array, Array]:
    """Return Gauss points and weights of equal panels, in a new last axis."""
    half = 0.5 * (upper - lower)[..., None] / _PANELS
    centres = np.repeat(2.0 * np.arange(_PANELS) + 1.0, _NODES.size)
    points = lower[..., None] + half * (centres + np.tile(_NODES, _PANELS))
    return points, half * np.tile(_WEIGHTS, _PANELS)


def _count(n: ArrayLike, least: int) -> Array:
    size = np.asarray(n, dtype=np.float64)
    if not np.all(size >= least):
        found = np.ravel(size)[np.argmin(np.ravel(size >= least))]
        raise InputError(f"The number of specimens must be at least {least}; got {found:g}.")
    return size


def _level(confidence: ArrayLike) -> Array:
    return inside_unit(confidence, "The confidence")


def _tail(fractile: ArrayLike) -> Array:
    """Return the distance of a fractile from the end on whose side it lies."""
    p = inside_unit(fractile, "The fractile")
    return np.minimum(p, 1.0 - p)


def _distance(fractile: ArrayLike) -> Array:
    return np.asarray(-special.ndtri(_tail(fractile)))


def inside_unit(value: ArrayLike, name: str) -> Array:
    """Return probabilities as an array, or raise InputError for one that is not between 0 and 1."""
    p = np.asarray(value, dtype=np.float64)
    fine = (p > 0.0) & (p < 1.0)
    if not np.all(fine):
        found = np.ravel(p)[np.argmin(np.ravel(fine))]
        raise InputError(
            f"{name} is {found:g}; it must lie between 0 and 1, both excluded, such as 0.05 or 0.75."
        )
    return p
