"""Characteristic values of a sample: fractiles as estimated, limited with a confidence, or predicted.

Owns the factors k, limits by rank, by pivot, by bootstrap and over lots. Fits nothing that needs a search in more than
one parameter: whoever asks brings such fits along.
"""

from calibrate.fitting.characteristic.choose import (
    ROUTES,
    characteristic_value,
    characteristic_value_of_lots,
)
from calibrate.fitting.characteristic.factors import (
    EN_1990_TABLE_D1,
    EN_1990_TABLE_D2,
    prediction_factor,
    prediction_factor_known,
    tolerance_factor,
    tolerance_factor_known,
)
from calibrate.fitting.characteristic.lots import LotLimit, lot_limit
from calibrate.fitting.characteristic.order_statistics import rank, smallest_sample
from calibrate.fitting.characteristic.result import CharacteristicValue

__all__ = [
    "EN_1990_TABLE_D1",
    "EN_1990_TABLE_D2",
    "ROUTES",
    "CharacteristicValue",
    "LotLimit",
    "characteristic_value",
    "characteristic_value_of_lots",
    "lot_limit",
    "prediction_factor",
    "prediction_factor_known",
    "rank",
    "smallest_sample",
    "tolerance_factor",
    "tolerance_factor_known",
]
