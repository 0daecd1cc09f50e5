"""The common look of all figures: size, type, lines, colours, marks; and their files, the same byte for byte.

Colours were chosen to differ in lightness as well as in hue, so that they can
be told apart with any colour vision and, together with the marks, in grey.
"""

from __future__ import annotations

import io
from contextlib import AbstractContextManager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Array = NDArray[np.float64]

INK = "#1d2733"
GREY = "#6b7683"
PALE = "#d9dee3"
BLUE = "#1f4e8c"
OCHRE = "#d08a1d"
TEAL = "#4fa39a"
PLUM = "#7a2e5d"
SKY = "#7fb0dc"
SERIES = (BLUE, OCHRE, TEAL, PLUM, SKY, INK)
MARKS = ("o", "^", "s", "D", "v", "P")

MILLIMETRE = 1 / 25.4
RESOLUTION = 160
_MOST_TICKS, _TICK_ROOM = 6, 9.0
"""Most intervals between the ticks of an axis, and the least length of one in millimetres."""

_RC: dict[str, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": 7.5,
    "text.color": INK,
    "text.parse_math": False,  # text comes from users; a dollar sign is a dollar sign
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "axes.labelsize": 7.5,
    "axes.linewidth": 0.6,
    "axes.titlesize": 8.0,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.titley": 1.0,  # fixed, else every drawing measures all labels to find its place
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "axes.unicode_minus": True,
    "axes.xmargin": 0.04,
    "grid.color": PALE,
    "grid.linewidth": 0.5,
    "xtick.color": GREY,
    "ytick.color": GREY,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "legend.fontsize": 7.0,
    "legend.frameon": False,
    "legend.handletextpad": 0.5,
    "lines.linewidth": 1.0,
    "hatch.linewidth": 0.5,
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
    "svg.fonttype": "path",
    "svg.hashsalt": "calibrate",
    "path.simplify": True,
}

_OF_WINDOWS = frozenset({"backend", "backend_fallback", "interactive", "toolbar"})


@dataclass(frozen=True, slots=True)
class Rendered:
    """The two files of one figure."""

    svg: bytes
    png: bytes


def context() -> AbstractContextManager[None]:
    """Return the context in which figures are made, drawn and written."""
    import matplotlib as mpl

    # What a user's own matplotlib settings say must not change a file.
    defaults = {k: v for k, v in mpl.rcParamsDefault.items() if k not in _OF_WINDOWS}
    settings: dict[Any, Any] = {**defaults, **_RC}
    return mpl.rc_context(settings)


def figure(width_mm: float, height_mm: float) -> Figure:
    """Return an empty figure of a size on paper; use it inside :func:`context`."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width_mm * MILLIMETRE, height_mm * MILLIMETRE))


def panel(figure: Figure, left: float, bottom: float, width: float, height: float, **settings: Any) -> Axes:
    """Return axes at a place given in millimetres from the lower left corner of the figure."""
    from matplotlib.ticker import MaxNLocator

    w, h = figure.get_size_inches() / MILLIMETRE
    axes = figure.add_axes((left / w, bottom / h, width / w, height / h), **settings)
    # Half of the time of a drawing goes into ticks and their labels, and few of them read better.
    for axis, length in ((axes.xaxis, width), (axes.yaxis, height)):
        if axis.get_scale() == "linear":
            steps = max(3, min(_MOST_TICKS, int(length / _TICK_ROOM)))
            axis.set_major_locator(MaxNLocator(steps, steps=[1, 2, 2.5, 5, 10]))
    return axes


def bars(
    axes: Axes,
    left: Array,
    bottom: Array,
    width: Array | float,
    height: Array,
    colours: Any,
    edge: str,
    line: float,
) -> None:
    """Draw bars as one collection, many times faster than one patch each."""
    from matplotlib.collections import PolyCollection

    right, top = left + width, bottom + height
    corners = np.stack([[left, left, right, right], [bottom, top, top, bottom]], axis=-1).transpose(1, 0, 2)
    axes.add_collection(PolyCollection(list(corners), facecolors=colours, edgecolors=edge, linewidths=line))
    axes.update_datalim(corners.reshape(-1, 2))
    axes.autoscale_view()


def render(figure: Figure) -> Rendered:
    """Return the SVG and PNG files of a figure, without date and without version; use it inside :func:`context`."""
    svg, png = io.BytesIO(), io.BytesIO()
    figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": None})
    figure.savefig(
        png, format="png", dpi=RESOLUTION, metadata={"Software": None}, pil_kwargs={"compress_level": 2}
    )
    return Rendered(svg.getvalue(), png.getvalue())


def colour(index: int) -> str:
    """Return the colour of a series; they repeat."""
    return SERIES[index % len(SERIES)]


def mark(index: int) -> str:
    """Return the mark of a series; they repeat."""
    return MARKS[index % len(MARKS)]


def filled(index: int) -> bool:
    """Whether the mark of a series is filled: every second one is open, for print in grey."""
    return index % 2 == 0
