"""A shape of extreme values that the records of several stations share."""

from __future__ import annotations

from dataclasses import dataclass

from calibrate.actions.maxima import FEW_BLOCKS
from calibrate.actions.pooling import PooledShape, fit_pooled_shape
from calibrate.errors import Doubt
from calibrate.study.maxima import observed_blocks
from calibrate.study.model import Study, Variable

Pools = dict[tuple[str, ...], PooledShape]
"""What was pooled in a run, by names of records in the order of the study."""


@dataclass(frozen=True, slots=True, eq=False)
class PooledStations:
    """Which records share a shape, and what was found.

    Attributes
    ----------
    records : tuple of str
        In the order of the study.
    found : PooledShape
        Fits of the stations in the unit of each.
    doubts : tuple of Doubt
        Placed at the variable.
    """

    records: tuple[str, ...]
    found: PooledShape
    doubts: tuple[Doubt, ...]


def pooled_stations(study: Study, variable: Variable, pools: Pools) -> PooledStations | None:
    """Return the shape that a variable takes from several stations; None for a variable with a shape of its own.

    Parameters
    ----------
    pools : dict
        Added to, so that variables which name the same records share one estimate.

    Raises
    ------
    InputError
        A station has too few maxima, or the likelihood of all has no maximum.
    """
    if not variable.pooled_shape:
        return None
    names = tuple(name for name in study.records if name in variable.pooled_shape)
    if names not in pools:
        pools[names] = fit_pooled_shape(
            {name: observed_blocks(study.records[name], None).observations for name in names}
        )
    found = pools[names]
    where = f"variables.{variable.name}"
    doubts = [Doubt(d.code, d.message, where) for d in found.doubts]
    if variable.predictive:
        message = (
            "The predictive distribution carries the uncertainty of location and scale; that of the pooled shape "
            f"(standard error {found.standard_error:.2g}) is not carried."
        )
        doubts.append(Doubt("pooled-shape-not-carried", message, where))
    return PooledStations(names, found, tuple(doubts))


def of_one_station(doubts: tuple[Doubt, ...], blocks: int) -> tuple[Doubt, ...]:
    """Return doubts about a short record in the words for a station whose shape is pooled."""
    message = (
        f"Only {blocks} blocks at this station, fewer than {FEW_BLOCKS}: its location and scale rest on them; its "
        "shape rests on all stations that were pooled."
    )
    return tuple(Doubt(d.code, message, d.where) if d.code == "few-blocks" else d for d in doubts)
