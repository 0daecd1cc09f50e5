"""A limit state with combined actions, by the exact distribution of the maximum of their sum.

Where a limit state is ``a - b1 Q1 - b2 Q2 - ...`` with a and b free of the actions, they cause failure with
probability 1 - F_max(a; b) once all other variables are known. That conditional probability enters FORM through one
standard normal variable more:

    g = U - u,   Phi(U) = F_max(a; b),

Y.-K. Wen and H.-C. Chen, "On fast integration for time variant structural reliability", Probabilistic Engineering
Mechanics 2 (1987) 156-162 (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.actions.combination import Action
from calibrate.actions.fbc import MOST_ACTIONS
from calibrate.actions.pulse_sum import PulseSum, pulse_sum
from calibrate.actions.slopes import standard_normal
from calibrate.errors import InputError, Problem
from calibrate.expressions import Expression

Array = npt.NDArray[np.float64]
Rows = Sequence[Array] | Array

MAXIMUM = "combined maximum"
"""Name of the standard normal variable that stands for the actions; no name of a study can contain a space."""

_NEXT_TO_NOTHING = 1e-9
"""Smallest share that an action is given of the scatter of the sum: one that does not act has no distribution."""
_FAR = 38.0


@dataclass(frozen=True, slots=True, eq=False)
class CombinedLimitState:
    """A limit state of the other basic variables and of one standard normal variable for the combined actions.

    Made by :func:`combined_limit_state`.

    Parameters
    ----------
    margin : Expression
        g, positive when safe.
    others : tuple of str
        Basic variables that are not combined.
    pulses : PulseSum
        The actions, in the order of rising repetitions, with weights 1.
    values : mapping
        All other names: numbers, or arrays over situations.
    """

    margin: Expression
    others: tuple[str, ...]
    pulses: PulseSum
    values: Mapping[str, Any]

    @property
    def variables(self) -> tuple[str, ...]:
        """The other basic variables, then the maximum."""
        return (*self.others, MAXIMUM)

    @property
    def kinks(self) -> int:
        """Places where the gradient may jump."""
        return self.margin.kinks

    @property
    def affine(self) -> bool:
        """Return False: the maximum bends it."""
        return False

    def take(self, columns: Any) -> CombinedLimitState:
        """Return the limit state of some situations."""
        values = {name: v[columns] if np.ndim(v) else v for name, v in self.values.items()}
        return CombinedLimitState(self.margin, self.others, self.pulses.take(columns), values)

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,)."""
        return self.gradient(x, columns)[0]

    def gradient(
        self, x: Rows, columns: Any = None, slopes: Rows | None = None
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and its exact derivatives by the other variables and by the maximum."""
        del slopes
        here = self if columns is None else self.take(columns)
        k = np.shape(x[0])
        a, by_other, weight, weight_by_other = here._affine_parts(x, k)
        used, moves = here._weights(a, weight)
        with np.errstate(all="ignore"):
            pulses = replace(here.pulses, weights=tuple(used))
            u, by_value, by_weight = _finite(*standard_normal(pulses.slopes(a)), _spread(pulses, used))
        rows = [
            by_value * da + sum(m * b * d for m, b, d in zip(moves, by_weight, dw, strict=True))
            for da, dw in zip(by_other, weight_by_other, strict=True)
        ]
        return u - x[-1], [*rows, np.full(k, -1.0)]

    def hessian(self, x: Rows) -> None:
        """Return None: second derivatives of the distribution of the maximum are not known."""

    def weights(self, x: Rows) -> Array:
        """Return the coefficients of the actions, shape (m, k); a negative one makes its action favourable."""
        return self._affine_parts(x, np.shape(x[0]))[2]

    def _affine_parts(
        self, x: Rows, k: tuple[int, ...]
    ) -> tuple[Array, list[Array], Array, list[list[Array]]]:
        """Return a and da/dx, b and db/dx, of g = a - sum of b Q."""
        names = tuple(a.name for a in self.pulses.actions)
        point = {**self.values, **dict(zip(self.others, x, strict=False)), **dict.fromkeys(names, 0.0)}
        g, slopes, bends = self.margin.program((*self.others, *names), 2)(point)

        def full(value: Any) -> Array:
            return np.broadcast_to(np.asarray(value, dtype=np.float64), k)

        m = len(self.others)
        by_other = [full(slopes[i]) for i in range(m)]
        weight = np.array([-full(slopes[m + j]) for j in range(len(names))])
        weight_by_other = [[-full(bends[i][m + j]) for j in range(len(names))] for i in range(m)]
        return full(g), by_other, weight, weight_by_other

    def _weights(self, a: Array, weight: Array) -> tuple[Array, Array]:
        """Return coefficients that are positive, and where they still move with the variables (1) or not (0)."""
        spread = np.array([np.broadcast_to(s, a.shape) for s in _spreads(self.pulses)])
        total = np.sum(np.abs(weight) * spread, axis=0)
        total = np.where(total > 0.0, total, np.abs(a) + 1.0)
        least = _NEXT_TO_NOTHING * total / spread
        return np.maximum(weight, least), (weight > least).astype(np.float64)


def _spreads(pulses: PulseSum) -> list[Array]:
    """Return dx/du of each maximum at its median, or what is near it where absence makes that zero."""
    pairs = [d.x_slope(np.zeros(()))[1] for d in pulses.maxima]
    high = [d.x_slope(np.full((), 3.0))[1] for d in pulses.maxima]
    return [np.where(s > 0.0, s, h) for s, h in zip(pairs, high, strict=True)]


def _spread(pulses: PulseSum, weights: Array) -> Array:
    spreads = _spreads(pulses)
    return np.asarray(sum(w * s for w, s in zip(weights, spreads, strict=True)))


def _finite(u: Array, by_value: Array, by_weight: Array, spread: Array) -> tuple[Array, Array, Array]:
    """Return values beyond the support as far ones, with a slope that leads back."""
    off = ~np.isfinite(u) | ~np.isfinite(by_value) | (np.abs(u) > _FAR)
    return (
        np.where(off, np.clip(np.nan_to_num(u), -_FAR, _FAR), u),
        np.where(off, 1.0 / spread, by_value),
        np.where(off | ~np.isfinite(by_weight), 0.0, by_weight),
    )


def combined_limit_state(
    margin: Expression, others: Sequence[str], actions: Sequence[Action], values: Mapping[str, Any]
) -> CombinedLimitState:
    """Return the limit state in which actions act by the maximum of their sum over the reference period.

    Parameters
    ----------
    margin : Expression
        g, positive when safe; certainly affine in the actions together.
    others : sequence of str
        The basic variables that are not combined, constant over the reference period.
    actions : sequence of Action
        One to three, named as in the margin, in any order; distributions of shape () or (n,).
    values : mapping
        All other names: numbers, or arrays over situations.

    Raises
    ------
    InputError
        The margin is not affine in the actions, or there are too many of them.
    """
    if not 1 <= len(actions) <= MOST_ACTIONS:
        raise InputError(
            f"The exact combination takes 1 to {MOST_ACTIONS} variable actions; got {len(actions)}."
        )
    names = [a.name for a in actions]
    if not margin.is_linear_in(*names):
        raise InputError(
            Problem(
                f"The limit state is not a sum in which {', '.join(names)} each have a coefficient of their own.",
                suggestion="The exact combination needs 'a - b1*Q1 - b2*Q2' with a and b free of the actions.",
            )
        )
    ordered = sorted(actions, key=lambda a: a.repetitions)
    return CombinedLimitState(margin, tuple(others), pulse_sum(ordered, tabulated=True), dict(values))
