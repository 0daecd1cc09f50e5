"""The likelihood of samples that hold bounds, or from which part of the population is missing.

    ln L = sum ln f(x_i) + sum ln S(a_i) + sum ln F(b_i) + sum ln[F(b_i) - F(a_i)] - n ln[F(below) - F(above)]

over exact, right-censored, left-censored and interval observations, and for truncation limits.

References
----------
J. F. Lawless, Statistical Models and Methods for Lifetime Data, 2nd ed., Wiley 2003, sections 2.2 and 2.4.
"""

from __future__ import annotations

import contextlib
import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.fitting.bound_probabilities import log_probability
from calibrate.fitting.jets import Array, Number, seed, total
from calibrate.fitting.likelihood import Estimate, standardised
from calibrate.fitting.model import Data, Model, NoMaximumError, Rule
from calibrate.fitting.newton import Maximum, maximise
from calibrate.fitting.paper import PAPERS
from calibrate.fitting.registry import model_of
from calibrate.records.observations import Observations

DIFFERENCE = 2e-5
"""Step of the differences of the gradient of probabilities that give their Hessian, in the free coordinates."""

FLAT = 1e-10
"""Information per specimen, in the free coordinates, below which a top is a plateau: rounding gives about 1e-12."""

CERTAIN = -1e-8
"""Mean log-probability of bounds above which all of them hold with certainty, and no maximum is left to find."""


def censored_likelihood(
    seen: Observations, model: Model, fixed: Mapping[str, float], free: tuple[str, ...]
) -> Estimate:
    """Estimate the free parameters by maximum likelihood from observations of any kind.

    Parameters
    ----------
    seen : Observations
    model : Model
    fixed : mapping
        Values of all other parameters, in the unit of the sample.
    free : tuple of str
        Parameters to estimate, in the family's order.

    Notes
    -----
    The gradient is exact. So is the Hessian of the densities; that of the probabilities of bounds is the central
    difference of their gradient.
    """
    boundless = _boundless(model, seen, free)
    if boundless:
        return Estimate.failed(free, boundless)
    search = search_of(seen, model.family, fixed, free)
    data = search.data
    with np.errstate(all="ignore"):
        tops = []
        for t in _starts(search):
            tops.append(maximise(search, t))
            if tops[-1].converged and _one_top(search):
                break
        top = max(tops, key=lambda m: (m.converged, m.value if math.isfinite(m.value) else -math.inf))
        p = search.parameters(top.t)
        if not top.converged or _plateau(search, top):
            return Estimate.failed(free, _obstacle(model, data.z, p, seen))
        stretch = np.array([data.stretch(r.kind) * search.slope(r, p[r.name]) for r in search.free])
        covariance = np.linalg.inv(-top.hessian * data.n) * np.outer(stretch, stretch)
    irregular = model.irregular(p, free)
    if irregular is not None:
        covariance = np.full_like(covariance, np.nan)
    outward = {r.name: fixed.get(r.name, data.outward(r.kind, p[r.name])) for r in model.rules}
    exact = int(np.count_nonzero(seen.exact))
    log_likelihood = data.n * top.value - exact * math.log(data.unit)
    notes = (("not-regular", irregular),) if irregular is not None else ()
    return Estimate(outward, free, 0.5 * (covariance + covariance.T), log_likelihood, "", notes)


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
    exact = scaled.exact
    return Search(
        model, data, scaled, inner, tuple(rules[p] for p in free),
        scaled.lower[exact], scaled.lower[~exact], scaled.upper[~exact],
    )  # fmt: skip


def log_likelihood(law: Distribution, seen: Observations) -> float:
    """Return the log-likelihood of a distribution of shape () for observations of any kind, -inf where impossible."""
    return float(log_likelihoods(law, seen))


def log_likelihoods(laws: Distribution, seen: Observations) -> Array:
    """Return the log-likelihood of each of several distributions, -inf where impossible.

    Parameters
    ----------
    laws : Distribution
        Of shape () or (K, 1).
    seen : Observations
        In the unit of the distributions.
    """
    with np.errstate(all="ignore"):
        exact = seen.exact
        value = np.sum(laws.logpdf(seen.lower[exact]), axis=-1)
        if not exact.all():
            value = value + np.sum(log_probability(laws, seen.lower[~exact], seen.upper[~exact])[0], axis=-1)
        if seen.truncated:
            limits, _ = log_probability(laws, np.array([seen.above]), np.array([seen.below]))
            value = value - seen.n * limits[..., 0]
    return np.where(np.isnan(value), -np.inf, value)


def _boundless(model: Model, seen: Observations, free: tuple[str, ...]) -> str:
    """Say why it is already plain that the likelihood has no maximum, or return an empty text."""
    for bounded, side in ((seen.right, "above"), (seen.left, "below")):
        if bounded.all():
            return f"every specimen is only known to lie {side} its bound, and no family fits that best"
    exact = seen.lower[seen.exact]
    scatter_free = len(free) > 1 and (model.family != "student_t" or "scale" in free)
    if exact.size and scatter_free and np.ptp(exact) == 0.0:
        value = exact[0]
        if np.all((seen.lower <= value) & (value <= seen.upper)):
            return (
                f"all values observed exactly are {value:.12g}, which every bound allows, and the likelihood of any "
                "family with scatter grows without bound around it"
            )
    return ""


def _starts(search: Search) -> list[Array]:
    z = search.data.z
    if np.ptp(z) > 0.0:
        with contextlib.suppress(NoMaximumError):
            return [search.coordinates(p) for p in search.model.starts(z, search.fixed)]
    return [search.coordinates({**search.fixed, **_rough(search)})]


def _one_top(search: Search) -> bool:
    """Whether the likelihood has no more than one maximum.

    So it is for location and scale of log-concave densities, seen exactly or by bounds (J. Burridge, J. R. Statist.
    Soc. B 43 (1981) 41-45, from memory), which those of the families with a paper are on it.
    """
    kinds = {rule.kind for rule in search.free}
    return search.model.family in PAPERS and "threshold" not in kinds and not search.seen.truncated


def _rough(search: Search) -> dict[str, float]:
    z, seen = search.data.z, search.seen
    widths = (seen.upper - seen.lower)[seen.interval]
    spread = float(np.std(z)) or 0.25 * float(np.mean(widths) if widths.size else 4.0)
    guess = {
        "location": float(np.mean(z)),
        "scale": spread,
        "shape": 1.0,
        "threshold": float(np.min(z)) - spread,
    }
    return {rule.name: guess[rule.kind] for rule in search.free}


def _plateau(search: Search, top: Maximum) -> bool:
    """Whether the top is level: the sample leaves a direction in which no value is better than another."""
    certain = not search.seen.exact.any() and top.value > CERTAIN
    return certain or float(np.linalg.eigvalsh(-top.hessian)[0]) < FLAT


def _obstacle(model: Model, z: Array, p: Mapping[str, float], seen: Observations) -> str:
    told = model.obstacle(z, p)
    if told != Model.obstacle(model, z, p):
        return told
    if seen.n_exact == 0:
        return "no specimen was observed exactly, and the bounds alone do not determine a maximum of the likelihood"
    if seen.truncated:
        return f"{told}; within the truncation limits the sample may not tell the scatter"
    return told


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
    exact : array
        Values observed exactly, scaled.
    lower, upper : array, shape (k,)
        Bounds of all others, scaled.
    """

    model: Model
    data: Data
    seen: Observations
    fixed: Mapping[str, float]
    free: tuple[Rule, ...]
    exact: Array
    lower: Array
    upper: Array

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
                p[rule.name] = self.lowest - float(np.exp(ti))
            else:
                p[rule.name] = float(np.exp(ti)) if rule.positive else float(ti)
        return p

    def slope(self, rule: Rule, value: float) -> float:
        """Return d parameter / d coordinate."""
        if rule.kind == "threshold":
            return value - self.lowest
        return value if rule.positive else 1.0

    def __call__(self, t: Array) -> tuple[float, Array, Array]:
        """Return value, gradient and Hessian; value -inf where the point is not allowed."""
        count = len(self.free)
        nowhere = (-math.inf, np.full(count, np.nan), np.full((count, count), np.nan))
        p = self._allowed(t)
        if p is None:
            return nowhere
        value, gradient, hessian = self._exact_part(p)
        if self.seen.complete:
            return self._mean(value, gradient, hessian)
        more, slope = self._bounds_part(p)
        bends = np.empty((count, count))
        for i in range(count):
            step = DIFFERENCE * np.eye(count)[i]
            up, down = (self._bounds_part(self.parameters(t + s))[1] for s in (step, -step))
            bends[i] = (up - down) / (2.0 * DIFFERENCE)
        return self._mean(value + more, gradient + slope, hessian + 0.5 * (bends + bends.T))

    def first(self, t: Array) -> tuple[float, Array]:
        """Return value and exact gradient."""
        p = self._allowed(t)
        if p is None:
            return -math.inf, np.full(len(self.free), np.nan)
        value, gradient, _ = self._exact_part(p)
        more, slope = self._bounds_part(p)
        return self._mean(value + more, gradient + slope, np.zeros((0, 0)))[:2]

    def _mean(self, value: float, gradient: Array, hessian: Array) -> tuple[float, Array, Array]:
        if not (math.isfinite(value) and np.all(np.isfinite(gradient))):
            return -math.inf, np.full_like(gradient, np.nan), np.full_like(hessian, np.nan)
        n = self.seen.n
        return value / n, gradient / n, hessian / n

    def _allowed(self, t: Array) -> dict[str, float] | None:
        if np.max(np.abs(t)) > 300.0:
            return None
        p = self.parameters(t)
        exact = self.exact if self.exact.size > 1 else self.seen.values
        return p if self.model.allowed(exact, p) else None

    def _exact_part(self, p: Mapping[str, float]) -> tuple[float, Array, Array]:
        count = len(self.free)
        if not self.exact.size:
            return 0.0, np.zeros(count), np.zeros((count, count))
        seeded: dict[str, Number] = dict(p)
        for i, rule in enumerate(self.free):
            slope = self.slope(rule, p[rule.name])
            bend = slope if rule.positive or rule.kind == "threshold" else 0.0
            seeded[rule.name] = seed(i, count, p[rule.name], slope, bend)
        return total(self.model.log_density(self.exact, seeded), self.exact.size)

    def _bounds_part(self, p: Mapping[str, float]) -> tuple[float, Array]:
        """Return value and gradient of what bounds and truncation contribute."""
        seen = self.seen
        value, gradient = 0.0, np.zeros(len(self.free))
        if seen.complete:
            return value, gradient
        member = family(self.model.family)
        law = Distribution.of(member, tuple(np.asarray(p[name]) for name in member.parameter_names))
        names = tuple(rule.name for rule in self.free)
        if self.lower.size:
            log_p, slopes = log_probability(law, self.lower, self.upper, names)
            value, gradient = float(np.sum(log_p)), np.sum(slopes, axis=1)
        if seen.truncated:
            log_p, slopes = log_probability(law, np.array([seen.above]), np.array([seen.below]), names)
            value -= seen.n * float(log_p[0])
            gradient = gradient - seen.n * slopes[:, 0]
        return value, gradient * np.array([self.slope(rule, p[rule.name]) for rule in self.free])
