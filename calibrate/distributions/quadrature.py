"""Moments of a transformed normal variable by the trapezoidal rule in standard normal space."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from calibrate.distributions.normal_tails import REACH, log_phi
from calibrate.distributions.parameter import Array

# For integrands that are analytic in a strip and decay like the normal density the trapezoidal rule converges
# exponentially in 1/step (Trefethen & Weideman, SIAM Review 56 (2014) 385). The zeros of Phi nearest to the real
# axis are 2.8 away, so that this step leaves an error near exp(-2 pi 2.8 / step).
_STEP = 0.375


def moments_over_u(x: Callable[[Array], Array], shape: tuple[int, ...]) -> tuple[Array, Array]:
    """Return mean and standard deviation of x(u) for standard normal u.

    Parameters
    ----------
    x : callable
        The transform; takes arrays of shape (nodes, ...).
    shape : tuple of int
        Shape of the distribution's parameters.
    """
    half = np.arange(_STEP, REACH - 0.1, _STEP)
    nodes = np.concatenate((-half[::-1], [0.0], half)).reshape((-1,) + (1,) * len(shape))
    weights = _STEP * np.exp(log_phi(nodes))
    with np.errstate(over="ignore", invalid="ignore"):
        values = x(np.broadcast_to(nodes, (nodes.shape[0], *shape)))
        # Added one after the other: the order in which np.sum adds depends on the shape.
        mean = np.cumsum(weights * values, axis=0)[-1]
        sd = np.sqrt(np.cumsum(weights * np.square(values - mean), axis=0)[-1])
    return mean, sd
