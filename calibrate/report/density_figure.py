"""Histogram of a sample with the densities of its candidates."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import style

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.figure import Figure

    from calibrate.fitting import Fit

CAPTION = "Histogram of the values known exactly, and the densities of the candidates."
_WIDTH, _HEIGHT = 84.0, 56.0
MOST_CURVES = 4


def density_figure(fits: Sequence[Fit], *, label: str, unit: str) -> Figure:
    """Return histogram and densities, the chosen fit first; use it inside ``style.context()``."""
    figure = style.figure(_WIDTH, _HEIGHT)
    axes = style.panel(figure, 13.0, 10.5, _WIDTH - 16.0, _HEIGHT - 15.5)
    seen = fits[0].observations
    values = seen.values[seen.exact] if seen.n_exact else seen.values
    share = values.size / seen.n
    edges = np.histogram_bin_edges(values, bins=_bins(values.size))
    heights, _, _ = axes.hist(
        values, bins=list(edges), weights=np.full(values.size, share / (values.size * (edges[1] - edges[0]))),
        color=style.PALE, edgecolor=style.GREY, linewidth=0.5, zorder=1,
    )  # fmt: skip
    assert fits[0].distribution is not None
    low, high = (float(fits[0].distribution.x(u)) for u in (-3.2, 3.2))
    x = np.linspace(min(low, edges[0]), max(high, edges[-1]), 240)
    top = 0.0
    for k, fit in enumerate(fits[:MOST_CURVES]):
        assert fit.distribution is not None
        density = np.asarray(fit.distribution.pdf(x))
        finite = np.where(np.isfinite(density), density, np.nan)
        top = max(top, float(np.nanquantile(finite, 0.98)) if k else float(np.nanmax(finite)))
        axes.plot(
            x, finite, color=style.colour(k), linewidth=1.5 if k == 0 else 0.9,
            linestyle="-" if k == 0 else (0, (5, 1 + k)), label=fit.family, zorder=2,
        )  # fmt: skip
    axes.set_ylim(0.0, 1.12 * max(top, float(np.max(heights))))
    axes.set_yticks([])
    axes.set_ylabel("density")
    axes.set_xlabel(f"{label} ({unit})" if unit else label, parse_math=True)
    axes.set_title(f"n = {seen.n}")
    axes.legend(loc="upper right", fontsize=6.5)
    return figure


def _bins(n: int) -> int:
    """Return a count of bins by Rice's rule, within what a small figure shows."""
    return int(np.clip(np.ceil(2.0 * n ** (1.0 / 3.0)), 4, 40))
