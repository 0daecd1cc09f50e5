"""What each operation computes: one table for constants, interpreter and compiled programs.

Everything is IEEE arithmetic: a root of a negative number is NaN, a division
by zero infinite.  The callers silence numpy's warnings about them.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from scipy import special

Number = Any  # float64 array or scalar


def _sech2(x: Number) -> Number:
    c = np.cosh(x)
    return 1.0 / (c * c)


def _sgn(x: Number, out: Number = None) -> Number:
    return np.copysign(1.0, x, out)


def _positive(x: Number) -> Number:
    return +x


OPERATIONS: dict[str, Callable[..., Number]] = {
    "+": np.add,
    "-": np.subtract,
    "*": np.multiply,
    "/": np.divide,
    "**": np.power,
    "neg": np.negative,
    "pos": _positive,
    "sqrt": np.sqrt,
    "exp": np.exp,
    "log": np.log,
    "log10": np.log10,
    "abs": np.abs,
    "min": np.minimum,
    "max": np.maximum,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "atan": np.arctan,
    "tanh": np.tanh,
    ">=": np.greater_equal,
    "<=": np.less_equal,
    "where": np.where,
    # only in derivatives
    "sgn": _sgn,  # of abs; at 0 by the sign of the zero, so +1 for +0
    "sech2": _sech2,  # of tanh; 1 - tanh² would cancel
    "xlogy": special.xlogy,  # x log y, and 0 where x is 0
}
