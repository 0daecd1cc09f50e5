"""Component tests against prediction: model factor, characteristic and design resistance, factors by several routes.

Owns the evaluation of resistance models from tests. Knows nothing of files, units or studies; values are plain numbers
in one coherent set of units.
"""

# Trends, options, clusters, resistance factors of North American and mean-value practice, ledger.
from calibrate.resistance.closed_form import (
    ClosedForm,
    FractileFactor,
    closed_form,
    combined_cov,
    partial_factor_lognormal,
    partial_factor_normal,
)
from calibrate.resistance.options import Option, TrendOptions, trend_options
from calibrate.resistance.trend import Trends, holm, trends

__all__ = [
    "ClosedForm",
    "FractileFactor",
    "Option",
    "TrendOptions",
    "Trends",
    "closed_form",
    "combined_cov",
    "holm",
    "partial_factor_lognormal",
    "partial_factor_normal",
    "trend_options",
    "trends",
]
