"""The methods by name; a new one with independent samples is one file and one line here."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.registry import registered
from calibrate.reliability.simulation.base import Method
from calibrate.reliability.simulation.crude import CrudeMonteCarlo
from calibrate.reliability.simulation.directional import DirectionalSimulation
from calibrate.reliability.simulation.importance import ImportanceSampling
from calibrate.reliability.simulation.levels import SubsetSimulation
from calibrate.reliability.simulation.line import LineSampling

METHODS: Mapping[str, Method | SubsetSimulation] = registered(
    (CrudeMonteCarlo(), ImportanceSampling(), DirectionalSimulation(), SubsetSimulation(), LineSampling())
)


def method_of(name: str) -> Method | SubsetSimulation:
    """Return a method.

    Raises
    ------
    InputError
        The name is unknown.
    """
    if name in METHODS:
        return METHODS[name]
    known = f"Known: {', '.join(METHODS)}."
    hint = did_you_mean(str(name), METHODS)
    suggestion = known if hint.startswith("Known") else f"{hint} {known}"
    raise InputError(Problem(f"There is no method of simulation '{name}'.", suggestion=suggestion))
