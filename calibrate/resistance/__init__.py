"""Component tests against prediction: model factor, characteristic and design resistance, factors by several routes.

Owns the evaluation of resistance models from tests. Knows nothing of files, units or studies; values are plain numbers
in one coherent set of units.
"""

from calibrate.resistance.annex_d import AnnexD8, annex_d8
from calibrate.resistance.annex_d_parts import SubsetsD8, TailD8, annex_d8_subsets, annex_d8_tail
from calibrate.resistance.closed_form import (
    ClosedForm,
    FractileFactor,
    closed_form,
    combined_cov,
    partial_factor_lognormal,
    partial_factor_normal,
)
from calibrate.resistance.clusters import ClusterEffects, cluster_effects
from calibrate.resistance.component_tests import LEAST_TESTS, ComponentTests
from calibrate.resistance.direct import (
    DirectDesignValue,
    Prior,
    plain_design_value,
    predictive_design_value,
)
from calibrate.resistance.fractile_factors import FractileFactors, Fractiles, fractile_factors
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
from calibrate.resistance.model_factor import (
    CensoredModelFactor,
    ModelFactor,
    censored_model_factor,
    model_factor,
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
from calibrate.resistance.predicted_scatter import PredictedScatter, predicted_scatter
from calibrate.resistance.separation import ScatterSeparation, separate_scatter
from calibrate.resistance.trend import Trends, holm, trends
from calibrate.resistance.two_layers import Layer, TwoLayers, layer, two_layers

__all__ = [
    "FORMATS",
    "LEAST_TESTS",
    "AnnexD8",
    "BiasStatistics",
    "CensoredModelFactor",
    "ClosedForm",
    "ClusterEffects",
    "ComponentTests",
    "DirectDesignValue",
    "FormFactor",
    "Format",
    "FractileFactor",
    "FractileFactors",
    "Fractiles",
    "Layer",
    "Ledger",
    "LedgerEntry",
    "LoadStatistics",
    "MeanValueFactors",
    "ModelFactor",
    "NorthAmericanFactor",
    "Option",
    "Part",
    "PredictedScatter",
    "Prior",
    "ScatterSeparation",
    "SubsetsD8",
    "TailD8",
    "TrendOptions",
    "Trends",
    "TwoLayers",
    "annex_d8",
    "annex_d8_subsets",
    "annex_d8_tail",
    "censored_model_factor",
    "closed_form",
    "cluster_effects",
    "combined_cov",
    "correction_for_tests",
    "form_factor",
    "format_named",
    "fractile_factors",
    "holm",
    "layer",
    "ledger",
    "linearised_factor",
    "lognormal_factor",
    "mean_value_factors",
    "model_factor",
    "north_american_factor",
    "partial_factor_lognormal",
    "partial_factor_normal",
    "plain_design_value",
    "predicted_scatter",
    "predictive_design_value",
    "professional_part",
    "separate_scatter",
    "trend_options",
    "trends",
    "two_layers",
]
