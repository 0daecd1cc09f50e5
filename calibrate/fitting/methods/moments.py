"""The method of moments as a registered estimator."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import Method
from calibrate.fitting.model import Model
from calibrate.fitting.moments import method_of_moments
from calibrate.records.observations import Observations


class Moments(Method):
    """Mean and standard deviation, and one moment more where a third parameter is estimated."""

    name = "moments"
    title = "method of moments"
    source = "mean, standard deviation with n - 1, and skewness or kurtosis for a third parameter"

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the parameters that have the moments of the sample."""
        del options
        return method_of_moments(seen.values, model, fixed, free)
