"""The bond between a rule's values and the random variables: what kind of value each is, and the bias that follows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.periods import in_years
from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError, Problem
from calibrate.study.model import Quantity, Study
from calibrate.study.reading.bonds import fractile_of

Array = NDArray[np.float64]

CONTRADICTS = 0.01
"""Relative difference between a typed and the implied bias that is a contradiction."""


@dataclass(frozen=True, slots=True)
class ImpliedBias:
    """A quantity that a rule uses in place of a basic variable, against that variable.

    Attributes
    ----------
    quantity, variable : str
    value_type : str
        ``5 % fractile``, ``mean``, ``nominal`` or ``declared``; ``basis of the model`` where the mean of the variable
        is written in terms of the quantity.
    bias : (float, float)
        Mean of the variable over the value, smallest and largest over the design situations.
    fractile : (float, float)
        Probability that the variable lies below the value, in the period of its model.
    period : float or None
        That period, where the variable is an action of another period than the reference period.
    """

    quantity: str
    variable: str
    value_type: str
    bias: tuple[float, float]
    fractile: tuple[float, float]
    period: float | None = None


def implied_biases(
    study: Study, distributions: Mapping[str, Sequence[Distribution]]
) -> tuple[tuple[ImpliedBias, ...], tuple[Doubt, ...]]:
    """Compare every bound quantity with its variable.

    Parameters
    ----------
    study : Study
    distributions : mapping of str to sequence of Distribution
        Of each variable, as used in each rule, in SI units.

    Returns
    -------
    biases, doubts

    Raises
    ------
    InputError
        A typed bias contradicts the model.
    """
    found, doubts, problems = [], [], []
    for quantity in study.quantities.values():
        if quantity.of is None or not distributions.get(quantity.of):
            continue
        bias, below = _against(quantity, distributions[quantity.of])
        period = _own_period(study, quantity.of)
        own = below ** (period / study.reference_period)
        found.append(
            ImpliedBias(
                quantity.name,
                quantity.of,
                quantity.value_type,
                (bias.min(), bias.max()),
                (own.min(), own.max()),
                None if period == study.reference_period else period,
            )
        )
        typed = quantity.bias
        if typed is not None and float(np.max(np.abs(bias / typed - 1.0))) > CONTRADICTS:
            problems.append(_contradiction(study, quantity, typed, bias))
        doubts += _type_doubts(study, quantity, bias, below)
    if problems:
        raise InputError(problems)
    said = {b.variable for b in found}
    found += [b for name in study.variables if name not in said for b in _basis(study, name, distributions)]
    return tuple(found), tuple(doubts)


def _basis(study: Study, name: str, distributions: Mapping[str, Sequence[Distribution]]) -> list[ImpliedBias]:
    """Return the bias of a variable over the one quantity of its dimension that its mean is written in terms of."""
    variable = study.variables[name]
    expression = variable.arguments.get("mean") or variable.arguments.get("median")
    laws = distributions.get(name)
    if expression is None or len(expression.names) != 1 or not laws:
        return []
    basis = expression.names[0]
    if basis in study.quantities:
        value = np.asarray(study.quantities[basis].value)
        dimension = study.quantities[basis].unit.dimension
    elif basis in study.situations.derived or basis in study.situations.columns:
        value = np.asarray({**study.situations.columns, **study.situations.derived}[basis])
        unit = study.situations.units.get(basis)
        dimension = variable.dimension if unit is None else unit.dimension
    else:
        return []
    if dimension != variable.dimension or value.dtype.kind != "f" or not (value > 0.0).all():
        return []
    bias = np.concatenate([np.atleast_1d(law.mean / value) for law in laws])
    below = np.concatenate([np.atleast_1d(law.cdf(value)) for law in laws])
    if not np.isfinite(bias).all():
        return []
    ends = (float(bias.min()), float(bias.max()))
    return [ImpliedBias(basis, name, "basis of the model", ends, (float(below.min()), float(below.max())))]


def _against(quantity: Quantity, laws: Sequence[Distribution]) -> tuple[Array, Array]:
    means = np.concatenate([np.atleast_1d(law.mean) for law in laws])
    # A predictive distribution may have no mean; its median then takes its place.
    medians = np.concatenate([np.atleast_1d(law.x(np.zeros(law.shape))) for law in laws])
    level = np.where(np.isfinite(means), means, medians)
    below = np.concatenate([np.atleast_1d(law.cdf(quantity.value)) for law in laws])
    return level / quantity.value, below


def _contradiction(study: Study, quantity: Quantity, typed: float, bias: Array) -> Problem:
    implied = f"{bias.min():.3g}" if np.ptp(bias) < 1e-9 else f"{bias.min():.3g} to {bias.max():.3g}"
    return Problem(
        f"quantities.{quantity.name} is stated as the {quantity.value_type} of '{quantity.of}' with a bias of "
        f"{typed:g}, but the model of '{quantity.of}' implies a mean over this value of {implied}.",
        study.shown,
        quantity.line,
        "Correct the one that is wrong, or leave the bias out: it is computed.",
    )


def _type_doubts(study: Study, quantity: Quantity, bias: Array, below: Array) -> list[Doubt]:
    where = f"quantities.{quantity.name}"
    if quantity.characteristic is not None:
        return []
    role = study.variables[quantity.of or ""].role
    share = fractile_of(quantity.value_type)
    if share is not None:
        return _fractile_doubts(study, quantity, below, share)
    if quantity.value_type == "mean" and float(np.max(np.abs(bias - 1.0))) > CONTRADICTS:
        ratio = f"{bias[0]:.3g} times"
        text = f"'{quantity.name}' is stated as the mean of '{quantity.of}', whose mean is {ratio} as large."
        return [Doubt("mean-differs", text, where)]
    if quantity.value_type in ("nominal", "declared") and role == "resistance" and float(bias.min()) < 1.0:
        text = (
            f"The {quantity.value_type} value '{quantity.name}' exceeds the mean of the resistance '{quantity.of}' "
            f"(mean over value {bias.min():.3g}): is it a mean or a target strength?"
        )
        return [Doubt("nominal-above-mean", text, where)]
    return []


def _fractile_doubts(study: Study, quantity: Quantity, below: Array, share: float) -> list[Doubt]:
    """Compare a stated fractile with the model, for the period of the model: 98 % of a year are 36 % of 50 years."""
    variable, where = study.variables[quantity.of or ""], f"quantities.{quantity.name}"
    reference, own = study.reference_period, _own_period(study, quantity.of or "")
    in_own = below ** (own / reference)
    if not _far(in_own, share).any():
        return []
    worst = float(in_own[int(np.argmax(np.abs(np.log(np.maximum(in_own, 1e-300) / share))))])
    text = f"'{quantity.name}' is stated as the {quantity.value_type} of '{quantity.of}', but in its model "
    if variable.role == "action" or variable.period is not None:
        text += f"for {in_years(own)} "
        for years in (reference, 1.0, 50.0):
            if years != own and not _far(below ** (years / reference), share).any():
                text += (
                    f"the probability below this value is {100.0 * worst:.5g} %. It is that fractile of the maximum of "
                    f"{in_years(years)}: the value and the model are for different periods, or the period of the model "
                    "is not stated."
                )
                return [Doubt("fractile-of-another-period", text, where)]
    text += f"the probability below this value is {100.0 * worst:.5g} %."
    return [Doubt("fractile-differs", text, where)]


def _own_period(study: Study, name: str) -> float:
    """Return the period of a variable's model, the reference period where it is not converted."""
    variable = study.variables[name]
    return variable.period if variable.period is not None and variable.converted else study.reference_period


def _far(below: Array, share: float) -> NDArray[np.bool_]:
    """Whether probabilities are not about the stated one."""
    if share <= 0.5:
        return np.asarray((below < 0.5 * share) | (below > 2.0 * share))
    return np.asarray(np.abs(below - share) > 0.5 * (1.0 - share))
