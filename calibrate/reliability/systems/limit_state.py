"""A system as one limit state: the least of the components' margins where one failure suffices, else the greatest."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, did_you_mean
from calibrate.errors import Problem as Wrong
from calibrate.reliability.limit_state import LimitState, Rows
from calibrate.reliability.systems.logic import FailureLogic

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class SystemLimitState:
    """The limit state of a system; made by :func:`system_limit_state`.

    Attributes
    ----------
    logic : FailureLogic
    components : tuple of LimitState
        In the order of ``logic.names``.
    variables : tuple of str
        Those of all components, each once.
    rows : tuple of tuple of int
        For each component the places of its variables among them.
    """

    logic: FailureLogic
    components: tuple[LimitState, ...]
    variables: tuple[str, ...]
    rows: tuple[tuple[int, ...], ...]

    @property
    def kinks(self) -> int:
        """Places where the gradient may jump: those of the components, and where another component becomes active."""
        return sum(c.kinks for c in self.components) + len(self.components) - 1

    @property
    def affine(self) -> bool:
        """Whether g is affine in each variable; only one component alone can be."""
        return len(self.components) == 1 and self.components[0].affine

    def take(self, columns: Any) -> SystemLimitState:
        """Return the limit state of some situations."""
        components = tuple(c.take(columns) for c in self.components)
        return SystemLimitState(self.logic, components, self.variables, self.rows)

    def component_values(self, x: Rows, columns: Any = None) -> Array:
        """Return g of each component, shape (components, k)."""
        k = np.shape(x[0])
        values = [
            np.broadcast_to(component.value([x[i] for i in rows], columns), k)
            for component, rows in zip(self.components, self.rows, strict=True)
        ]
        return np.array(values)

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,)."""
        return self.logic.margin(list(self.component_values(x, columns)))

    def gradient(
        self, x: Rows, columns: Any = None, slopes: Rows | None = None
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and the derivatives of the component that is active."""
        k = np.shape(x[0])
        values, parts = [], []
        for component, rows in zip(self.components, self.rows, strict=True):
            own_slopes = None if slopes is None else [slopes[i] for i in rows]
            g, by_x = component.gradient([x[i] for i in rows], columns, own_slopes)
            values.append(np.broadcast_to(g, k))
            parts.append(by_x)
        g, active = self.logic.active(values)
        total = [np.zeros(k) for _ in self.variables]
        for at, (by_x, rows) in enumerate(zip(parts, self.rows, strict=True)):
            here = active == at
            for i, slope in zip(rows, by_x, strict=True):
                total[i] = np.where(here, slope, total[i])
        return g, total

    def hessian(self, x: Rows) -> tuple[Sequence[Any], Sequence[Sequence[Any]]] | None:
        """Return the derivatives of the component that is active; None where those of any are not known."""
        k = np.shape(x[0])
        active = self.logic.active(list(self.component_values(x)))[1]
        m = len(self.variables)
        first = [np.zeros(k) for _ in range(m)]
        second = [[np.zeros(k) for _ in range(m)] for _ in range(m)]
        for at, (component, rows) in enumerate(zip(self.components, self.rows, strict=True)):
            found = component.hessian([x[i] for i in rows])
            if found is None:
                return None
            here = active == at
            for a, i in enumerate(rows):
                first[i] = np.where(here, found[0][a], first[i])
                for b, j in enumerate(rows):
                    second[i][j] = np.where(here, found[1][a][b], second[i][j])
        return first, second

    def embedded(self, component: int, alpha: npt.ArrayLike) -> Array:
        """Return sensitivity factors (m_i, n) of a component in the space of all variables, (m, n).

        Only for variables that are independent of each other: correlated ones mix the axes of u.
        """
        own = np.asarray(alpha, dtype=np.float64)
        rows = self.rows[component]
        if own.ndim != 2 or len(own) != len(rows):
            raise InputError(
                f"alpha has shape {own.shape}; expected {len(rows)} variables and the situations."
            )
        whole = np.zeros((len(self.variables), own.shape[1]))
        whole[list(rows)] = own
        return whole


def system_limit_state(
    logic: FailureLogic, components: Mapping[str, LimitState], variables: Sequence[str] | None = None
) -> SystemLimitState:
    """Return the limit state of a system.

    Parameters
    ----------
    logic : FailureLogic
        When the system fails.
    components : mapping
        The limit state of each component that the logic names; others are left out.
    variables : sequence of str, optional
        Order of the basic variables; it may have more than the components do. By default they come in the order in
        which the components have them first.

    Raises
    ------
    InputError
        A component or variable is missing.
    """
    for name in logic.names:
        if name not in components:
            raise InputError(
                Wrong(f"There is no limit state '{name}'.", suggestion=did_you_mean(name, components))
            )
    chosen = tuple(components[name] for name in logic.names)
    needed = tuple(dict.fromkeys(v for component in chosen for v in component.variables))
    order = needed if variables is None else tuple(variables)
    missing = [v for v in needed if v not in order]
    if missing:
        raise InputError(f"The components need the variables {', '.join(missing)} as well.")
    rows = tuple(tuple(order.index(v) for v in component.variables) for component in chosen)
    return SystemLimitState(logic, chosen, order, rows)
