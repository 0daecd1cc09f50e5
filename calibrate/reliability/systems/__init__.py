"""Systems of components: failure logic, multivariate normal probabilities, bounds, first-order system reliability."""

from calibrate.reliability.systems.bounds import ditlevsen_bounds, simple_bounds
from calibrate.reliability.systems.limit_state import SystemLimitState, system_limit_state
from calibrate.reliability.systems.logic import FailureLogic, failure_logic, parallel, series
from calibrate.reliability.systems.multinormal import Probability, orthant
from calibrate.reliability.systems.planes import correlation_of
from calibrate.reliability.systems.system import SystemResult, system_probability

__all__ = [
    "FailureLogic",
    "Probability",
    "SystemLimitState",
    "SystemResult",
    "correlation_of",
    "ditlevsen_bounds",
    "failure_logic",
    "orthant",
    "parallel",
    "series",
    "simple_bounds",
    "system_limit_state",
    "system_probability",
]
