"""Likelihood of one tail: what lies beyond a fraction of the order statistics only counts as lying there."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from typing import ClassVar

import numpy as np

from calibrate.errors import InputError
from calibrate.fitting.censored import censored_likelihood
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import LEFT, RIGHT, Method
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations

SOURCE = (
    "censoring of the other tail as timber practice does (ASTM D5457, recalled from memory; common practice)"
)


class LowerTail(Method):
    """The smallest values as they are; the rest only as larger than the last of them."""

    name = "lower_tail"
    title = "likelihood of the lower tail"
    source = SOURCE
    honours = frozenset({RIGHT})
    options: ClassVar[Mapping[str, str]] = {
        "fraction": "share of the values that make the tail, above 0 up to 1"
    }
    required = ("fraction",)
    lower = True

    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Return the maximum of the likelihood of the tail."""
        if not model.regular:
            return Estimate.failed(
                free, f"the family '{model.family}' is determined by its largest and smallest values"
            )
        tail, count = self.tail(seen, options["fraction"], len(free))
        found = censored_likelihood(tail, model, fixed, free)
        if found.reason:
            return found
        side = "smallest" if self.lower else "largest"
        message = (
            f"Only the {count} {side} of {seen.n} values shaped this fit; log-likelihood and AICc are those of the "
            "tail and compare only with fits of the same tail."
        )
        return replace(found, notes=(*found.notes, ("tail-only", message)))

    def tail(self, seen: Observations, fraction: float, parameters: int) -> tuple[Observations, int]:
        """Return the sample with the other tail censored at the last value of this one, and the size of the tail."""
        if not 0.0 < fraction <= 1.0:
            raise InputError(f"The fraction of the tail must lie above 0 and not above 1; got {fraction:g}.")
        values = seen.values
        order = np.sort(values if self.lower else -values)
        share = math.ceil(fraction * seen.n * (1.0 - 1e-12))  # 0.07 of 100 values are 7, not 8
        count = min(max(share, parameters + 1), seen.n)
        cut = float(order[count - 1]) if self.lower else -float(order[count - 1])
        if self.lower:
            beyond = values > cut
            lower, upper = np.where(beyond, cut, seen.lower), np.where(beyond, np.inf, seen.upper)
        else:
            beyond = values < cut
            lower, upper = np.where(beyond, -np.inf, seen.lower), np.where(beyond, cut, seen.upper)
        return Observations(lower, upper), count


class UpperTail(LowerTail):
    """The largest values as they are; the rest only as smaller than the last of them."""

    name = "upper_tail"
    title = "likelihood of the upper tail"
    honours = frozenset({LEFT})
    lower = False
