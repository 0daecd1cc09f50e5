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
from calibrate.resistance.clusters import ClusterEffects, cluster_effects
from calibrate.resistance.ledger import Ledger, LedgerEntry, ledger
from calibrate.resistance.loads import LoadStatistics
from calibrate.resistance.mean_value import (
    BiasStatistics,
    FormFactor,
    MeanValueFactors,
    form_factor,
    linearised_factor,
    lognormal_factor,
    mean_value_factors,
)
from calibrate.resistance.north_american import (
    FORMATS,
    Format,
    NorthAmericanFactor,
    Part,
    correction_for_tests,
    format_named,
    north_american_factor,
    professional_part,
)
from calibrate.resistance.options import Option, TrendOptions, trend_options
from calibrate.resistance.trend import Trends, holm, trends
from calibrate.resistance.two_layers import Layer, TwoLayers, layer, two_layers

__all__ = [
    "FORMATS",
    "BiasStatistics",
    "ClosedForm",
    "ClusterEffects",
    "FormFactor",
    "Format",
    "FractileFactor",
    "Layer",
    "Ledger",
    "LedgerEntry",
    "LoadStatistics",
    "MeanValueFactors",
    "NorthAmericanFactor",
    "Option",
    "Part",
    "TrendOptions",
    "Trends",
    "TwoLayers",
    "closed_form",
    "cluster_effects",
    "combined_cov",
    "correction_for_tests",
    "form_factor",
    "format_named",
    "holm",
    "layer",
    "ledger",
    "linearised_factor",
    "lognormal_factor",
    "mean_value_factors",
    "north_american_factor",
    "partial_factor_lognormal",
    "partial_factor_normal",
    "professional_part",
    "trend_options",
    "trends",
    "two_layers",
]
