"""What the second-order analysis found, as arrays over situations."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.second_order.status import SECOND_ORDER, texts

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class SecondOrder:
    """Second-order reliability of n situations with r random variables.

    An index is -Phi^-1 of the probability by the method. NaN stands for what does not exist: without design point or
    finite curvatures, and where a formula does not hold.

    Attributes
    ----------
    curvatures : array (r - 1, n)
        Principal curvatures kappa of the limit-state surface at the design point, ascending, per unit of u. A positive
        one bends the surface towards failure and makes failure rarer than FORM says, whether the origin is safe or
        fails: near the design point failures are at v > beta + 1/2 sum kappa_i v_i^2.
    axes : array (m, r - 1, n)
        Unit vectors of the principal axes in standard normal space; which way they point has no meaning.
    beta_first_order : array (n,)
        Index of FORM.
    beta_breitung, beta_hohenbichler_rackwitz, beta_tvedt : array (n,)
        Index by each asymptotic formula.
    beta_paraboloid : array (n,)
        Index of the exact probability beyond the fitted paraboloid.
    misfit : array (n,)
        Estimate, in units of u, by how much beta_paraboloid is too low (positive) or too high because the surface is no
        paraboloid, from points on the principal axes; infinite where the surface was lost there.
    misfit_factor : array (n,)
        The same as a factor on the probability of the smaller side, of failure where beta > 0, else of safety.
    code : int8 array (n,)
        Status as a number; see ``status``.
    """

    curvatures: Array
    axes: Array
    beta_first_order: Array
    beta_breitung: Array
    beta_hohenbichler_rackwitz: Array
    beta_tvedt: Array
    beta_paraboloid: Array
    misfit: Array
    misfit_factor: Array
    code: npt.NDArray[np.int8]

    @property
    def n(self) -> int:
        """Number of situations."""
        return self.beta_paraboloid.size

    @property
    def beta(self) -> Array:
        """The recommended index, of the exact probability beyond the paraboloid; see ``sound``."""
        return self.beta_paraboloid

    @property
    def failure_probability(self) -> Array:
        """The recommended failure probability."""
        return self.paraboloid

    @property
    def sound(self) -> npt.NDArray[np.bool_]:
        """Whether nothing was seen that speaks against the recommended value."""
        return np.asarray(self.code == SECOND_ORDER)

    @property
    def status(self) -> npt.NDArray[Any]:
        """How each situation ended, in words."""
        return texts(self.code)

    @property
    def first_order(self) -> Array:
        """Failure probability of FORM."""
        return np.asarray(special.ndtr(-self.beta_first_order))

    @property
    def breitung(self) -> Array:
        """Failure probability by Breitung's formula."""
        return np.asarray(special.ndtr(-self.beta_breitung))

    @property
    def hohenbichler_rackwitz(self) -> Array:
        """Failure probability by the formula of Hohenbichler and Rackwitz."""
        return np.asarray(special.ndtr(-self.beta_hohenbichler_rackwitz))

    @property
    def tvedt(self) -> Array:
        """Failure probability by Tvedt's formula of three terms."""
        return np.asarray(special.ndtr(-self.beta_tvedt))

    @property
    def paraboloid(self) -> Array:
        """Exact probability beyond the fitted paraboloid."""
        return np.asarray(special.ndtr(-self.beta_paraboloid))
