"""Records: columns of files become samples with units and row numbers, and nothing is read by guess."""

from calibrate.records.read import read_column, read_table
from calibrate.records.sample import Sample, Table

__all__ = ["Sample", "Table", "read_column", "read_table"]
