"""Component tests against prediction: model factor, characteristic and design resistance, factors by several routes.

Owns the evaluation of resistance models from tests. Knows nothing of files, units or studies; values are plain numbers
in one coherent set of units.
"""

# The evaluation of component tests: model factor, Annex D.8, separation of scatter, direct design values.
from calibrate.resistance.annex_d import AnnexD8, annex_d8
from calibrate.resistance.annex_d_parts import SubsetsD8, TailD8, annex_d8_subsets, annex_d8_tail
from calibrate.resistance.component_tests import LEAST_TESTS, ComponentTests
from calibrate.resistance.direct import (
    DirectDesignValue,
    Prior,
    plain_design_value,
    predictive_design_value,
)
from calibrate.resistance.fractile_factors import FractileFactors, Fractiles, fractile_factors
from calibrate.resistance.model_factor import (
    CensoredModelFactor,
    ModelFactor,
    censored_model_factor,
    model_factor,
)
from calibrate.resistance.predicted_scatter import PredictedScatter, predicted_scatter
from calibrate.resistance.separation import ScatterSeparation, separate_scatter

__all__ = [
    "LEAST_TESTS",
    "AnnexD8",
    "CensoredModelFactor",
    "ComponentTests",
    "DirectDesignValue",
    "FractileFactors",
    "Fractiles",
    "ModelFactor",
    "PredictedScatter",
    "Prior",
    "ScatterSeparation",
    "SubsetsD8",
    "TailD8",
    "annex_d8",
    "annex_d8_subsets",
    "annex_d8_tail",
    "censored_model_factor",
    "fractile_factors",
    "model_factor",
    "plain_design_value",
    "predicted_scatter",
    "predictive_design_value",
    "separate_scatter",
]
