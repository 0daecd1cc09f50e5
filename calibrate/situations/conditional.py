"""Basic variables whose moments or parameters are expressions of other basic variables."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.errors import InputError
from calibrate.reliability import Conditional
from calibrate.situations.variables import BasicVariable

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class ConditionalVariable(Conditional):
    """The model of a basic variable given those on which it depends.

    Parameters
    ----------
    variable : BasicVariable
    parents : tuple of int
        Rows of the variables on which it depends, in the order of ``names``.
    names : tuple of str
        Their names.
    values : mapping
        Number or array, shape (n,), for every other name that the model uses.

    Notes
    -----
    Where the parents have values for which the model is none, a negative standard deviation for example, the variable
    is NaN, and so is the limit state.
    """

    variable: BasicVariable
    parents: tuple[int, ...]
    names: tuple[str, ...]
    values: Mapping[str, Any]

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape of the values that differ between situations."""
        return np.broadcast_shapes(*(np.shape(v) for v in self.values.values()))

    def take(self, columns: Any) -> ConditionalVariable:
        """Return the model of some situations."""
        taken = {name: v[columns] if np.ndim(v) else v for name, v in self.values.items()}
        return ConditionalVariable(self.variable, self.parents, self.names, taken)

    def given(self, parents: Sequence[Array]) -> Distribution:
        """Return the distribution for these values of the parents, each (n,); NaN where there is none."""
        values, defined = self._usable(parents)
        model = self.variable.distribution(values)
        if defined.all():
            return model
        return Distribution(
            model.family, tuple(np.where(defined, p, np.nan) for p in model.values), defined.shape
        )

    def x_slopes(self, z: Array, parents: Sequence[Array]) -> tuple[Array, Array, tuple[Array, ...]]:
        """Return x, dx/dz, and dx/d(parent) at fixed z for each parent."""
        values, defined = self._usable(parents)
        model = self.variable.distribution(values)
        x, slope = model.x_slope(z)
        by = [self.variable.slope(model, z, values, name) for name in self.names]
        if defined.all():
            return x, slope, tuple(np.zeros_like(z) if b is None else b for b in by)
        lost = np.where(defined, 0.0, np.nan)
        return x + lost, slope + lost, tuple(lost if b is None else b + lost for b in by)

    def slope(self, z: Array, parents: Sequence[Array], name: str) -> Array | None:
        """Return dx/d(name) at fixed z and parents, usually by the size; None where it does not depend on it."""
        values, _ = self._usable(parents)
        return self.variable.slope(self.variable.distribution(values), z, values, name)

    def _usable(self, parents: Sequence[Array]) -> tuple[dict[str, Any], Flags]:
        """Return the values with those that make no distribution replaced by usable ones, and where they did."""
        n = np.shape(parents[0])[0]
        values = {**self.values, **dict(zip(self.names, parents, strict=True))}
        finite = np.all(np.isfinite(np.array(parents)), axis=0)
        try:
            if finite.all():
                self.variable.distribution(values)
                return values, finite
        except InputError:
            pass
        defined = finite & self._defined(values, finite)
        if not defined.any():
            raise InputError(f"Variable '{self.variable.name}' has no distribution in any situation.")
        first = int(np.argmax(defined))
        whole = {name: np.broadcast_to(np.asarray(v), (n,)) for name, v in values.items()}
        return {name: np.where(defined, v, v[first]) for name, v in whole.items()}, defined

    def _defined(self, values: Mapping[str, Any], finite: Flags) -> Flags:
        """Return where there is a distribution, by halving: only a whole call says that some element is wrong."""
        n = finite.size
        whole = {name: np.broadcast_to(np.asarray(v), (n,)) for name, v in values.items()}
        defined = np.zeros(n, dtype=np.bool_)
        _halve(self._makes, whole, np.flatnonzero(finite), defined)
        return defined

    def _makes(self, values: Mapping[str, Any]) -> bool:
        try:
            self.variable.distribution(values)
        except InputError:
            return False
        return True


def law_of(
    variable: BasicVariable, names: Sequence[str], values: Mapping[str, Any]
) -> Distribution | ConditionalVariable:
    """Return the model of a variable for these values of everything that is not a basic variable.

    Parameters
    ----------
    variable : BasicVariable
    names : sequence of str
        The basic variables, in the order of their rows.
    values : mapping
        Number or array, shape (n,), for every other name that the model uses.
    """
    parents = variable.parents(names)
    if not parents:
        return variable.distribution(values)
    needed = {n: values[n] for n in variable.argument_names() if n not in names}
    return ConditionalVariable(variable, tuple(names.index(name) for name in parents), parents, needed)


def _halve(
    makes: Callable[[Mapping[str, Any]], bool],
    whole: Mapping[str, Array],
    at: npt.NDArray[np.intp],
    defined: Flags,
) -> None:
    if at.size == 0:
        return
    if makes({name: v[at] for name, v in whole.items()}):
        defined[at] = True
    elif at.size > 1:
        middle = at.size // 2
        _halve(makes, whole, at[:middle], defined)
        _halve(makes, whole, at[middle:], defined)
