"""What is calibrated: factors, and the rules that use them as arrays over design situations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.expressions import Expression
from calibrate.reliability import CorrelatedPair
from calibrate.reliability.systems import FailureLogic
from calibrate.situations import BasicVariable

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Factor:
    """A partial, resistance, load or combination factor.

    Parameters
    ----------
    name : str
        Its name in design checks.
    present : float
        In force, or a first guess; may lie outside the bounds.
    lower, upper : float
        Bounds of optimal and proposed values.
    step : float or None
        Proposed values are integer multiples of it; None leaves them unrounded.
    held : bool
        Whether the factor keeps its present value.
    """

    name: str
    present: float
    lower: float
    upper: float
    step: float | None
    held: bool


@dataclass(frozen=True, slots=True, eq=False)
class Alternative:
    """One way in which the variable actions of a rule may come together.

    Parameters
    ----------
    leading : str
        The action that leads.
    variables : tuple of BasicVariable
        Those of the limit state, in its order, the actions with their repetitions in this alternative.
    """

    leading: str
    variables: tuple[BasicVariable, ...]


@dataclass(frozen=True, slots=True, eq=False)
class SystemModel:
    """A system of rules.

    Parameters
    ----------
    name : str
        Of the system.
    logic : FailureLogic
        Its components are rules by name.
    order : tuple of str
        All basic variables in the order of the study.
    weight : array, shape (n,)
        Weights of the situations, sum 1.
    share : float
        Share of the system in the objective, beside those of the rules; 0 where it is only reported.
    """

    name: str
    logic: FailureLogic
    order: tuple[str, ...]
    weight: Array
    share: float


@dataclass(frozen=True, slots=True, eq=False)
class RuleModel:
    """A design rule with its limit state, over n design situations, in SI units.

    Parameters
    ----------
    name : str
        Of the rule.
    check : Expression or None
        Margin of the design check; met where it is not negative.
    size_name : str or None
        What the check sizes; None where the rule is assessed as it stands.
    limit_state : Expression
        Margin g; g > 0 is safe.
    variables : tuple of BasicVariable
        Those of the limit state, in its order.
    values : mapping
        Number or array, shape (n,), for every other name but factors and size.
    weight : array, shape (n,)
        Weights of the situations, sum 1.
    rule_weight : float
        Share of this rule; the shares of all rules sum to 1.
    alternatives : tuple of Alternative
        Where actions are combined: each situation has the smallest beta of these. Empty where ``variables`` alone
        count.
    correlations : tuple of CorrelatedPair
        Of the variables, and possibly of others.
    """

    name: str
    check: Expression | None
    size_name: str | None
    limit_state: Expression
    variables: tuple[BasicVariable, ...]
    values: Mapping[str, Any]
    weight: Array
    rule_weight: float
    alternatives: tuple[Alternative, ...] = ()
    correlations: tuple[CorrelatedPair, ...] = ()

    @property
    def n(self) -> int:
        """Number of design situations."""
        return int(self.weight.size)

    def take(self, columns: npt.NDArray[np.intp]) -> RuleModel:
        """Return the rule for some of the situations, their weights scaled to sum 1."""
        values = {k: np.asarray(v)[columns] if np.ndim(v) else v for k, v in self.values.items()}
        weight = self.weight[columns]
        total = weight.sum()
        return RuleModel(
            self.name,
            self.check,
            self.size_name,
            self.limit_state,
            self.variables,
            values,
            weight / total if total > 0 else weight,
            self.rule_weight,
            self.alternatives,
            self.correlations,
        )
