"""Actions over a territory or a fleet: parameters that differ by class of site, and reliability over the sites.

A site keeps its class over the years. Therefore the maximum over a longer period is taken site by site and mixed
afterwards; the maximum of the mixture would move the structure to another site in every period.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.distributions import Distribution, Mixture, maximum_of, mixture
from calibrate.errors import InputError

Array = npt.NDArray[np.float64]


def _weights(weights: npt.ArrayLike, count: int) -> Array:
    w = np.array(weights, dtype=np.float64)
    if w.shape != (count,):
        given = "no list" if w.ndim != 1 else str(w.size)
        raise InputError(f"There are {count} classes of sites, which need as many weights; got {given}.")
    if not (np.isfinite(w).all() and (w >= 0.0).all() and w.sum() > 0.0):
        raise InputError("Weights of sites must be zero or positive, and not all zero.")
    w /= w.sum()
    w.setflags(write=False)
    return w


@dataclass(frozen=True, slots=True, eq=False)
class Territory:
    """An action over classes of sites.

    Attributes
    ----------
    components : Distribution
        The action by class, parameters of shape (K,).
    weights : array (K,)
        Share of each class; sum 1, possibly zero.
    """

    components: Distribution
    weights: Array

    @property
    def average(self) -> Mixture:
        """The action at a site drawn at random, for beta on average."""
        return mixture(self.components, self.weights)

    def site(self, index: int) -> Distribution:
        """Return the action of one class, of shape ()."""
        return self.components.take(index)

    def worst(self, exceedance: float) -> int:
        """Return which class has the largest value of this probability of exceedance; of equals, the first.

        The lowest beta comes from the class that is worst at the design point, so ask at the level Phi(alpha beta),
        alpha being the action's own (negative) sensitivity factor: the order of the means need not be that of tails.
        Classes without weight do not count.
        """
        if not 0.0 < exceedance < 1.0:
            raise InputError(f"A probability of exceedance lies between 0 and 1; got {exceedance:g}.")
        values = np.broadcast_to(self.components.isf(exceedance), self.weights.shape)
        return int(np.argmax(np.where(self.weights > 0.0, values, -np.inf)))


def territory(
    components: Distribution, weights: npt.ArrayLike, periods_ratio: npt.ArrayLike = 1.0
) -> Territory:
    """Return an action over classes of sites, for the reference period.

    Parameters
    ----------
    components : Distribution
        The action by class, parameters of shape (K,).
    weights : array_like (K,)
        Not negative, not all zero; scaled to sum 1.
    periods_ratio : float or array (K,)
        Reference period over the period of the components.

    Raises
    ------
    InputError
        Weights that do not fit, a ratio that is not positive, or components that are not one list.
    """
    if len(components.shape) != 1:
        raise InputError("An action over sites needs one set of parameters for each class of sites.")
    w = _weights(weights, components.shape[0])
    return Territory(maximum_of(components, periods_ratio), w)


def over_sites(
    components: Distribution, weights: npt.ArrayLike, periods_ratio: npt.ArrayLike = 1.0
) -> Mixture:
    """Return the action at a site drawn at random; parameters and errors as in :func:`territory`."""
    return territory(components, weights, periods_ratio).average


@dataclass(frozen=True, slots=True, eq=False)
class SiteReliability:
    """Reliability over classes of sites; arrays are numbers or of shape (n,), one per situation.

    Attributes
    ----------
    by_site : array (K,) or (K, n)
        Beta of each class.
    average : array
        Beta of the weighted mean failure probability, which the high-risk classes govern; it is below the mean of
        the betas.
    worst : array
        Lowest beta of the classes that have weight.
    worst_site : int array
        Which class that is; of equals, the first.
    weights : array (K,)
    """

    by_site: Array
    average: Array
    worst: Array
    worst_site: npt.NDArray[np.int64]
    weights: Array

    def fractile(self, share: float) -> Array:
        """Return the beta below which lies at most this share of the sites (0.05: the 5 % site).

        Sites whose betas are equal count together; the value is always that of a class.
        """
        if not 0.0 <= share <= 1.0:
            raise InputError(f"A share of the sites lies between 0 and 1; got {share:g}.")
        kept = self.weights > 0.0
        beta = self.by_site[kept]
        order = np.argsort(beta, axis=0, kind="stable")
        reached = np.cumsum(self.weights[kept][order], axis=0)
        # The sum of weights is 1 only to rounding.
        at = np.argmax(reached >= share - 1e-12, axis=0)
        ordered = np.take_along_axis(beta, order, axis=0)
        return np.asarray(np.take_along_axis(ordered, at[None], axis=0)[0])


def reliability_over_sites(beta: npt.ArrayLike, weights: npt.ArrayLike) -> SiteReliability:
    """Return beta on average, by site and for the worst class.

    Parameters
    ----------
    beta : array_like (K,) or (K, n)
        Beta by class of site and situation; NaN where there is none, which makes that situation NaN.
    weights : array_like (K,)
        Not negative, not all zero; scaled to sum 1.

    Raises
    ------
    InputError
        Weights that do not fit.

    Notes
    -----
    The total probability theorem; the sum is taken of logarithms, from the tail that is smaller, so that it loses
    nothing at high beta.
    """
    by_site = np.array(beta, dtype=np.float64)
    if by_site.ndim not in (1, 2):
        raise InputError("Beta by site needs one row for each class of sites.")
    w = _weights(weights, by_site.shape[0])
    by_site.setflags(write=False)
    kept = np.flatnonzero(w > 0.0)
    chosen = by_site[kept]
    share = w[kept].reshape((-1,) + (1,) * (by_site.ndim - 1))
    log_fail, log_safe = (
        special.logsumexp(special.log_ndtr(s * chosen), axis=0, b=share) for s in (-1.0, 1.0)
    )
    rare = log_fail < log_safe
    tail = special.ndtri_exp(np.where(rare, log_fail, log_safe))
    average = np.where(rare, -tail, tail)
    at = np.argmin(chosen, axis=0)
    return SiteReliability(
        by_site, np.asarray(average), np.asarray(np.min(chosen, axis=0)), np.asarray(kept[at]), w
    )
