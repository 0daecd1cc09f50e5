"""The method of moments for every family, with standard errors from the scatter of the sample moments."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

import numpy as np
from scipy import special

from calibrate.distributions import Family, family
from calibrate.errors import InputError
from calibrate.fitting.jets import Array
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.model import Model

STEP = 1e-3
"""Of the central differences of fourth order, in standard deviations of the sample; their error is of order 1e-12."""

_ORDERS = np.arange(2, 60)


def method_of_moments(x: Array, model: Model, fixed: Mapping[str, float], free: tuple[str, ...]) -> Estimate:
    """Estimate the free parameters from mean, standard deviation and, where needed, one moment more.

    Parameters
    ----------
    x : array, shape (n,)
        Values that the family can hold, not all equal.
    model : Model
    fixed : mapping
        Values of all other parameters.
    free : tuple of str
        Parameters to estimate, in the family's order.

    Raises
    ------
    InputError
        A parameter is fixed that the moments themselves determine.

    Notes
    -----
    The standard deviation is the one with n - 1; skewness and kurtosis are
    m3/m2^1.5 and m4/m2^2. The covariance is J S J'/n with S that of the
    influence functions of the moments in the sample and J the derivatives of
    the parameters by the moments (A. W. van der Vaart, Asymptotic Statistics,
    Cambridge 1998, chapters 3 and 4). The log-likelihood is the one at these
    estimates, not the largest.
    """
    member = family(model.family)
    allowed = {*member.moments_keep}
    wrong = [name for name in fixed if name not in allowed]
    if wrong:
        raise InputError(
            f"The method of moments of '{model.family}' determines {' and '.join(wrong)}; use method 'likelihood'."
        )
    third = model.third if model.third_parameter in free else None
    moments, influence = _sample_moments(x, member.moment_names, third)

    def solve(m: Array) -> Array:
        return _parameters(member, model, fixed, m, third)

    kept = [i for i, name in enumerate(member.parameter_names) if name in free]
    try:
        values = solve(moments)
        slopes = _slopes(lambda m: solve(m)[kept], moments, float(np.std(x)), third)
    except InputError as error:
        return Estimate.failed(free, _lowered(error.problems[0].message.removeprefix(f"{model.family}: ")))
    covariance = slopes @ (influence @ influence.T / x.size**2) @ slopes.T
    parameters = dict(zip(member.parameter_names, (float(v) for v in values), strict=True))
    parameters |= {name: value for name, value in fixed.items() if name in parameters}
    with np.errstate(all="ignore"):
        density = member.log_density(x, **{k: np.asarray(v) for k, v in parameters.items()})
    log_likelihood = float(np.sum(density))
    notes: tuple[tuple[str, str], ...] = ()
    if not math.isfinite(log_likelihood):
        count = int(np.sum(~np.isfinite(density)))
        lie = "value lies" if count == 1 else "values lie"
        message = f"{count} {lie} outside the fitted distribution's support."
        notes = (("outside-support", message),)
        log_likelihood = -math.inf
    return Estimate(parameters, free, covariance, log_likelihood, "", notes)


def _sample_moments(x: Array, names: tuple[str, ...], third: str | None) -> tuple[Array, Array]:
    """Return the moments, shape (m,), and their influence functions, shape (m, n)."""
    mean = float(np.mean(x))
    d = x - mean
    root = float(np.sqrt(np.mean(d * d)))
    u = d / root
    sd = root * math.sqrt(x.size / (x.size - 1))
    moments, influence = [mean], [d]
    if names == ("mean", "sd"):
        moments.append(sd)
        influence.append(0.5 * root * (u * u - 1.0))
    skewness = float(np.mean(u**3))
    if third == "skewness":
        moments.append(skewness)
        influence.append(u**3 - 3.0 * u - skewness - 1.5 * skewness * (u * u - 1.0))
    elif third == "kurtosis":
        kurtosis = float(np.mean(u**4))
        moments.append(kurtosis)
        influence.append(u**4 - kurtosis - 4.0 * skewness * u - 2.0 * kurtosis * (u * u - 1.0))
    return np.array(moments), np.array(influence)


def _parameters(
    member: Family, model: Model, fixed: Mapping[str, float], m: Array, third: str | None
) -> Array:
    """Return the own parameters that have these moments."""
    arguments = {name: np.asarray(fixed[name]) for name in member.moments_keep if name in fixed}
    arguments |= {name: np.asarray(value) for name, value in zip(member.moment_names, m, strict=False)}
    if third is not None:
        arguments[model.third_parameter] = np.asarray(_third(model.family, m))
    return np.array([float(v) for v in member.solve(arguments).values()])


def _slopes(solve: Callable[[Array], Array], m: Array, sd: float, third: str | None) -> Array:
    """Return d parameter / d moment, shape (parameters that are estimated, moments)."""
    steps = np.full(m.size, STEP * sd)
    if third is not None:
        steps[-1] = STEP
    columns = []
    for i, step in enumerate(steps):
        e = np.zeros(m.size)
        e[i] = step
        near = solve(m + e) - solve(m - e)
        far = solve(m + 2.0 * e) - solve(m - 2.0 * e)
        columns.append((8.0 * near - far) / (12.0 * step))
    return np.array(columns).T


def _third(name: str, m: Array) -> float:
    mean, sd, third = (float(v) for v in m)
    if name == "gev":
        return _shape_of_skewness(third)
    if name == "student_t":
        if third <= 3.0:
            raise InputError(
                f"The kurtosis of the sample, {third:.3g}, is not above that of the normal family, 3, "
                "so that no freedom has it."
            )
        return 4.0 + 6.0 / (third - 3.0)
    if name == "weibull3":
        # Minus a standard Weibull variable is an extreme value of shape -1/k.
        shape = _shape_of_skewness(-third)
        if shape >= 0.0:
            raise InputError(
                f"The skewness of the sample, {third:.3g}, is below that of every Weibull family."
            )
        y = -shape
        first = math.gamma(1.0 + y)
        return mean - sd * first / math.sqrt(math.gamma(1.0 + 2.0 * y) - first**2)
    if third <= 0.0:
        raise InputError(f"The skewness of the sample, {third:.3g}, is not positive, as the family's is.")
    # (w + 2) sqrt(w - 1) = skewness with w = exp(log_sd^2), a cubic in sqrt(w - 1), solved in closed form.
    q = math.cbrt(0.5 * (third + math.sqrt(third * third + 4.0)))
    return mean - sd / (q - 1.0 / q)


def _shape_of_skewness(skewness: float) -> float:
    from scipy import optimize

    low, high = -15.0, 1.0 / 3.0 - 1e-9
    if not gev_skewness(low) < skewness < gev_skewness(high):
        raise InputError(f"The skewness of the sample, {skewness:.3g}, is out of the family's reach.")
    return float(optimize.brentq(lambda s: gev_skewness(s) - skewness, low, high, xtol=1e-15, rtol=1e-14))


def gev_skewness(shape: float) -> float:
    """Return the skewness of the generalised extreme value family, shape < 1/3, without cancellation at 0."""
    if abs(shape) < 0.08:
        # ln Gamma(1 - x) = gamma x + sum zeta(k) x^k / k; the linear and quadratic terms cancel exactly.
        terms = special.zeta(_ORDERS.astype(np.float64)) * shape**_ORDERS / _ORDERS
        d2 = float(np.sum(terms * (2.0**_ORDERS - 2.0)))
        d3 = float(np.sum(terms * (3.0**_ORDERS - 3.0)))
        gap = float(np.sum((terms * (3.0**_ORDERS - 3.0 * 2.0**_ORDERS + 3.0))[1:]))
        if shape == 0.0:
            return 12.0 * math.sqrt(6.0) * float(special.zeta(3.0)) / math.pi**3
        top = gap + _second_order(d3) - 3.0 * _second_order(d2)
    else:
        g1, g2, g3 = (float(special.gammaln(1.0 - k * shape)) for k in (1, 2, 3))
        d2, d3 = g2 - 2.0 * g1, g3 - 3.0 * g1
        top = math.expm1(d3) - 3.0 * math.expm1(d2)
    return float(math.copysign(1.0, shape) * top / math.expm1(d2) ** 1.5)


def _second_order(d: float) -> float:
    """Return exp(d) - 1 - d."""
    if abs(d) > 0.5:
        return math.expm1(d) - d
    term, total = 0.5 * d * d, 0.0
    for k in range(3, 25):
        total += term
        term *= d / k
    return total


def _lowered(message: str) -> str:
    text = message.rstrip(".")
    return text[:1].lower() + text[1:]
