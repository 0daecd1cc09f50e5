"""One check of the ladder: what is compared, by which measure, and what is allowed."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

Measure = Literal["absolute", "relative", "half intervals"]

ABSOLUTE: Measure = "absolute"
RELATIVE: Measure = "relative"
HALF_INTERVALS: Measure = "half intervals"


@dataclass(frozen=True, slots=True)
class Figures:
    """The two figures of a check.

    Attributes
    ----------
    expected : float
        By a route that shares nothing with the tool but general libraries.
    computed : float
        By the tool.
    half_interval : float
        Half the width of the confidence interval that the tool gives, where the measure is ``half intervals``.
    """

    expected: float
    computed: float
    half_interval: float = 1.0


@dataclass(frozen=True, slots=True)
class LadderRow:
    """What a check found, at full precision.

    Attributes
    ----------
    name : str
        Short and unique.
    what : str
        One sentence.
    source : str
        Of the expected value.
    expected, computed : float
        NaN where the tool raised an error.
    difference : float
        Size of computed - expected in the measure.
    measure : str
        ``absolute``, ``relative``, or ``half intervals``: of the confidence interval of a simulation.
    tolerance : float
        Largest difference that passes, in the same measure.
    reason : str
        Why this tolerance.
    passed : bool
    error : str
        What was raised; empty otherwise.
    """

    name: str
    what: str
    source: str
    expected: float
    computed: float
    difference: float
    measure: Measure
    tolerance: float
    reason: str
    passed: bool
    error: str = ""


@dataclass(frozen=True, slots=True)
class Check:
    """A problem with a known answer; attributes as in :class:`LadderRow`.

    Attributes
    ----------
    figures : callable
        Computes both figures.
    """

    name: str
    what: str
    source: str
    figures: Callable[[], Figures]
    measure: Measure
    tolerance: float
    reason: str

    def row(self) -> LadderRow:
        """Compute, compare, and return what was found; an error of the tool is a check that did not pass."""
        error = ""
        try:
            found = self.figures()
        except Exception as raised:
            # Whatever is wrong with an installation must be told of this check, and leave the others to be made.
            found = Figures(float("nan"), float("nan"))
            error = f"{type(raised).__name__}: {raised}"
        units = {ABSOLUTE: 1.0, RELATIVE: abs(found.expected), HALF_INTERVALS: found.half_interval}
        unit, gap = units[self.measure], abs(found.computed - found.expected)
        difference = gap / unit if unit > 0.0 else float("nan")
        return LadderRow(
            self.name,
            self.what,
            self.source,
            found.expected,
            found.computed,
            difference,
            self.measure,
            self.tolerance,
            self.reason,
            difference <= self.tolerance,
            error,
        )
