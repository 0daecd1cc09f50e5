"""The likelihood of samples that hold bounds, or from which part of the population is missing.

    ln L = sum ln f(x_i) + sum ln S(a_i) + sum ln F(b_i) + sum ln[F(b_i) - F(a_i)] - n ln[F(below) - F(above)]

over exact, right-censored, left-censored and interval observations, and for truncation limits.

References
----------
J. F. Lawless, Statistical Models and Methods for Lifetime Data, 2nd ed., Wiley 2003, sections 2.2 and 2.4.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.fitting.jets import Array, Number, seed, total
from calibrate.fitting.likelihood import Estimate, standardised
from calibrate.fitting.model import Data, Model, NoMaximumError, Rule
from calibrate.fitting.newton import maximise
from calibrate.fitting.registry import model_of
from calibrate.records.observations import Observations

DIFFERENCE = 2e-5
"""Step of the differences of the exact gradient that give the Hessian, in the free coordinates."""


def censored_likelihood(
    seen: Observations, model: Model, fixed: Mapping[str, float], free: tuple[str, ...]
) -> Estimate:
    """Estimate the free parameters by maximum likelihood from observations of any kind.

    Parameters
    ----------
    seen : Observations
        At least two different exact values or finite intervals.
    model : Model
    fixed : mapping
        Values of all other parameters, in the unit of the sample.
    free : tuple of str
        Parameters to estimate, in the family's order.

    Notes
    -----
    The gradient is exact: that of densities by forward differentiation, that of probabilities from
    dF/dp = -f dx/dp at fixed u. The observed information is its central difference.
    """
    search = search_of(seen, model.family, fixed, free)
    data = search.data
    with np.errstate(all="ignore"):
        try:
            starts = [search.coordinates(p) for p in model.starts(data.z, search.fixed)]
        except NoMaximumError:
            starts = [search.coordinates({**search.fixed, **_rough(data.z, search.free)})]
        tops = [maximise(search, t) for t in starts]
        top = max(tops, key=lambda m: (m.converged, m.value if math.isfinite(m.value) else -math.inf))
        p = search.parameters(top.t)
        if not top.converged:
            return Estimate.failed(free, _obstacle(model, data.z, p, seen))
        stretch = np.array([data.stretch(r.kind) * search.slope(r, p[r.name]) for r in search.free])
        covariance = np.linalg.inv(-top.hessian * data.n) * np.outer(stretch, stretch)
    outward = {r.name: fixed.get(r.name, data.outward(r.kind, p[r.name])) for r in model.rules}
    exact = int(np.count_nonzero(seen.exact))
    return Estimate(
        outward, free, 0.5 * (covariance + covariance.T), data.n * top.value - exact * math.log(data.unit)
    )


def search_of(seen: Observations, name: str, fixed: Mapping[str, float], free: tuple[str, ...]) -> Search:
    """Return the likelihood of a family for a sample as a function of its free coordinates.

    Parameters
    ----------
    seen : Observations
    name : str
        Of the family.
    fixed : mapping
        Values of all other parameters, in the unit of the sample.
    free : tuple of str
    """
    model = model_of(name)
    data = standardised(seen.values, model)
    rules = {rule.name: rule for rule in model.rules}
    scaled = Observations(
        (seen.lower - data.shift) / data.unit,
        (seen.upper - data.shift) / data.unit,
        (seen.above - data.shift) / data.unit,
        (seen.below - data.shift) / data.unit,
    )
    inner = {p: data.inward(rules[p].kind, value) for p, value in fixed.items()}
    return Search(model, data, scaled, inner, tuple(rules[p] for p in free))


def log_likelihood(law: Distribution, seen: Observations) -> float:
    """Return the log-likelihood of a distribution of shape () for observations of any kind, -inf where impossible."""
    with np.errstate(all="ignore"):
        exact = seen.exact
        value = float(np.sum(law.logpdf(seen.lower[exact])))
        if not exact.all():
            value += float(np.sum(_log_probability(law, seen.lower[~exact], seen.upper[~exact])))
        if seen.truncated:
            limits = _log_probability(law, np.array([seen.above]), np.array([seen.below]))
            value -= seen.n * float(limits[0])
    return value if not math.isnan(value) else -math.inf


def _log_probability(law: Distribution, lower: Array, upper: Array) -> Array:
    below, above = _end(law, lower, ()), _end(law, upper, ())
    return _between(below, above)


def _obstacle(model: Model, z: Array, p: Mapping[str, float], seen: Observations) -> str:
    if seen.n_exact == 0:
        return "no specimen was observed exactly, and the bounds alone do not determine a maximum of the likelihood"
    if seen.truncated:
        return f"{model.obstacle(z, p)}; within the truncation limits the sample may not tell the scatter"
    return model.obstacle(z, p)


def _rough(z: Array, free: tuple[Rule, ...]) -> dict[str, float]:
    spread = float(np.std(z)) or 1.0
    guess = {
        "location": float(np.mean(z)),
        "scale": spread,
        "shape": 1.0,
        "threshold": float(np.min(z)) - spread,
    }
    return {rule.name: guess[rule.kind] for rule in free}


@dataclass(frozen=True, slots=True, eq=False)
class Search:
    """Mean log-likelihood, gradient and Hessian as a function of the free coordinates.

    Attributes
    ----------
    model : Model
    data : Data
        How values are scaled.
    seen : Observations
        Scaled.
    fixed : mapping
        Scaled.
    free : tuple of Rule
    """

    model: Model
    data: Data
    seen: Observations
    fixed: Mapping[str, float]
    free: tuple[Rule, ...]

    @property
    def lowest(self) -> float:
        """Smallest value above which a threshold cannot lie."""
        exact = self.seen.lower[self.seen.exact | self.seen.interval]
        return float(np.min(exact)) if exact.size else float(np.min(self.seen.values))

    def coordinates(self, p: Mapping[str, float]) -> Array:
        """Return the free coordinates of scaled parameters."""
        t = []
        for rule in self.free:
            value = p[rule.name]
            if rule.kind == "threshold":
                t.append(math.log(max(self.lowest - value, 1e-12)))
            else:
                t.append(math.log(value) if rule.positive else value)
        return np.array(t)

    def parameters(self, t: Array) -> dict[str, float]:
        """Return all parameters, scaled."""
        p = dict(self.fixed)
        for rule, ti in zip(self.free, t, strict=True):
            if rule.kind == "threshold":
                p[rule.name] = self.lowest - math.exp(ti)
            else:
                p[rule.name] = math.exp(ti) if rule.positive else float(ti)
        return p

    def slope(self, rule: Rule, value: float) -> float:
        """Return d parameter / d coordinate."""
        if rule.kind == "threshold":
            return value - self.lowest
        return value if rule.positive else 1.0

    def __call__(self, t: Array) -> tuple[float, Array, Array]:
        """Return value, gradient and Hessian; value -inf where the point is not allowed."""
        value, gradient = self.first(t)
        count = len(self.free)
        hessian = np.full((count, count), np.nan)
        if not math.isfinite(value):
            return -math.inf, np.full(count, np.nan), hessian
        for i in range(count):
            step = np.zeros(count)
            step[i] = DIFFERENCE
            hessian[i] = (self.first(t + step)[1] - self.first(t - step)[1]) / (2.0 * DIFFERENCE)
        return value, gradient, 0.5 * (hessian + hessian.T)

    def first(self, t: Array) -> tuple[float, Array]:
        """Return value and exact gradient."""
        nowhere = (-math.inf, np.full(len(self.free), np.nan))
        if np.max(np.abs(t)) > 300.0:
            return nowhere
        p = self.parameters(t)
        seen = self.seen
        exact = seen.lower[seen.exact]
        value, gradient = 0.0, np.zeros(len(self.free))
        if exact.size:
            if not self.model.allowed(exact, p):
                return nowhere
            seeded: dict[str, Number] = dict(p)
            for i, rule in enumerate(self.free):
                seeded[rule.name] = seed(i, len(self.free), p[rule.name], self.slope(rule, p[rule.name]), 0.0)
            value, gradient, _ = total(self.model.log_density(exact, seeded), exact.size)
        member = family(self.model.family)
        law = Distribution.of(member, tuple(np.asarray(p[name]) for name in member.parameter_names))
        inexact = ~seen.exact
        if inexact.any():
            log_p, slopes = self._probability(law, p, seen.lower[inexact], seen.upper[inexact])
            value += float(np.sum(log_p))
            gradient = gradient + np.sum(slopes, axis=1)
        if seen.truncated:
            log_p, slopes = self._probability(law, p, np.array([seen.above]), np.array([seen.below]))
            value -= seen.n * float(log_p[0])
            gradient = gradient - seen.n * slopes[:, 0]
        if not (math.isfinite(value) and np.all(np.isfinite(gradient))):
            return nowhere
        return value / seen.n, gradient / seen.n

    def _probability(
        self, law: Distribution, p: Mapping[str, float], lower: Array, upper: Array
    ) -> tuple[Array, Array]:
        """Return ln P(lower < x < upper), and its derivatives by the free coordinates, shape (f, k)."""
        below, above = _end(law, lower, self.free), _end(law, upper, self.free)
        log_p = _between(below, above)
        slopes = np.array(
            [
                (below.weight(name, log_p) - above.weight(name, log_p)) * self.slope(rule, p[rule.name])
                for name, rule in ((rule.name, rule) for rule in self.free)
            ]
        )
        return log_p, slopes


@dataclass(frozen=True, slots=True, eq=False)
class _End:
    """Probabilities at one end of intervals, and dx/dp at fixed u there."""

    log_cdf: Array
    log_sf: Array
    log_density: Array
    slopes: Mapping[str, Array]

    def weight(self, name: str, log_p: Array) -> Array:
        """Return f dx/dp over the interval's probability; 0 at an infinite end."""
        ratio = np.exp(self.log_density - log_p)
        return np.where(ratio > 0.0, ratio * self.slopes[name], 0.0)


def _end(law: Distribution, x: Array, free: tuple[Rule, ...]) -> _End:
    finite = np.isfinite(x)
    median = float(law.x(0.0))
    safe = np.where(finite, x, median)
    u = law.u(safe)
    inside = finite & np.isfinite(u)
    slopes = law.parameter_slopes(np.where(inside, u, 0.0))
    low, high = x == -np.inf, x == np.inf
    log_cdf = np.where(low, -np.inf, np.where(high, 0.0, law.logcdf(safe)))
    log_sf = np.where(low, 0.0, np.where(high, -np.inf, law.logsf(safe)))
    log_density = np.where(inside, law.logpdf(safe), -np.inf)
    return _End(
        log_cdf, log_sf, log_density, {r.name: np.broadcast_to(slopes[r.name], x.shape) for r in free}
    )


def _between(below: _End, above: _End) -> Array:
    """Return the log-probability between two ends, as a difference in the tail in which it does not cancel."""
    low_tail = below.log_cdf + above.log_cdf < below.log_sf + above.log_sf
    return np.where(
        low_tail,
        _log_difference(above.log_cdf, below.log_cdf),
        _log_difference(below.log_sf, above.log_sf),
    )


def _log_difference(larger: Array, smaller: Array) -> Array:
    """Return ln(exp(larger) - exp(smaller))."""
    gap = smaller - larger
    return np.asarray(larger + np.where(gap > -0.693, np.log(-np.expm1(gap)), np.log1p(-np.exp(gap))))
