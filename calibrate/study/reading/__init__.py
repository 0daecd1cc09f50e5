"""From a study file to a validated study: structure, names, units, grid, every problem at once."""

from calibrate.study.reading.reader import read_study

__all__ = ["read_study"]
