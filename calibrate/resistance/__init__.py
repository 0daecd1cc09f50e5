"""Component tests against prediction: model factor, characteristic and design resistance, factors by several routes.

Owns the evaluation of resistance models from tests. Knows nothing of files, units or studies; values are plain numbers
in one coherent set of units.
"""

# Trends, options, clusters, resistance factors of North American and mean-value practice, ledger.
from calibrate.resistance.trend import Trends, holm, trends

__all__ = ["Trends", "holm", "trends"]
