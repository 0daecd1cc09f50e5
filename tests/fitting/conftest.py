"""One case per way in which a family can be fitted, with scipy's form of the same family beside it."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pytest
from scipy import stats

from calibrate.fitting import fit_family

SHAPES = {"shape", "shape_1", "shape_2", "log_sd", "freedom"}
"""Parameters without a unit."""

LAWS = {
    "normal": lambda location, scale: (stats.norm, (location, scale)),
    "lognormal": lambda median, log_sd: (stats.lognorm, (log_sd, 0.0, median)),
    "gumbel": lambda location, scale: (stats.gumbel_r, (location, scale)),
    "gumbel_min": lambda location, scale: (stats.gumbel_l, (location, scale)),
    "weibull": lambda scale, shape: (stats.weibull_min, (shape, 0.0, scale)),
    "frechet": lambda scale, shape: (stats.invweibull, (shape, 0.0, scale)),
    "gamma": lambda shape, scale: (stats.gamma, (shape, 0.0, scale)),
    "uniform": lambda lower, upper: (stats.uniform, (lower, upper - lower)),
    "exponential": lambda scale: (stats.expon, (0.0, scale)),
    "weibull3": lambda threshold, scale, shape: (stats.weibull_min, (shape, threshold, scale)),
    "lognormal3": lambda threshold, median, log_sd: (stats.lognorm, (log_sd, threshold, median)),
    "gev": lambda location, scale, shape: (stats.genextreme, (-shape, location, scale)),
    "beta": lambda shape_1, shape_2, lower, upper: (stats.beta, (shape_1, shape_2, lower, upper - lower)),
    "student_t": lambda location, scale, freedom: (stats.t, (freedom, location, scale)),
    "truncated_normal": lambda location, scale, lower, upper: (
        stats.truncnorm,
        ((lower - location) / scale, (upper - location) / scale, location, scale),
    ),
}
"""Scipy's form of each family: generator and its arguments."""


@dataclass(frozen=True)
class Case:
    """A family with true parameters, and which of them are given to the fit."""

    family: str
    parameters: Mapping[str, float]
    given: tuple[str, ...] = ()
    estimate: tuple[str, ...] = ()

    @property
    def fixed(self) -> dict[str, float]:
        return {name: self.parameters[name] for name in self.given}

    @property
    def free(self) -> tuple[str, ...]:
        return tuple(name for name in self.parameters if name not in self.given)

    def sample(self, n: int, seed: int = 0) -> np.ndarray:
        law, arguments = LAWS[self.family](**self.parameters)
        return law.rvs(*arguments, size=n, random_state=np.random.default_rng([seed, n]))

    def fit(self, values: np.ndarray, **options):
        return fit_family(values, self.family, fixed=self.fixed, estimate=self.estimate, **options)

    def log_likelihood(self, values: np.ndarray, parameters: Mapping[str, float]) -> float:
        law, arguments = LAWS[self.family](**parameters)
        return float(np.sum(law.logpdf(values, *arguments)))

    def scaled(self, parameters: Mapping[str, float], factor: float) -> dict[str, float]:
        return {name: p if name in SHAPES else p * factor for name, p in parameters.items()}


REGULAR = {
    "normal": Case("normal", {"location": 30.0, "scale": 4.0}),
    "normal, location given": Case("normal", {"location": 30.0, "scale": 4.0}, ("location",)),
    "lognormal": Case("lognormal", {"median": 0.8, "log_sd": 0.35}),
    "lognormal, scatter given": Case("lognormal", {"median": 0.8, "log_sd": 0.35}, ("log_sd",)),
    "gumbel": Case("gumbel", {"location": 21.0, "scale": 5.0}),
    "gumbel_min": Case("gumbel_min", {"location": -21.0, "scale": 5.0}),
    "weibull": Case("weibull", {"scale": 460.0, "shape": 6.0}),
    "weibull, shape given": Case("weibull", {"scale": 460.0, "shape": 6.0}, ("shape",)),
    "frechet": Case("frechet", {"scale": 3.0, "shape": 4.5}),
    "gamma": Case("gamma", {"shape": 0.7, "scale": 12.0}),
    "gamma, scale given": Case("gamma", {"shape": 5.0, "scale": 12.0}, ("scale",)),
    "exponential": Case("exponential", {"scale": 0.04}),
    "weibull3": Case("weibull3", {"threshold": 10.0, "scale": 6.0, "shape": 1.4}, ("threshold",)),
    "weibull3, estimated": Case(
        "weibull3", {"threshold": 10.0, "scale": 6.0, "shape": 3.5}, estimate=("threshold",)
    ),
    "lognormal3": Case("lognormal3", {"threshold": -5.0, "median": 6.0, "log_sd": 0.4}, ("threshold",)),
    "lognormal3, estimated": Case(
        "lognormal3", {"threshold": -5.0, "median": 6.0, "log_sd": 0.7}, estimate=("threshold",)
    ),
    "gev": Case("gev", {"location": 4.0, "scale": 0.5, "shape": 0.2}),
    "gev, light tail": Case("gev", {"location": 4.0, "scale": 0.5, "shape": -0.25}),
    "gev, shape given": Case("gev", {"location": 4.0, "scale": 0.5, "shape": 0.1}, ("shape",)),
    "beta": Case("beta", {"shape_1": 2.0, "shape_2": 5.0, "lower": -3.0, "upper": 9.0}, ("lower", "upper")),
    "student_t": Case("student_t", {"location": 7.0, "scale": 2.0, "freedom": 4.0}),
    "student_t, freedom given": Case(
        "student_t", {"location": 7.0, "scale": 2.0, "freedom": 3.0}, ("freedom",)
    ),
    "truncated_normal": Case(
        "truncated_normal",
        {"location": 1.0, "scale": 2.0, "lower": -1.0, "upper": 4.0},
        ("lower", "upper"),
    ),
    "truncated_normal, one bound": Case(
        "truncated_normal",
        {"location": 1.0, "scale": 2.0, "lower": 0.0, "upper": np.inf},
        ("lower", "upper"),
    ),
}

CASES = {**REGULAR, "uniform": Case("uniform", {"lower": -4.0, "upper": 11.0})}


@pytest.fixture(params=REGULAR)
def regular(request) -> Case:
    """A case whose maximum is one where the gradient vanishes."""
    return REGULAR[request.param]


@pytest.fixture(params=CASES)
def case(request) -> Case:
    return CASES[request.param]


@pytest.fixture(scope="session")
def cases() -> dict[str, Case]:
    return CASES
