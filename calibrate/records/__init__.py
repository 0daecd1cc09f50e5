"""Records: columns of files become samples with units and row numbers, and nothing is read by guess."""

from calibrate.records.normalise import Normalisation
from calibrate.records.observations import Observations
from calibrate.records.options import Covariate, Exclude, ReadOptions, UnitBy
from calibrate.records.read import read_column, read_table, read_value
from calibrate.records.sample import Exclusion, Sample, Table
from calibrate.records.text_form import TextForm

__all__ = [
    "Covariate",
    "Exclude",
    "Exclusion",
    "Normalisation",
    "Observations",
    "ReadOptions",
    "Sample",
    "Table",
    "TextForm",
    "UnitBy",
    "read_column",
    "read_table",
    "read_value",
]
