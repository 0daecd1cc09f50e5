"""Limit states: g > 0 is safe.

A limit state is evaluated in physical space for a batch of situations at once; FORM adds the transforms.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import Expression
from calibrate.expressions.staged import Staged

Array = npt.NDArray[np.float64]
Rows = Sequence[Array] | Array

# Step of central differences in units of u: about the cube root of the rounding error.
DIFFERENCE_STEP = 6e-6


class LimitState(Protocol):
    """What FORM needs to know of a limit state.

    Attributes
    ----------
    variables : tuple of str
        Names of the basic variables, in the order of the rows of ``x``.
    kinks : int
        Places where the gradient may jump, 0 when smooth or unknown. Situations of a limit state with kinks are
        always searched from several starts.
    affine : bool
        Whether g is known to be affine in each variable, the others held: a product of sums, for example. Other
        limit states are looked at in more places before a single design point is believed.
    """

    @property
    def variables(self) -> tuple[str, ...]: ...  # noqa: D102

    @property
    def kinks(self) -> int: ...  # noqa: D102

    @property
    def affine(self) -> bool: ...  # noqa: D102

    def take(self, columns: Any) -> LimitState:
        """Return the limit state of some situations; ``columns`` is a slice or an array of indices."""

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,).

        Parameters
        ----------
        x : array or sequence of arrays
            m rows of k physical values.
        columns : index array, optional
            To which of the situations the k columns belong; None when they are all of them, in order.
        """

    def gradient(
        self, x: Rows, columns: Any = None, slopes: Rows | None = None
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and its m derivatives by the basic variables, each of a shape that broadcasts to (k,).

        ``slopes`` are dx/du, the scale on which each variable matters; only differences need them.
        """

    def hessian(self, x: Rows) -> tuple[Sequence[Any], Sequence[Sequence[Any]]] | None:
        """Return the m first and (m, m) second derivatives of g, each of a shape that broadcasts to (k,).

        None where they are not known exactly; differences of the gradient then take their place.
        """


@lru_cache(maxsize=256)
def _affine(margin: Expression, variables: tuple[str, ...]) -> bool:
    return all(margin.is_linear_in(name) for name in variables)


def _taken(values: Mapping[str, Any], columns: Any) -> dict[str, Any]:
    return {name: v[columns] if np.ndim(v) else v for name, v in values.items()}


@dataclass(frozen=True, slots=True, eq=False)
class ExpressionLimitState:
    """A limit state given by an expression.

    Parameters
    ----------
    margin : Expression
        g as a function of basic variables and fixed values.
    variables : tuple of str
        The names that are basic variables.
    values : mapping
        The other names: numbers, or arrays over situations.
    """

    margin: Expression
    variables: tuple[str, ...]
    values: Mapping[str, Any] = field(default_factory=dict)

    @property
    def kinks(self) -> int:
        """Places where the gradient may jump."""
        return self.margin.kinks

    @property
    def affine(self) -> bool:
        """Whether g is affine in each variable."""
        return _affine(self.margin, self.variables)

    def fixed(self, order: int) -> tuple[Staged, tuple[Any, ...]]:
        """Return g (order 0), or g with its gradient (1), in two stages, the first one evaluated."""
        stages = self.margin.staged(self.variables, order)
        # numpy's arithmetic of scalars may differ from that of arrays in the last bit, so numbers go in as arrays.
        whole = {name: np.atleast_1d(np.asarray(v, dtype=np.float64)) for name, v in self.values.items()}
        alone = all(np.ndim(v) == 0 for v in self.values.values())
        fixed = stages.fixed(whole)
        # What came of numbers only is a number again.
        return stages, tuple(v[0] if np.ndim(v) and (alone or v.size == 1) else v for v in fixed)

    def take(self, columns: Any) -> LimitState:
        """Return the limit state of some situations."""
        return BoundExpression(self).take(columns)

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,)."""
        return BoundExpression(self).value(x, columns)

    def gradient(
        self, x: Rows, columns: Any = None, slopes: Rows | None = None
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and its exact derivatives."""
        return BoundExpression(self).gradient(x, columns, slopes)

    def hessian(self, x: Rows) -> tuple[Sequence[Any], Sequence[Sequence[Any]]]:
        """Return the exact first and second derivatives."""
        point = {**self.values, **dict(zip(self.variables, x, strict=True))}
        _, by_x, by_two = self.margin.program(self.variables, 2)(point)
        return by_x, by_two


class BoundExpression:
    """The same for some situations; what does not depend on basic variables is evaluated once, when it is needed.

    Attributes
    ----------
    source : ExpressionLimitState
        Of all situations.
    variables, kinks, affine
        As of any limit state.
    """

    __slots__ = ("_columns", "_parent", "_parts", "affine", "kinks", "source", "variables")

    def __init__(
        self, source: ExpressionLimitState, parent: BoundExpression | None = None, columns: Any = None
    ) -> None:
        self.source = source
        self.variables = source.variables
        self.kinks = source.kinks
        self.affine = source.affine
        self._parent = parent
        self._columns = columns
        self._parts: dict[int, tuple[Staged, tuple[Any, ...]]] = {}

    @property
    def values(self) -> Mapping[str, Any]:
        """The values of the source for these situations."""
        return self.source.values if self._parent is None else _taken(self._parent.values, self._columns)

    def take(self, columns: Any) -> BoundExpression:
        """Return the limit state of some situations."""
        return BoundExpression(self.source, self, columns)

    def _fixed(self, order: int) -> tuple[Staged, tuple[Any, ...]]:
        found = self._parts.get(order)
        if found is None:
            if self._parent is None:
                found = self.source.fixed(order)
            else:
                stages, whole = self._parent._fixed(order)
                found = stages, tuple(v[self._columns] if np.ndim(v) else v for v in whole)
            self._parts[order] = found
        return found

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,)."""
        stages, fixed = (self if columns is None else self.take(columns))._fixed(0)
        return np.broadcast_to(stages(list(x), fixed), np.shape(x[0]))

    def gradient(
        self,
        x: Rows,
        columns: Any = None,
        slopes: Rows | None = None,
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and its exact derivatives."""
        stages, fixed = (self if columns is None else self.take(columns))._fixed(1)
        g, by_x = stages(list(x), fixed)
        return np.broadcast_to(g, np.shape(x[0])), by_x

    def hessian(self, x: Rows) -> tuple[Sequence[Any], Sequence[Sequence[Any]]]:
        """Return the exact first and second derivatives."""
        return ExpressionLimitState(self.source.margin, self.variables, self.values).hessian(x)


@dataclass(frozen=True, slots=True, eq=False)
class CallableLimitState:
    """A limit state given by Python functions that work elementwise on arrays.

    Parameters
    ----------
    function : callable
        ``function(**arrays) -> array``; each array has shape (k,), and so must the result, whatever k.
    variables : tuple of str
        The names that are basic variables.
    values : mapping
        Further arguments: numbers, or arrays over situations.
    derivatives : callable, optional
        ``derivatives(**arrays) -> mapping`` from every basic variable to dg/dx. Without it derivatives are central
        differences over about 1e-5 standard deviations.
    """

    function: Callable[..., Any]
    variables: tuple[str, ...]
    values: Mapping[str, Any] = field(default_factory=dict)
    derivatives: Callable[..., Any] | None = None

    @property
    def kinks(self) -> int:
        """Return 0: what a function hides is not known."""
        return 0

    @property
    def affine(self) -> bool:
        """Return False: what a function hides is not known."""
        return False

    def take(self, columns: Any) -> CallableLimitState:
        """Return the limit state of some situations."""
        return CallableLimitState(
            self.function, self.variables, _taken(self.values, columns), self.derivatives
        )

    def _inputs(self, x: Rows, columns: Any) -> dict[str, Any]:
        k = np.shape(x[0])
        values = self.values if columns is None else _taken(self.values, columns)
        full = {name: np.broadcast_to(np.asarray(v, dtype=np.float64), k) for name, v in values.items()}
        rows = {name: row.view() for name, row in zip(self.variables, x, strict=True)}
        for row in rows.values():
            # A function that writes into its arguments would change the design point.
            row.setflags(write=False)
        return {**full, **rows}

    def _call(self, inputs: Mapping[str, Array]) -> Array:
        k = np.shape(next(iter(inputs.values())))
        return _as_rows(self.function(**inputs), k, "The limit state")

    def value(self, x: Rows, columns: Any = None) -> Array:
        """Return g, shape (k,)."""
        return self._call(self._inputs(x, columns))

    def gradient(
        self, x: Rows, columns: Any = None, slopes: Rows | None = None
    ) -> tuple[Array, Sequence[Any]]:
        """Return g and its derivatives."""
        inputs = self._inputs(x, columns)
        g = self._call(inputs)
        if self.derivatives is not None:
            return g, self._given(inputs)
        return g, [self._difference(inputs, i, x, slopes) for i in range(len(self.variables))]

    def hessian(self, x: Rows) -> None:
        """Return None: second derivatives of a function are not known."""

    def _given(self, inputs: Mapping[str, Array]) -> list[Array]:
        assert self.derivatives is not None
        result = self.derivatives(**inputs)
        if not isinstance(result, Mapping):
            text = "The gradient must return a mapping from each basic variable to dg/dx"
            raise InputError(f"{text}; it returned {_described(result)}.")
        for name in result:
            if name not in self.variables:
                hint = did_you_mean(str(name), self.variables)
                raise InputError(Problem(f"The gradient has an unknown entry '{name}'.", suggestion=hint))
        missing = [name for name in self.variables if name not in result]
        if missing:
            raise InputError(f"The gradient has no entry for {', '.join(missing)}.")
        k = np.shape(next(iter(inputs.values())))
        return [_as_rows(result[name], k, f"The gradient's entry '{name}'", True) for name in self.variables]

    def _difference(self, inputs: dict[str, Array], i: int, x: Rows, slopes: Rows | None) -> Array:
        name = self.variables[i]
        scale = np.abs(x[i]) + 1.0 if slopes is None else np.abs(slopes[i])
        above = x[i] + DIFFERENCE_STEP * scale
        below = x[i] - DIFFERENCE_STEP * scale
        width = above - below
        rise = self._call({**inputs, name: above}) - self._call({**inputs, name: below})
        # A variable that does not vary has no width, and no share in the gradient.
        return np.where(width > 0.0, rise / np.where(width > 0.0, width, 1.0), 0.0)


def _as_rows(result: Any, k: tuple[int, ...], what: str, scalar: bool = False) -> Array:
    """Return the result as float64 array of shape k, or raise with what came back."""
    array = np.asarray(result)
    if array.dtype.kind not in "fiu" or not (array.shape == k or (scalar and array.shape == ())):
        text = f"{what} must return an array of numbers of the shape of its arguments, here {k}"
        hint = "Write it with numpy functions, so that it works on whole arrays."
        if array.dtype.kind == "b":
            hint = "Return the margin, such as R - S, in place of the comparison."
        raise InputError(Problem(f"{text}; it returned {_described(result)}.", suggestion=hint))
    return np.broadcast_to(array.astype(np.float64), k)


def _described(result: Any) -> str:
    if isinstance(result, np.ndarray):
        return f"an array of shape {result.shape} and type {result.dtype}"
    text = repr(result)
    return f"{type(result).__name__} {text if len(text) <= 60 else text[:57] + '...'}"
