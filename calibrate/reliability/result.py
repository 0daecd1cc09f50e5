"""What FORM found, as arrays over situations."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.status import has_beta, texts

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Reliability:
    """Reliability of n situations with m basic variables.

    NaN stands for what a situation without design point does not have.

    Attributes
    ----------
    variables : tuple of str
        Names of the rows.
    beta : array (n,)
        Reliability index, negative when the medians fail.
    u, x : array (m, n)
        Design point in standard normal and physical space; u = -beta alpha.
    alpha : array (m, n)
        Sensitivity factors, the unit gradient at the design point: positive for resistances.
    gradient_norm : array (n,)
        Length of dg/du at the design point, in units of g: d beta/d p = (dg/dp at fixed u) / gradient_norm.
    code : int8 array (n,)
        Status as a number; see ``status``.
    iterations : int array (n,)
        Evaluations of limit state and gradient on the way to the design point.
    evaluations : int
        Evaluations of the limit state in all, counted by situation, with all checks and searches.
    """

    variables: tuple[str, ...]
    beta: Array
    u: Array
    x: Array
    alpha: Array
    gradient_norm: Array
    code: npt.NDArray[np.int8]
    iterations: npt.NDArray[np.int64]
    evaluations: int

    @property
    def n(self) -> int:
        """Number of situations."""
        return self.beta.size

    def take(self, columns: Any) -> Reliability:
        """Return some of the situations."""
        picked = {
            name: getattr(self, name)[..., columns]
            for name in ("beta", "u", "x", "alpha", "gradient_norm", "code", "iterations")
        }
        return Reliability(self.variables, **picked, evaluations=int(np.sum(picked["iterations"])))

    @property
    def converged(self) -> npt.NDArray[np.bool_]:
        """Whether there is a beta: status ``converged`` or ``several design points``."""
        return has_beta(self.code)

    @property
    def status(self) -> npt.NDArray[Any]:
        """How each situation ended, in words."""
        return texts(self.code)

    @property
    def failure_probability(self) -> Array:
        """First-order failure probability Phi(-beta), without loss in the tail."""
        return np.asarray(special.ndtr(-self.beta))
