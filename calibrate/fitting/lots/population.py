"""What a variable stands for: a specimen of any lot, the mean of one new lot, or a specimen within a lot."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal, get_args

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.fitting.lots.result import LotScatter

StandsFor = Literal["whole population", "lot mean", "within a lot"]


@dataclass(frozen=True, slots=True)
class Population:
    """The distribution of what a variable stands for, by name and parameters.

    Attributes
    ----------
    stands_for : {"whole population", "lot mean", "within a lot"}
    family : str
        ``normal`` for scatter as measured, ``lognormal`` on the logarithmic scale, ``constant`` without scatter.
    parameters : mapping of str to float
        The family's own parameters, in the unit of the values.
    mean, sd : float
        Moments, in the unit of the values.
    doubts : tuple of Doubt
    """

    stands_for: StandsFor
    family: str
    parameters: Mapping[str, float]
    mean: float
    sd: float
    doubts: tuple[Doubt, ...] = ()


def population(
    scatter: LotScatter, stands_for: StandsFor, *, lot: str | None = None, where: str = "lots"
) -> Population:
    """Return the distribution of what a variable stands for.

    Parameters
    ----------
    scatter : LotScatter
    stands_for : {"whole population", "lot mean", "within a lot"}
        *whole population*: a specimen of a lot drawn at random, with the total scatter. Right where each element
        of a structure may come from another lot, and for a single element.
        *lot mean*: the mean of one new lot, with the scatter between lots only. Right where many elements of one
        lot act together, so that their own scatter averages out.
        *within a lot*: a specimen of one lot, with the scatter within lots only. Right where the lot is known.
    lot : str, optional
        For *within a lot*: which of the lots; its shrunken mean is used. Without it: a lot like the mean of all.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        Unknown kind or lot; a lot given for another kind; scatter that the sample does not tell.

    Notes
    -----
    The scatter is that of the estimates; their own uncertainty is not in it. On the logarithmic scale the mean of
    a lot is exp(mean + b + within²/2), so that lot means and the whole population have the same mean.
    """
    kinds = get_args(StandsFor)
    if stands_for not in kinds:
        raise InputError(
            Problem(
                f"A variable with lots stands for {', '.join(repr(k) for k in kinds)}; got {stands_for!r}.",
                suggestion=did_you_mean(str(stands_for), kinds),
            )
        )
    if lot is not None and stands_for != "within a lot":
        raise InputError(f"A lot is named ('{lot}'), but '{stands_for}' is about all lots.")
    location, sd, doubts = _location_and_sd(scatter, stands_for, lot, where)
    if sd == 0.0:
        text = (
            f"The scatter for '{stands_for}' is estimated as zero, so that the variable is a constant. An estimate "
            "of zero from few lots does not show that there is none: mind the upper end of its interval."
        )
        doubts = (*doubts, Doubt("no-scatter", text, where))
    return _distribution(scatter, stands_for, location, sd, doubts)


def _location_and_sd(
    scatter: LotScatter, stands_for: StandsFor, lot: str | None, where: str
) -> tuple[float, float, tuple[Doubt, ...]]:
    """Return mean and sd on the scale of the analysis."""
    if len(scatter.shares) == 1 and stands_for == "whole population":
        text = (
            "There is one lot only: its scatter is used for the whole population, which also has the unknown "
            "scatter between lots."
        )
        return scatter.mean, scatter.within_sd, (Doubt("one-lot", text, where),)
    sd = {
        "whole population": scatter.total_sd,
        "lot mean": scatter.between_sd,
        "within a lot": scatter.within_sd,
    }[stands_for]
    if math.isnan(sd):
        reason = "there is only one lot" if len(scatter.shares) == 1 else "every lot has one specimen"
        raise InputError(
            Problem(
                f"The scatter for '{stands_for}' cannot be estimated: {reason}.",
                suggestion="Use 'whole population', or test several specimens of several lots.",
            )
        )
    location = scatter.mean
    if lot is not None:
        if lot not in scatter.lots:
            raise InputError(Problem(f"There is no lot '{lot}'.", suggestion=did_you_mean(lot, scatter.lots)))
        location = scatter.shares[scatter.lots.index(lot)].shrunken_mean
    elif stands_for == "lot mean" and scatter.scale == "logarithmic":
        location += 0.5 * scatter.within_sd**2
    return location, sd, ()


def _distribution(
    scatter: LotScatter, stands_for: StandsFor, location: float, sd: float, doubts: tuple[Doubt, ...]
) -> Population:
    """Return family, parameters and moments."""
    if scatter.scale == "logarithmic":
        median = math.exp(location)
        mean = median * math.exp(0.5 * sd * sd)
        spread = mean * math.sqrt(math.expm1(sd * sd))
        family, parameters = "lognormal", {"median": median, "log_sd": sd}
    else:
        mean, spread = location, sd
        family, parameters = "normal", {"location": location, "scale": sd}
    if sd == 0.0:
        family, parameters = "constant", {"value": mean}
    return Population(stands_for, family, parameters, mean, spread, doubts)
