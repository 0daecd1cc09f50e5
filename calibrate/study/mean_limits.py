"""Values stated as a lower fractile that are a limit of the mean of the sample, as an interval of the mean gives it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Doubt
from calibrate.fitting.characteristic import characteristic_value
from calibrate.study.fits import FittedVariable, RecordModel
from calibrate.study.model import Quantity, Study
from calibrate.study.reading.bonds import fractile_of

AGREES = 0.01
"""Relative difference up to which two values are taken for the same."""
CONFIDENCE = 0.75
"""Of the fractile with which the message compares (EN 1990, EN 14358: 75 %)."""


class MeanLimit(NamedTuple):
    """A confidence limit of the mean of a sample; ``tail`` is the probability beyond it, ``log`` that of logarithms."""

    value: float
    level: float
    two_sided: bool
    log: bool

    def words(self) -> str:
        """Return what it is, for a sentence."""
        sides = "two-sided" if self.two_sided else "one-sided"
        mean = "mean of the logarithms" if self.log else "mean"
        return f"lower end of the {sides} {100.0 * self.level:.0f} % interval for the {mean}"


def mean_limits(values: NDArray[np.float64]) -> list[MeanLimit]:
    """Return the lower limits of the mean by Student's t, at 95 and 99 %, one-sided and two-sided.

    Parameters
    ----------
    values : array, shape (n,)
        Observed exactly; limits from logarithms are left out unless all are positive.
    """
    from scipy.special import stdtrit

    n = values.size
    if n < 2:
        return []
    found = []
    for log in (False, True):
        if log and not (values > 0.0).all():
            continue
        x = np.log(values) if log else values
        mean, error = float(np.mean(x)), float(np.std(x, ddof=1)) / math.sqrt(n)
        for level in (0.95, 0.99):
            for two_sided in (True, False):
                t = float(stdtrit(n - 1, 0.5 * (1.0 + level) if two_sided else level))
                limit = mean - t * error
                found.append(MeanLimit(math.exp(limit) if log else limit, level, two_sided, log))
    return found


def mean_limit_doubts(study: Study, fitted: Mapping[str, RecordModel]) -> list[Doubt]:
    """Return the doubts about typed lower fractiles that agree with a limit of the mean and with no fractile."""
    doubts = []
    for quantity in study.quantities.values():
        share = fractile_of(quantity.value_type)
        model = fitted.get(quantity.of or "")
        typed_fractile = quantity.characteristic is None and share is not None and share < 0.5
        if typed_fractile and isinstance(model, FittedVariable):
            assert share is not None
            doubts += _compared(study, quantity, share, model)
    return doubts


def _compared(study: Study, quantity: Quantity, share: float, model: FittedVariable) -> list[Doubt]:
    sample = study.records[study.variables[quantity.of or ""].records or ""]
    seen = sample.observations
    values, typed = seen.lower[seen.exact], quantity.value / sample.unit.factor
    close = [m for m in mean_limits(values) if _agree(typed, m.value)]
    if not close:
        return []
    fractile = float(model.distribution.ppf(share)) / sample.unit.factor
    family = "normal" if model.family == "normal" else "lognormal"
    if family == "lognormal" and not (values > 0.0).all():
        return []
    with_confidence = characteristic_value(values, family, share, CONFIDENCE).value
    if _agree(typed, fractile) or _agree(typed, with_confidence):
        return []
    nearest = min(close, key=lambda m: abs(m.value - typed))
    unit = f" {sample.unit.text}" if sample.unit.text else ""
    side = "below" if with_confidence < typed else "above"
    text = (
        f"'{quantity.name}' is stated as the {quantity.value_type} of '{quantity.of}', but {typed:.4g}{unit} agrees "
        f"with the {nearest.words()} of these {values.size} values ({nearest.value:.4g}{unit}). Such an interval says "
        "where the mean lies, and shrinks with every test; it is no fractile of single values. The "
        f"{quantity.value_type} at {100.0 * CONFIDENCE:.0f} % confidence is {with_confidence:.4g}{unit} ({family}), "
        f"{100.0 * abs(1.0 - with_confidence / typed):.2g} % {side} the typed value."
    )
    return [Doubt("limit-of-the-mean", text, f"quantities.{quantity.name}")]


def _agree(a: float, b: float) -> bool:
    return math.isfinite(b) and abs(a - b) <= AGREES * abs(b)
