"""A sample as it came: every specimen in the order of the file, by lot, suspects and bounds marked."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.report import style

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calibrate.records import Sample
    from calibrate.records.screening import Screening

MOST_POINTS = 3000
MOST_LOTS = 12
CAPTION = (
    "Specimens in the order of the file, by lot. Triangles: known by a bound only (pointing to where the value lies); "
    "ringed: named by screening; line: mean of each lot's exact values."
)
_WIDTH, _HEIGHT = 84.0, 60.0


def sample_figure(sample: Sample, screening: Screening, *, label: str, unit: str) -> Figure:
    """Return the specimens of one sample; use it inside ``style.context()``."""
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 15.0, 10.5, _WIDTH - 18.0, _HEIGHT - 15.5)
    seen = sample.observations
    place, ticks = _places(sample)
    step = max(1, seen.n // MOST_POINTS)
    shown = np.arange(0, seen.n, step)
    size = 3.2 if seen.n <= 80 else 2.2 if seen.n <= 400 else 1.2
    for mask, mark, filled in (
        (seen.exact, "o", False),
        (seen.right, "^", True),
        (seen.left, "v", True),
        (seen.interval, "D", True),
    ):
        rows = shown[mask[shown]]
        axes.plot(
            place[rows],
            seen.values[rows],
            linestyle="none",
            marker=mark,
            markersize=size,
            markerfacecolor=style.OCHRE if filled else "white",
            markeredgecolor=style.OCHRE if filled else style.INK,
            markeredgewidth=0.7,
            zorder=3,
        )
    _means(axes, sample, place)
    _suspects(axes, sample, screening, place)
    axes.set_ylabel(f"{label} ({unit})" if unit else label, parse_math=True)
    if ticks:
        axes.set_xticks([t for t, _ in ticks], [name for _, name in ticks])
        axes.set_xlabel("lot")
    else:
        axes.set_xlabel("specimen, in the order of the file")
    axes.set_title(f"n = {seen.n}" + (f", {seen.n - seen.n_exact} known by bounds" if seen.censored else ""))
    axes.grid(visible=True, axis="y")
    axes.margins(x=0.03, y=0.08)
    return figure


def _lots(sample: Sample) -> NDArray[np.object_] | None:
    lots = sample.labels.get("lot")
    if lots is None or not 1 < len(dict.fromkeys(lots)) <= MOST_LOTS:
        return None
    return lots


def _places(sample: Sample) -> tuple[NDArray[np.float64], list[tuple[float, str]]]:
    """Return the abscissa of every specimen: its number, or its place within its lot."""
    lots = _lots(sample)
    n = sample.observations.n
    if lots is None:
        return np.arange(1, n + 1, dtype=np.float64), []
    place = np.empty(n)
    ticks = []
    for k, name in enumerate(dict.fromkeys(lots)):
        rows = np.flatnonzero(lots == name)
        spread = np.linspace(-0.32, 0.32, rows.size) if rows.size > 1 else np.zeros(1)
        place[rows] = k + spread
        text = str(name)
        ticks.append((float(k), text if len(text) <= 8 else text[:7] + "…"))
    return place, ticks


def _means(axes: Axes, sample: Sample, place: NDArray[np.float64]) -> None:
    lots = _lots(sample)
    if lots is None:
        return
    seen = sample.observations
    for name in dict.fromkeys(lots):
        rows = np.flatnonzero((lots == name) & seen.exact)
        if rows.size:
            at = np.round(place[rows].mean())
            axes.plot(
                [at - 0.4, at + 0.4],
                [seen.values[rows].mean()] * 2,
                color=style.BLUE,
                linewidth=1.1,
                zorder=2,
            )


def _suspects(axes: Axes, sample: Sample, screening: Screening, place: NDArray[np.float64]) -> None:
    named = sorted(
        {i for f in screening.findings if f.level == "doubt" and len(f.specimens) <= 12 for i in f.specimens}
    )
    if not named:
        return
    axes.plot(
        place[named],
        sample.observations.values[named],
        linestyle="none",
        marker="o",
        markersize=7.5,
        markerfacecolor="none",
        markeredgecolor=style.PLUM,
        markeredgewidth=1.0,
        zorder=4,
    )
