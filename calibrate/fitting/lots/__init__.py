"""Lots: scatter between and within them, whether they may be pooled, and what a variable then stands for.

Takes specimens that were observed exactly, with one lot each. Knows nothing of files, units or studies.
"""

from calibrate.fitting.lots.pooling import Pooling, PoolingTest, pooling
from calibrate.fitting.lots.population import Population, population
from calibrate.fitting.lots.reml import lot_scatter
from calibrate.fitting.lots.result import AnovaScatter, LotScatter, LotShare

__all__ = [
    "AnovaScatter",
    "LotScatter",
    "LotShare",
    "Pooling",
    "PoolingTest",
    "Population",
    "lot_scatter",
    "pooling",
    "population",
]
