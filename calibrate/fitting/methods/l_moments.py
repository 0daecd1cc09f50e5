"""The method of L-moments: linear combinations of ordered values, robust where moments are not."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from functools import partial
from types import MappingProxyType

import numpy as np
from scipy import special

from calibrate.distributions import Distribution, family
from calibrate.distributions.exponentials import exprel
from calibrate.fitting.jets import Array
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import Method
from calibrate.fitting.methods.order_scatter import combination_covariance
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations

LOG2 = math.log(2.0)
STEP = 1e-4
"""Of the central differences, relative to the second L-moment, whose natural size is one."""


# l_r as combinations of the probability-weighted moments b_k (shifted Legendre polynomials).
_FROM_WEIGHTED = np.array(
    [[1.0, 0.0, 0.0, 0.0], [-1.0, 2.0, 0.0, 0.0], [1.0, -6.0, 6.0, 0.0], [-1.0, 12.0, -30.0, 20.0]]
)


def sample_l_moments(x: Array, count: int = 4) -> Array:
    """Return the unbiased L-moments l1, l2, l3, l4 of a sample (not their ratios), shape (count,).

    Parameters
    ----------
    x : array, shape (n,)
        At least ``count`` values.
    count : int
        At most four.

    References
    ----------
    J. R. M. Hosking, J. R. Statist. Soc. B 52 (1990) 105-124.
    """
    return _weights(x.size, count) @ np.sort(x)


def _weights(n: int, count: int) -> Array:
    """Return the weights of the ordered values in the unbiased L-moments, shape (count, n)."""
    rank = np.arange(n, dtype=np.float64)
    weight, rows = np.full(n, 1.0 / n), []
    for k in range(count):
        rows.append(weight)
        weight = weight * (rank - k) / max(n - 1 - k, 1)
    return np.asarray(_FROM_WEIGHTED[:count, :count] @ np.array(rows))


class LMoments(Method):
    """Parameters with the L-moments of the sample.

    Standard errors by the delta method, from the scatter of order statistics at the fitted distribution: influence
    functions at the values themselves miss it by up to a factor of two at 20 values.

    A shape of ``gev`` that is known from elsewhere, say from a region, is kept: location and scale then follow from the
    first two L-moments (Hosking and Wallis 1997, A.7, from memory), and their standard errors take it as exact.
    """

    name = "l_moments"
    title = "method of L-moments"
    source = "J. R. M. Hosking and J. R. Wallis, Regional Frequency Analysis, Cambridge 1997 (formulas from memory)"

    @property
    def families(self) -> tuple[str, ...]:  # type: ignore[override]
        """Families with formulas."""
        return tuple(SOLUTIONS)

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the parameters that have the L-moments of the sample."""
        del options
        names = family(model.family).parameter_names
        count, solve = SOLUTIONS[model.family]
        kept = {"shape"} if model.family == "gev" else {"threshold"}
        if set(fixed) - kept or ("threshold" in free and model.family != "weibull3"):
            message = (
                "the method of L-moments determines all parameters but a given threshold or shape of 'gev'"
            )
            return Estimate.failed(free, message)
        threshold = fixed.get("threshold", 0.0)
        if "threshold" in fixed:
            count, solve = SOLUTIONS[model.family.removesuffix("3")]
        if "shape" in fixed:
            if not fixed["shape"] < 1.0:
                return Estimate.failed(free, "a shape of 1 or more has no mean, and so no L-moments")
            count, solve = 2, partial(_gev_of_shape, shape=fixed["shape"])
        if seen.n < count:
            return Estimate.failed(free, f"{count} L-moments need as many values")
        logarithmic = model.family in ("lognormal", "lognormal3")
        x = seen.values - threshold
        moments = sample_l_moments(np.log(x) if logarithmic else x, count)
        if not moments[min(1, count - 1)] > 0.0:
            return Estimate.failed(free, "the second L-moment of the sample is not positive")

        def parameters(m: Array) -> Array | None:
            found = solve(m)
            return None if found is None else np.array([{**found, **fixed}[n] for n in free])

        values = parameters(moments)
        if values is None or not np.all(np.isfinite(values)):
            return Estimate.failed(free, "no member of the family has the L-moments of this sample")
        slopes = np.empty((len(free), count))
        for k in range(count):
            step = np.zeros(count)
            step[k] = STEP * moments[min(1, count - 1)]
            sides = parameters(moments + step), parameters(moments - step)
            if sides[0] is None or sides[1] is None:
                return Estimate.failed(
                    free, "the L-moments of this sample lie at the edge of what the family can have"
                )
            slopes[:, k] = (sides[0] - sides[1]) / (2.0 * step[k])
        every = {**dict(zip(free, values.tolist(), strict=True)), **fixed}
        result = {n: float(every[n]) for n in names}
        law = Distribution.of(family(model.family), tuple(np.asarray(v) for v in result.values()))
        scatter = combination_covariance(
            _weights(seen.n, count), law, log_above=threshold if logarithmic else None
        )
        covariance = slopes @ scatter @ slopes.T
        density = law.logpdf(seen.values)
        notes: tuple[tuple[str, str], ...] = ()
        if not np.isfinite(density).all():
            outside = int(np.sum(~np.isfinite(density)))
            notes = (
                (
                    "outside-support",
                    f"{outside} of the values lie outside the fitted distribution's support.",
                ),
            )
        return Estimate(result, free, covariance, float(np.sum(density)), "", notes)


Solution = Callable[[Array], dict[str, float] | None]


def _normal(m: Array) -> dict[str, float]:
    return {"location": float(m[0]), "scale": float(m[1]) * math.sqrt(math.pi)}


def _lognormal(m: Array) -> dict[str, float]:
    return {"median": math.exp(float(m[0])), "log_sd": float(m[1]) * math.sqrt(math.pi)}


def _gumbel(m: Array) -> dict[str, float]:
    scale = float(m[1]) / LOG2
    return {"location": float(m[0]) - np.euler_gamma * scale, "scale": scale}


def _gumbel_min(m: Array) -> dict[str, float]:
    scale = float(m[1]) / LOG2
    return {"location": float(m[0]) + np.euler_gamma * scale, "scale": scale}


def _weibull(m: Array) -> dict[str, float] | None:
    ratio = float(m[1] / m[0])
    if not 0.0 < ratio < 1.0:
        return None
    shape = -LOG2 / math.log1p(-ratio)
    return {"scale": float(m[0]) / math.gamma(1.0 + 1.0 / shape), "shape": shape}


def _frechet(m: Array) -> dict[str, float] | None:
    ratio = float(m[1] / m[0])
    if not 0.0 < ratio < 1.0:
        return None
    shape = LOG2 / math.log1p(ratio)
    return {"scale": float(m[0]) / math.gamma(1.0 - 1.0 / shape), "shape": shape}


def _exponential(m: Array) -> dict[str, float] | None:
    return {"scale": float(m[0])} if m[0] > 0 else None


def _uniform(m: Array) -> dict[str, float]:
    return {"lower": float(m[0] - 3.0 * m[1]), "upper": float(m[0] + 3.0 * m[1])}


def _gamma(m: Array) -> dict[str, float] | None:
    """Solve l2/l1 = Gamma(a + 1/2) / (sqrt(pi) Gamma(a + 1)), which falls with a."""
    from scipy.optimize import brentq

    ratio = float(m[1] / m[0])
    if not 1e-5 < ratio < 1.0 - 1e-9:
        return None

    def excess(log_a: float) -> float:
        a = math.exp(log_a)
        return (
            float(special.gammaln(a + 0.5) - special.gammaln(a + 1.0))
            - 0.5 * math.log(math.pi)
            - math.log(ratio)
        )

    shape = math.exp(brentq(excess, -25.0, 25.0, xtol=1e-14, rtol=1e-14))
    return {"shape": shape, "scale": float(m[0]) / shape}


def _gev(m: Array) -> dict[str, float] | None:
    """Solve t3 = 2 (1 - 3^-k)/(1 - 2^-k) - 3 for k = -shape."""
    from scipy.optimize import brentq

    t3 = float(m[2] / m[1])

    def excess(k: float) -> float:
        if abs(k) < 1e-7:  # limit of the quotient and its slope at zero
            quotient = math.log(3.0) / LOG2 * (1.0 - 0.5 * k * (math.log(3.0) - LOG2))
        else:
            quotient = math.expm1(-k * math.log(3.0)) / math.expm1(-k * LOG2)
        return 2.0 * quotient - 3.0 - t3

    low, high = -1.0 + 1e-9, 30.0
    if not (excess(low) > 0.0 > excess(high)):
        return None
    k = brentq(excess, low, high, xtol=1e-15, rtol=1e-14)
    return _gev_of_shape(m, -k)


def _gev_of_shape(m: Array, shape: float) -> dict[str, float]:
    """Return scale = l2 k/((1 - 2^-k) Gamma(1 + k)) and location = l1 - scale (1 - Gamma(1 + k))/k for k = -shape.

    In the forms that are smooth through the Gumbel distribution at k = 0: (1 - 2^-k)/k is ln 2 times a relative
    exponential, and (1 - Gamma(1 + k))/k is the mean of location 0 and scale 1.
    """
    second = LOG2 * float(exprel(shape * LOG2) * special.gamma(1.0 - shape))
    scale = float(m[1]) / second
    unit = tuple(np.asarray(v) for v in (0.0, 1.0, shape))
    with np.errstate(over="ignore", invalid="ignore"):  # Gamma of a shape that is far from any sample
        mean = float(family("gev").moments(unit)[0])
    return {"location": float(m[0]) - scale * mean, "scale": scale, "shape": shape}


def _weibull3(m: Array) -> dict[str, float] | None:
    """Minus the variable is an extreme value of shape -1/k (Weibull type)."""
    found = _gev(np.array([-m[0], m[1], -m[2]]))
    if found is None or not found["shape"] < 0.0:
        return None
    shape = -1.0 / found["shape"]
    scale = found["scale"] * shape
    return {"threshold": -found["location"] - scale, "scale": scale, "shape": shape}


SOLUTIONS: Mapping[str, tuple[int, Solution]] = MappingProxyType(
    {
        "normal": (2, _normal),
        "lognormal": (2, _lognormal),
        "gumbel": (2, _gumbel),
        "gumbel_min": (2, _gumbel_min),
        "weibull": (2, _weibull),
        "frechet": (2, _frechet),
        "gamma": (2, _gamma),
        "uniform": (2, _uniform),
        "exponential": (1, _exponential),
        "weibull3": (3, _weibull3),
        "lognormal3": (2, _lognormal),
        "gev": (3, _gev),
    }
)
"""Number of L-moments that a family needs, and its parameters from them (lognormal: of the logarithms)."""
