"""Component tests against prediction: model factor, characteristic and design resistance, factors by several routes.

Owns the evaluation of resistance models from tests. Knows nothing of files, units or studies; values are plain numbers
in one coherent set of units.
"""

# The evaluation of component tests: model factor, Annex D.8, separation of scatter, direct design values.
from calibrate.resistance.component_tests import LEAST_TESTS, ComponentTests

__all__ = [
    "LEAST_TESTS",
    "ComponentTests",
]
