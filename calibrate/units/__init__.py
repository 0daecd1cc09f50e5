"""The border to pint: text with units becomes plain SI numbers and dimensions, and nothing else."""

from calibrate.units.dimension import ANY_DIMENSION, DIMENSIONLESS, Dimension
from calibrate.units.reading import ONE, Unit, parse_unit, split_value
from calibrate.units.showing import format_unit, si_unit

__all__ = [
    "ANY_DIMENSION",
    "DIMENSIONLESS",
    "ONE",
    "Dimension",
    "Unit",
    "format_unit",
    "parse_unit",
    "si_unit",
    "split_value",
]
