"""The tail alone, on a logarithmic scale of probability: where a good fit in the middle says little."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.special import ndtr

from calibrate.fitting.paper import positions
from calibrate.report import numbers, style

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.figure import Figure

    from calibrate.fitting import Fit

CAPTION = (
    "The tail that decides, all candidates within 10 of the smallest AICc. Marks: ordered values; dotted: the range of "
    "design points. Between the last mark and the design points only the family speaks."
)
_WIDTH, _HEIGHT = 84.0, 60.0
MOST_CURVES = 5
MOST_POINTS = 400


def tail_figure(
    fits: Sequence[Fit],
    *,
    lower: bool,
    label: str,
    unit: str,
    design: tuple[float, float] | None = None,
) -> Figure:
    """Return one tail of a sample with its candidates; use it inside ``style.context()``.

    Parameters
    ----------
    fits : sequence of Fit
        Converged, the chosen one first.
    lower : bool
        Lower tail (non-exceedance), else upper tail (exceedance).
    label, unit : str
    design : (float, float), optional
        Smallest and largest |u| of the design points, in standard normal space.
    """
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 17.0, 10.5, _WIDTH - 20.0, _HEIGHT - 15.5)
    values, below = positions(fits[0].observations)
    tail = below if lower else 1.0 - below
    n = fits[0].n
    deepest = min(0.2 / n, 1e-4 if design is None else float(ndtr(-design[1])) / 3.0)
    u = np.linspace(0.0, -float(_u(deepest)), 160) * (-1.0 if lower else 1.0)
    probability = ndtr(-np.abs(u))
    for k, fit in enumerate(fits[:MOST_CURVES]):
        assert fit.distribution is not None
        axes.plot(
            fit.distribution.x(u),
            probability,
            color=style.colour(k),
            linewidth=1.5 if k == 0 else 0.9,
            linestyle="-" if k == 0 else (0, (5, 1 + k)),
            label=fit.family,
            zorder=2.5 - 0.1 * k,
        )
    inner = np.flatnonzero(tail <= 0.5)
    inner = inner[:MOST_POINTS] if lower else inner[-MOST_POINTS:]
    axes.plot(
        values[inner], tail[inner], linestyle="none", marker="o", markersize=3.0, markerfacecolor="white",
        markeredgecolor=style.INK, markeredgewidth=0.7, zorder=3,
    )  # fmt: skip
    if design is not None:
        for at in {float(ndtr(-d)) for d in design}:
            axes.axhline(at, color=style.INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=1.5)
    axes.set_yscale("log")
    axes.set_ylim(deepest, 0.6)
    decades = np.arange(-1, int(np.floor(np.log10(deepest))), -1)
    axes.set_yticks([10.0**d for d in decades], [numbers.probability(10.0**d) for d in decades])
    axes.minorticks_off()
    axes.set_xlabel(f"{label} ({unit})" if unit else label, parse_math=True)
    axes.set_ylabel("probability of not being exceeded" if lower else "probability of exceedance")
    axes.set_title(f"{'Lower' if lower else 'Upper'} tail, n = {n}")
    axes.legend(loc="lower right" if lower else "lower left", fontsize=6.5)
    axes.grid(visible=True, which="major")
    return figure


def _u(probability: float) -> float:
    from scipy.special import ndtri

    return float(ndtri(probability))
