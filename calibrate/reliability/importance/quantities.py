"""Derivatives of a limit state by its fixed quantities."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.reliability.limit_state import (
    DIFFERENCE_STEP,
    BoundExpression,
    CallableLimitState,
    ExpressionLimitState,
    LimitState,
    Rows,
)

Array = npt.NDArray[np.float64]


def quantity_slopes(limit_state: LimitState, x: Rows) -> dict[str, tuple[Array, Array]]:
    """Return each quantity of a limit state with dg/dq at fixed x.

    Parameters
    ----------
    limit_state : LimitState
        Of n situations.
    x : sequence of array
        m rows of n physical values.

    Returns
    -------
    dict
        ``{name: (value, dg/dq)}``, each () or (n,); exact for expressions, central differences for Python functions,
        empty for limit states that hold no named quantities.
    """
    if isinstance(limit_state, BoundExpression):
        return _of_expression(limit_state.source, limit_state.values, x)
    if isinstance(limit_state, ExpressionLimitState):
        return _of_expression(limit_state, limit_state.values, x)
    if isinstance(limit_state, CallableLimitState):
        return _of_function(limit_state, x)
    return {}


def _of_expression(
    state: ExpressionLimitState, values: Mapping[str, Any], x: Rows
) -> dict[str, tuple[Array, Array]]:
    names = tuple(name for name in values if state.margin.depends_on(name))
    if not names:
        return {}
    # Numbers go in as arrays, whose arithmetic is the same to the last bit in any batch.
    fixed = {name: np.atleast_1d(np.asarray(values[name], dtype=np.float64)) for name in names}
    _, slopes = state.margin.gradient({**fixed, **dict(zip(state.variables, x, strict=True))}, names)
    return {name: (fixed[name], slope) for name, slope in zip(names, slopes, strict=True)}


def _of_function(state: CallableLimitState, x: Rows) -> dict[str, tuple[Array, Array]]:
    found = {}
    for name, given in state.values.items():
        value = np.asarray(given, dtype=np.float64)
        step = DIFFERENCE_STEP * np.where(value == 0.0, 1.0, np.abs(value))
        above, below = value + step, value - step
        g = [
            CallableLimitState(state.function, state.variables, {**state.values, name: moved}).value(x)
            for moved in (above, below)
        ]
        found[name] = value, (g[0] - g[1]) / (above - below)
    return found
