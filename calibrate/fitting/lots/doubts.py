"""Reservations about scatter by lots."""

from __future__ import annotations

from calibrate.errors import Doubt
from calibrate.fitting.lots.grouping import Grouped
from calibrate.fitting.lots.result import Interval

FEW_LOTS = 3
"""Fewer lots than this say next to nothing of the scatter between lots (common practice, no source)."""


def lot_doubts(
    g: Grouped, intraclass: float, interval: Interval, effective_n: float, where: str
) -> tuple[Doubt, ...]:
    """Return what a reader of the results must know of the lots."""
    found: list[tuple[str, str]] = []
    single = int((g.sizes == 1).sum())
    if g.k == 1:
        text = (
            f"All {g.n} specimens come from one lot. One lot cannot represent production: the scatter between lots "
            "is unknown and not part of any number here."
        )
        found.append(("one-lot", text))
    elif g.k < FEW_LOTS:
        text = f"There are only {g.k} lots: the scatter between lots rests on their one difference."
        found.append(("few-lots", text))
    if single == g.n:
        text = (
            "Every lot has one specimen: scatter between and within lots cannot be told apart, only their total is "
            "known."
        )
        found.append(("single-specimen-lots", text))
    elif single:
        text = (
            f"{single} of {g.k} lots {'has' if single == 1 else 'have'} one specimen only and tell"
            f"{'s' if single == 1 else ''} nothing of the scatter within lots."
        )
        found.append(("single-specimen-lots", text))
    if g.k > 1 and single < g.n and g.within == 0.0:
        text = (
            "No lot shows any scatter within itself. Check whether averages were recorded in place of specimens, or "
            "values were rounded."
        )
        found.append(("no-scatter-within-lots", text))
    if g.k > 1 and interval[0] > 0.0:
        text = (
            f"{intraclass:.0%} of the variance is between lots; the effective number of specimens is about "
            f"{effective_n:.0f}, not {g.n}. Specimens of one lot are not independent: a fit that ignores the lots "
            "claims too much."
        )
        found.append(("lots-matter", text))
    return tuple(Doubt(code, message, where) for code, message in found)
