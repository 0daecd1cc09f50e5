"""Actions: from load records to the distribution of the maximum of a period.

Owns the models of block maxima, pooled stations and threshold exceedances, and return levels.
Knows nothing of files, units or studies; times are years.
"""
