"""Failure probabilities by simulation, batched over situations, with one random stream for each situation."""

from calibrate.reliability.simulation.registry import METHODS
from calibrate.reliability.simulation.result import Simulation
from calibrate.reliability.simulation.simulate import simulate

__all__ = ["METHODS", "Simulation", "simulate"]
