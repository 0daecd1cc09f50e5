"""The families by name; a new one is one file and one line here."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from calibrate.distributions.distribution import Distribution
from calibrate.distributions.families.beta import Beta
from calibrate.distributions.families.constant import Constant
from calibrate.distributions.families.exponential import Exponential
from calibrate.distributions.families.frechet import Frechet
from calibrate.distributions.families.gamma import Gamma
from calibrate.distributions.families.gev import Gev
from calibrate.distributions.families.gumbel import Gumbel, GumbelMin
from calibrate.distributions.families.log_student_t import LogStudentT
from calibrate.distributions.families.lognormal import Lognormal
from calibrate.distributions.families.lognormal3 import Lognormal3
from calibrate.distributions.families.normal import Normal
from calibrate.distributions.families.student_t import StudentT
from calibrate.distributions.families.truncated_normal import TruncatedNormal
from calibrate.distributions.families.uniform import Uniform
from calibrate.distributions.families.weibull import Weibull
from calibrate.distributions.families.weibull3 import Weibull3
from calibrate.distributions.family import Family
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.registry import registered

FAMILIES: Mapping[str, Family] = registered(
    (
        Normal(),
        Lognormal(),
        Gumbel(),
        GumbelMin(),
        Weibull(),
        Frechet(),
        Gamma(),
        Uniform(),
        Exponential(),
        Weibull3(),
        Lognormal3(),
        Gev(),
        Beta(),
        StudentT(),
        LogStudentT(),
        TruncatedNormal(),
        Constant(),
    )
)


def family_names() -> tuple[str, ...]:
    """Return the names of all families, in the order of the documentation."""
    return tuple(FAMILIES)


def family(name: str) -> Family:
    """Return the family of this name.

    Raises
    ------
    InputError
        No family has that name; the message names the nearest and lists all.
    """
    try:
        return FAMILIES[name]
    except (KeyError, TypeError):
        names = ", ".join(FAMILIES)
        hint = did_you_mean(str(name), FAMILIES)
        known = "" if hint.startswith("Known") else f" Known: {names}."
        raise InputError(Problem(f"there is no family '{name}'.", suggestion=f"{hint}{known}")) from None


def distribution(name: str, /, **arguments: Any) -> Distribution:
    """Return a distribution from moments or from a family's own parameters.

    Parameters
    ----------
    name : str
        Name of the family, such as ``"lognormal"``.
    **arguments : float or array
        ``mean`` with ``cov`` or ``sd``, or own parameters; arrays have one element per situation, shape (n,).

    Returns
    -------
    Distribution
        Immutable; parameters broadcast over situations.

    Raises
    ------
    InputError
        The family or an argument is unknown, something is missing or contradictory, or a value is not
        allowed.

    Examples
    --------
    >>> d = distribution("weibull", mean=55.0, cov=0.15)
    >>> round(float(d.sd), 6)
    8.25
    """
    member = family(name)
    return Distribution.of(member, tuple(member.solve(arguments).values()))
