"""Checks that bounded families share."""

from __future__ import annotations

import numpy as np

from calibrate.distributions.arguments import require
from calibrate.distributions.parameter import Array


def require_order(name: str, lower: Array, upper: Array) -> None:
    """Raise InputError unless every lower bound lies below its upper bound."""
    lower, upper = np.broadcast_arrays(lower, upper)
    good = lower < upper
    if not good.all():
        at = tuple(int(i) for i in np.argwhere(~good)[0]) if good.ndim else ()
        rule = f"less than upper ({float(upper[at]):g})"
        require(name, "lower", good, lower, rule, "Are the bounds reversed?")


def require_between(name: str, mean: Array, lower: Array, upper: Array) -> None:
    """Raise InputError unless every mean lies between its bounds."""
    mean, lower, upper = np.broadcast_arrays(mean, lower, upper)
    good = (lower < mean) & (mean < upper)
    if not good.all():
        at = tuple(int(i) for i in np.argwhere(~good)[0]) if good.ndim else ()
        rule = f"between the bounds {float(lower[at]):g} and {float(upper[at]):g}"
        require(name, "mean", good, mean, rule)
