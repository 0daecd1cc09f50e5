"""Everything about one sample: screening, candidates, tests of fit, lots, intervals, a characteristic value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from calibrate.distributions import Distribution
from calibrate.engine import stream
from calibrate.errors import Doubt
from calibrate.fitting import Comparison, Fit, compare, fit_family
from calibrate.fitting.bootstrap_intervals import bootstrap_intervals
from calibrate.fitting.characteristic import (
    CharacteristicValue,
    characteristic_value,
    characteristic_value_of_lots,
)
from calibrate.fitting.fit_tests import FitTests, run_fit_tests
from calibrate.fitting.intervals import Interval, fractile_interval, parameter_intervals
from calibrate.fitting.lots import LotScatter, Pooling
from calibrate.fitting.modes import ModeFit, fit_modes
from calibrate.records import Observations, Sample
from calibrate.records.screening import Screening
from calibrate.study.fits import WORTH_TESTING, analyse_lots
from calibrate.study.screening import screen_sample

CONFIDENCE = 0.95
"""Of the intervals of parameters and fractiles."""
FRACTILES = (0.01, 0.05, 0.5, 0.95, 0.99)


@dataclass(frozen=True, slots=True)
class Asked:
    """A characteristic value that is asked for.

    Attributes
    ----------
    fractile : float
    confidence : float or None
    least_cov, known_cov : float or None
    route : str or None
    from_lots : bool
        Whether lots are taken into account.
    """

    fractile: float
    confidence: float | None = None
    least_cov: float | None = None
    known_cov: float | None = None
    route: str | None = None
    from_lots: bool = False


@dataclass(frozen=True, slots=True)
class SampleFit:
    """What one sample shows."""

    sample: Sample
    screening: Screening
    comparison: Comparison
    tests: Mapping[str, FitTests]
    intervals: Mapping[str, Interval]
    fractiles: Mapping[float, Interval]
    lots: LotScatter | None = None
    pooled: Pooling | None = None
    characteristic: CharacteristicValue | None = None
    modes: tuple[ModeFit, ...] = ()
    doubts: tuple[Doubt, ...] = field(default=())


def fit_sample(
    sample: Sample,
    families: Sequence[str] | None = None,
    *,
    method: str = "likelihood",
    options: Mapping[str, float] | None = None,
    asked: Asked | None = None,
    seed: int = 0,
) -> SampleFit:
    """Screen a sample, fit and rank candidates, and compute a characteristic value if asked.

    Parameters
    ----------
    sample : Sample
    families : sequence of str, optional
        Candidates; default all that suit.
    method : str
        Estimator, with its ``options``.
    asked : Asked, optional
    seed : int
        Of everything simulated.

    Raises
    ------
    InputError
        As `calibrate.fitting.compare` and `characteristic_value`.
    """
    comparison = compare(sample.observations, families, method=method, options=options)
    best = comparison.best
    tests: dict[str, FitTests] = {}
    intervals: Mapping[str, Interval] = {}
    fractiles: Mapping[float, Interval] = {}
    lots, pooled = None, None
    doubts: tuple[Doubt, ...] = ()
    if best is not None:
        for candidate in comparison.candidates:
            if not candidate.converged or candidate.aicc - best.aicc > WORTH_TESTING:
                continue
            found = run_fit_tests(candidate, stream(seed, "fit tests", sample.name, candidate.family))
            if found is not None:
                tests[candidate.family] = found
        intervals, fractiles = _intervals(best, stream(seed, "intervals", sample.name))
        lots, pooled, doubts = analyse_lots(sample, best.family, f"records.{sample.name}", seed)
    characteristic = None
    if asked is not None and best is not None:
        characteristic = _characteristic(sample, best.family, asked, seed)
        doubts = (*doubts, *characteristic.doubts)
    screening = screen_sample(sample, seed=seed)
    doubts = (*screening.doubts(f"records.{sample.name}"), *doubts)
    modes: tuple[ModeFit, ...] = ()
    if best is not None and len(screening.modes) > 1:
        modes = fit_modes(screening.modes, best.family)
    return SampleFit(
        sample,
        screening,
        comparison,
        tests,
        intervals,
        fractiles,
        lots,
        pooled,
        characteristic,
        modes,
        doubts,
    )


def _intervals(
    best: Fit, rng: np.random.Generator
) -> tuple[Mapping[str, Interval], Mapping[float, Interval]]:
    """Return intervals of parameters and fractiles: by profile likelihood, else by bootstrap where that is possible."""
    if best.method == "likelihood" and best.family != "uniform":
        found = parameter_intervals(best, CONFIDENCE)
        return found, {p: fractile_interval(best, p, CONFIDENCE) for p in FRACTILES}
    if best.observations.complete and best.family != "uniform":
        return bootstrap_intervals(best, rng, CONFIDENCE, FRACTILES)
    return {}, {}


def _characteristic(sample: Sample, family: str, asked: Asked, seed: int) -> CharacteristicValue:
    if asked.from_lots:
        confidence = 0.75 if asked.confidence is None else asked.confidence
        return characteristic_value_of_lots(
            sample.observations, sample.labels["lot"], family, asked.fractile, confidence, asked.least_cov
        )

    def refit(seen: Observations) -> Distribution | None:
        return fit_family(seen, family).distribution

    return characteristic_value(
        sample.observations,
        None if asked.route == "order_statistic" else family,
        asked.fractile,
        asked.confidence,
        asked.route,
        asked.known_cov,
        asked.least_cov,
        stream(seed, "characteristic", sample.name),
        refit,
    )
