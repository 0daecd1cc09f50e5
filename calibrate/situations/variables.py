"""Basic variables whose models may depend on the design situation and on the size."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.actions.intermittent import intermittent
from calibrate.actions.size_effect import stress_integral
from calibrate.distributions import (
    Distribution,
    Extreme,
    distribution,
    family,
    maximum_of,
    minimum_of,
    ratio_slope,
)
from calibrate.errors import InputError, Problem
from calibrate.expressions import Expression

Array = npt.NDArray[np.float64]

POSITION = "position"
"""Name in a stress profile of the place in the part, from 0 to 1."""


@dataclass(frozen=True, slots=True, eq=False)
class BasicVariable:
    """The model of a basic variable, in SI units.

    Parameters
    ----------
    name : str
        Its name in limit states.
    family : str
        Name of the family.
    arguments : mapping of str to Expression
        Moments or own parameters; empty when ``fitted`` is given.
    ratio : float
        Reference period over the period of the model; the variable is the maximum of that many repetitions.
    fitted : Distribution, optional
        A distribution that was fitted to records, the same in all situations.
    presence : float
        Probability that an intermittent action is present in one repetition; absent, it is zero.
    size_ratio : Expression, optional
        Size of a part over the size that the model is for: the strength is the smallest of so many (weakest link).
    stress_profile : Expression, optional
        Stress over its largest value along ``position`` from 0 to 1, where the family is ``weibull``: only the
        equivalent share of the size counts. Free of the size and of situations.
    of_classes : bool
        Whether ``fitted`` is a mixture of classes of sites, each of which may have a design point of its own.
    """

    name: str
    family: str
    arguments: Mapping[str, Expression]
    ratio: float = 1.0
    fitted: Distribution | None = None
    size_ratio: Expression | None = None
    presence: float = 1.0
    stress_profile: Expression | None = None
    of_classes: bool = False

    def depends_on(self, name: str) -> bool:
        """Whether an argument contains the name."""
        return any(e.depends_on(name) for e in self.arguments.values()) or (
            self.size_ratio is not None and self.size_ratio.depends_on(name)
        )

    def argument_names(self) -> frozenset[str]:
        """Return every name that the model uses."""
        expressions = (*self.arguments.values(), *([] if self.size_ratio is None else [self.size_ratio]))
        profile = (
            () if self.stress_profile is None else (n for n in self.stress_profile.names if n != POSITION)
        )
        return frozenset(name for e in expressions for name in e.names) | frozenset(profile)

    def parents(self, variables: Sequence[str]) -> tuple[str, ...]:
        """Return those of these basic variables on which the model depends, in their order."""
        used = self.argument_names()
        return tuple(name for name in variables if name in used)

    def distribution(self, values: Mapping[str, Any]) -> Distribution:
        """Return the distribution over the reference period.

        Parameters
        ----------
        values : mapping
            Number or array, shape (n,), for every name that the arguments use.

        Returns
        -------
        Distribution
            Its parameters have shape (n,) where they vary with the situation, else ().

        Raises
        ------
        InputError
            In some situation the arguments make no distribution of the family; variable, argument, value and
            situation are named.
        """
        converted = self._converted(self._given(values))
        key = "size_ratio" if self.stress_profile is None else "stress_profile"
        try:
            ratio = self._ratio(converted, values)
            return converted if ratio is None else minimum_of(converted, ratio)
        except InputError as error:
            problems = [Problem(f"Variable '{self.name}', {key}: {p}") for p in error.problems]
            raise InputError(problems) from error

    def _ratio(self, base: Distribution, values: Mapping[str, Any]) -> Array | None:
        """Return of how many parts of the size of the model the strength is the smallest."""
        whole = None if self.size_ratio is None else np.asarray(self.size_ratio.value(values))
        if self.stress_profile is None:
            return whole
        share = self._stressed_share(base, values)
        return share if whole is None else whole * share

    def _stressed_share(self, base: Distribution, values: Mapping[str, Any]) -> Array:
        profile = self.stress_profile
        if profile is None:
            return np.ones(())
        fixed = {name: values[name] for name in profile.names if name != POSITION}
        return stress_integral(lambda at: profile.value({**fixed, POSITION: at}), base.parameters["shape"])

    def _given(self, values: Mapping[str, Any]) -> Distribution:
        if self.fitted is not None:
            return self.fitted
        given = self._arguments(values)
        try:
            return distribution(self.family, **given)
        except InputError as error:
            problems = [Problem(f"Variable '{self.name}': {p}") for p in error.problems]
            raise InputError(problems) from error

    def _arguments(self, values: Mapping[str, Any]) -> dict[str, Array]:
        return {name: expression.value(values) for name, expression in self.arguments.items()}

    def _converted(self, given: Distribution) -> Distribution:
        if self.presence < 1.0:
            return intermittent(given, self.presence, self.ratio)
        return given if self.ratio == 1.0 else maximum_of(given, self.ratio)

    def slope(self, model: Distribution, u: Array, values: Mapping[str, Any], name: str) -> Array | None:
        """Return dx/d(name) at fixed u, or None where the model does not depend on the name.

        Parameters
        ----------
        model : Distribution
            As :meth:`distribution` returned it for ``values``.
        u : array, shape (n,)
            Standard normal values.
        values : mapping
            Number or array for every name that the arguments use.
        name : str
            What the derivative is by, usually the size.

        Returns
        -------
        array, shape (n,), or None
            By the chain rule through moments, parameters and the quantile.
        """
        if not self.depends_on(name):
            return None
        total = np.zeros(np.shape(u))
        if self.size_ratio is not None and self.size_ratio.depends_on(name):
            ratio, (by_ratio,) = self.size_ratio.gradient(values, (name,))
            base = self._converted(self._given(values))
            share = self._stressed_share(base, values)
            total = total + ratio_slope(base, ratio * share, u, of_maxima=False) * by_ratio * share
        moved = self.parameters_by(values, name)
        if moved:
            by_parameter = model.parameter_slopes(u)
            for parameter, by_name in moved.items():
                total = total + by_parameter[parameter] * by_name
        return total

    def parameters_by(self, values: Mapping[str, Any], name: str) -> dict[str, Array]:
        """Return dp/d(name) of each own parameter p that depends on the name through the arguments."""
        if not any(e.depends_on(name) for e in self.arguments.values()):
            return {}
        by_argument = family(self.family).argument_slopes(self._arguments(values))
        found: dict[str, Array] = {}
        for argument, expression in self.arguments.items():
            if not expression.depends_on(name):
                continue
            _, (by_name,) = expression.gradient(values, (name,))
            for parameter, slopes in by_argument.items():
                if argument in slopes:
                    found[parameter] = found.get(parameter, 0.0) + slopes[argument] * by_name
        return found


def is_converted(model: Distribution) -> bool:
    """Whether the parameters of a model are those of another period than the model itself."""
    return isinstance(model, Extreme) and model.equivalent is None
