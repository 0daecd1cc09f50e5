"""Mean and standard deviation of basic variables as arguments of beta: the chain through own parameters."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.distributions.implicit import slopes_by_moments

Array = npt.NDArray[np.float64]


class Moment(NamedTuple):
    """A moment, its value, and the derivative by it of what depends on the own parameters."""

    name: str
    value: Array
    slope: Array


def by_moments(law: Distribution, by_parameter: Mapping[str, Array]) -> list[Moment]:
    """Return derivatives by mean and standard deviation, each with the other one held.

    Parameters
    ----------
    law : Distribution
        For an extreme or an intermittent action, the moments are those of its base.
    by_parameter : mapping of str to array
        Derivatives by every own parameter of its family.

    Returns
    -------
    list of Moment
        Empty where moments do not determine the parameters, the mean alone where it is enough. Thresholds, bounds
        and whatever else is given beside the moments are held.
    """
    family, values = law.family, law.values
    names = family.parameter_names
    free = tuple(i for i, name in enumerate(names) if name not in family.moments_keep)
    if law.is_constant or not family.moment_names or any(name not in by_parameter for name in names):
        return []
    with np.errstate(all="ignore"):
        found = slopes_by_moments(family.moment_slopes(values), free, len(family.moment_names))
        result = []
        for k, (name, value) in enumerate(zip(family.moment_names, family.moments(values), strict=False)):
            total = np.zeros(())
            for i in free:
                by_mean, by_sd, _ = found[i]
                total = total + by_parameter[names[i]] * (by_mean if k == 0 else by_sd)
            result.append(Moment(name, np.asarray(value), np.asarray(total)))
    return result
