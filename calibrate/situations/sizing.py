"""The size that just meets the design check, in all situations at once, and its exact derivatives.

The size is the smallest positive value at which the check passes from violated to met. Where the margin is a sum of
powers of the size, Descartes' rule of signs (for real exponents: Laguerre) says from the signs of the coefficients
whether there is exactly one such value; it is then found in closed form or by a safeguarded Newton iteration. All
other margins are scanned on a logarithmic grid and the first passage is enclosed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.expressions import Expression
from calibrate.expressions.powers import powers_of
from calibrate.situations.sum_of_powers import solve_powers

Array = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int8]

SOLVED, ALREADY_MET, NEVER_MET, NOT_FINITE = 0, 1, 2, 3

_REASONS = {
    ALREADY_MET: "the design check is already met by the smallest size",
    NEVER_MET: "no size meets the design check",
    NOT_FINITE: "the design check is not a finite number",
}

# The scan covers sizes in SI units from atoms to continents; two passages within one step are not told apart.
SCAN = np.power(10.0, np.arange(-12.0, 12.0 + 1e-9, 0.0625))


@dataclass(frozen=True, slots=True, eq=False)
class Sizing:
    """Sizes of one rule.

    Parameters
    ----------
    size : array, shape (n,)
        In SI units; NaN where there is none.
    slopes : array, shape (f, n)
        Derivatives by the factors asked for.
    code : int8 array, shape (n,)
        SOLVED or why not.
    """

    size: Array
    slopes: Array
    code: Codes


def sizing_reason(code: int) -> str:
    """Return the reason of a code other than SOLVED, in words."""
    return _REASONS[code]


class SizeSolver:
    """Solves one design check for its size; what depends on the check alone is prepared once.

    Parameters
    ----------
    check : Expression
        Margin of the check; met where it is not negative.
    size : str
        Name of the size.
    """

    def __init__(self, check: Expression, size: str) -> None:
        self.check = check
        self.size = size
        self.powers = powers_of(check, size)

    def __call__(
        self,
        values: Mapping[str, Any],
        n: int,
        wrt: Sequence[str] = (),
        near: Array | None = None,
    ) -> Sizing:
        """Solve in every situation.

        Parameters
        ----------
        values : mapping
            Number or array, shape (n,), for every name of the check but the size.
        n : int
            Number of situations.
        wrt : sequence of str
            Names, usually factors, by which the size is differentiated.
        near : array, shape (n,), optional
            Sizes of a similar problem; they only save time.

        Returns
        -------
        Sizing
            At a kink of the check the derivative is that of the branch that the expression takes there.
        """
        with np.errstate(all="ignore"):
            size, code = self._solve(values, n, near)
            return Sizing(size, self._slopes(values, size, tuple(wrt)), code)

    def _solve(self, values: Mapping[str, Any], n: int, near: Array | None) -> tuple[Array, Codes]:
        if self.powers is None:
            return self._scan(values, n)
        exponents = [e for e, _ in self.powers]
        coefficients = [np.broadcast_to(c.value(values), (n,)) for _, c in self.powers]
        size, code, open_ = solve_powers(exponents, coefficients, near)
        if open_.any():
            columns = np.flatnonzero(open_)
            size[columns], code[columns] = self._scan(_taken(values, columns), columns.size)
        return size, code

    def _slopes(self, values: Mapping[str, Any], size: Array, wrt: tuple[str, ...]) -> Array:
        slopes = np.empty((len(wrt), size.size))
        if wrt:
            _, (by_size, *by_factor) = self.check.program((self.size, *wrt), 1)({**values, self.size: size})
            for row, by in zip(slopes, by_factor, strict=True):
                row[:] = -np.asarray(by) / by_size
        return slopes

    # ------------------------------------------------------------------ any check

    def _scan(self, values: Mapping[str, Any], n: int) -> tuple[Array, Codes]:
        """Find the first passage from violated to met on the grid and enclose it."""
        margin = self.check.program((), 0)
        found = np.zeros(n, dtype=np.bool_)
        below = np.ones(n)
        above = np.ones(n)
        ever_met = np.zeros(n, dtype=np.bool_)
        ever_finite = np.zeros(n, dtype=np.bool_)
        last: Array | None = None
        for k, z in enumerate(SCAN):
            value = np.broadcast_to(np.asarray(margin({**values, self.size: z})), (n,))
            ever_finite |= ~np.isnan(value)
            ever_met |= value >= 0.0
            if last is not None:
                here = ~found & (last < 0.0) & (value >= 0.0)
                below[here], above[here] = SCAN[k - 1], z
                found |= here
                if found.all():
                    break
            last = value
        code = np.where(ever_met, ALREADY_MET, np.where(ever_finite, NEVER_MET, NOT_FINITE)).astype(np.int8)
        code[found] = SOLVED
        size = np.full(n, np.nan)
        if found.any():
            columns = np.flatnonzero(found)
            size[columns] = self._enclosed(_taken(values, columns), below[columns], above[columns])
        return size, code

    def _enclosed(self, values: Mapping[str, Any], below: Array, above: Array) -> Array:
        """Return the passage between two sizes, to rounding, by a bracketing method."""
        from scipy.optimize import elementwise

        arrays = {name: np.asarray(v, dtype=np.float64) for name, v in values.items()}
        varying = [name for name in self.check.names if name != self.size and np.ndim(arrays[name])]
        margin = self.check.program((), 0)

        def function(size: Array, *rows: Array) -> Array:
            value = margin({**arrays, **dict(zip(varying, rows, strict=True)), self.size: size})
            return np.array(np.broadcast_to(value, size.shape))

        result = elementwise.find_root(
            function,
            (below, above),
            args=tuple(arrays[name] for name in varying),
            tolerances={"xatol": 0.0, "xrtol": 4 * np.finfo(float).eps, "fatol": 0.0, "frtol": 0.0},
            maxiter=200,
        )
        return np.asarray(result.x, dtype=np.float64)


def _taken(values: Mapping[str, Any], columns: npt.NDArray[np.intp]) -> dict[str, Any]:
    return {name: np.asarray(v)[columns] if np.ndim(v) else v for name, v in values.items()}


def solve_size(
    check: Expression, size: str, values: Mapping[str, Any], n: int, wrt: Sequence[str] = ()
) -> Sizing:
    """Solve a design check once; see :class:`SizeSolver`."""
    return SizeSolver(check, size)(values, n, wrt)
