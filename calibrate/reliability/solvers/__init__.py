"""Several ways to the design point, by name, so that one can be checked against another."""

from calibrate.reliability.solvers.registry import SOLVERS, Solver, solve, solver_names

__all__ = ["SOLVERS", "Solver", "solve", "solver_names"]
