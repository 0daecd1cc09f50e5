"""Whether the threshold of exceedances was well chosen: mean excess and shape over a range of thresholds."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import numbers, style

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.study.exceedances import ExceedanceModel

CAPTION = (
    "Choice of the threshold: mean excess, and shape of the excesses, of the events above each threshold (line) with "
    "95 % intervals by their standard errors (bands). Dotted: the chosen threshold; dashed: what its fit implies above "
    "it. Where the model holds, both follow the dashed lines within their bands."
)
_WIDTH, _PANEL, _GAP = 84.0, 34.0, 7.0
_LEFT, _BOTTOM, _TOP = 15.0, 10.5, 5.0
SHAPES = (-1.2, 1.6)
"""The most that is shown of the interval of a shape."""


def threshold_figure(found: ExceedanceModel, *, label: str, unit: str) -> Figure:
    """Return the two panels, one above the other; use it inside ``style.context()``."""
    figure = style.figure(_WIDTH, _BOTTOM + 2.0 * _PANEL + _GAP + _TOP)
    below = style.panel(figure, _LEFT, _BOTTOM, _WIDTH - 18.0, _PANEL)
    above = style.panel(figure, _LEFT, _BOTTOM + _PANEL + _GAP, _WIDTH - 18.0, _PANEL, sharex=below)
    fit, life, stable = found.fit, found.mean_residual_life, found.stability
    higher = life.thresholds[life.thresholds >= fit.threshold]

    _band(above, life.thresholds, life.mean, life.lower, life.upper)
    if fit.shape < 1.0:
        implied = (fit.scale + fit.shape * (higher - fit.threshold)) / (1.0 - fit.shape)
        _implied(above, higher, implied)
    above.set_ylim(bottom=0.0)
    above.set_ylabel(f"mean excess ({unit})" if unit else "mean excess")
    above.set_title(
        f"{numbers.count(found.n, 'event')} above {numbers.significant(fit.threshold)} {unit}".rstrip()
    )
    above.tick_params(labelbottom=False)

    _band(below, stable.thresholds, stable.shape, *stable.shape_interval)
    _implied(below, higher, np.full(higher.size, fit.shape))
    low, high = below.get_ylim()
    below.set_ylim(max(low, SHAPES[0]), min(high, SHAPES[1]))
    below.set_ylabel("shape")
    below.set_xlabel(f"threshold of {label} ({unit})" if unit else f"threshold of {label}", parse_math=True)
    for axes in (above, below):
        axes.axvline(fit.threshold, color=style.INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=1.5)
        axes.grid(visible=True, which="major")
    return figure


def _band(
    axes: Axes,
    x: NDArray[np.float64],
    value: NDArray[np.float64],
    lower: NDArray[np.float64],
    upper: NDArray[np.float64],
) -> None:
    axes.fill_between(x, lower, upper, color=style.PALE, linewidth=0.0, zorder=1)
    axes.plot(x, value, color=style.BLUE, linewidth=1.2, zorder=2)


def _implied(axes: Axes, x: NDArray[np.float64], value: NDArray[np.float64]) -> None:
    axes.plot(x, value, color=style.OCHRE, linewidth=1.0, linestyle=(0, (4, 2)), zorder=3)
