"""Checks of what a person gives to a family, with messages that say what is allowed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from calibrate.distributions.parameter import POSITIVE, REAL, Array, Domain, Moments
from calibrate.errors import InputError, Problem, did_you_mean

if TYPE_CHECKING:
    from calibrate.distributions.family import Family

MOMENTS = ("mean", "cov", "sd")

# What people call these elsewhere; spelling alone would not lead from one to the other.
_OTHER_NAMES = {
    "std": "sd", "stdev": "sd", "stddev": "sd", "std_dev": "sd", "sigma": "sd", "standard_deviation": "sd",
    "mu": "mean", "average": "mean", "expectation": "mean",
    "cv": "cov", "v": "cov", "coefficient_of_variation": "cov",
    "loc": "location", "mode": "location", "df": "freedom", "nu": "freedom", "dof": "freedom",
    "min": "lower", "minimum": "lower", "max": "upper", "maximum": "upper", "shift": "threshold",
    "zeta": "log_sd", "sigma_ln": "log_sd", "k": "shape", "xi": "shape", "alpha": "shape_1", "beta": "shape_2",
}  # fmt: skip


def refuse(name: str, message: str, suggestion: str | None = None) -> InputError:
    """Return the error for a family, ready to raise."""
    return InputError(Problem(f"{name}: {message}", suggestion=suggestion))


def first_bad(good: Any, value: Array) -> str | None:
    """Describe the first element of ``value`` that is not good: its number, and its place in an array."""
    good, value = np.broadcast_arrays(np.asarray(good), value)
    if good.all():
        return None
    if value.ndim == 0:
        return f"{float(value):g}"
    at = int(np.argmin(good.ravel()))
    return f"{float(value.ravel()[at]):g} in situation {at + 1}"


def require(name: str, what: str, good: Any, value: Array, rule: str, suggestion: str | None = None) -> None:
    """Raise unless every element is good; ``rule`` completes "must be ..."."""
    bad = first_bad(good, value)
    if bad is not None:
        raise refuse(name, f"{what} must be {rule}; got {bad}.", suggestion)


def described(sets: Sequence[Sequence[str]]) -> str:
    """Return the accepted sets of arguments as a phrase."""
    texts = [s[0] if len(s) == 1 else f"{', '.join(s[:-1])} and {s[-1]}" for s in sets]
    return texts[0] if len(texts) == 1 else f"{'; '.join(texts[:-1])}; or {texts[-1]}"


def as_array(name: str, argument: str, value: Any) -> Array:
    """Return a float64 array, or raise for what is no number."""
    try:
        raw = np.asarray(value)
    except ValueError:  # rows of different lengths
        raw = np.asarray(None)
    if raw.dtype.kind not in "iuf":
        shown = repr(value)
        shown = shown if len(shown) <= 40 else f"{shown[:37]}..."
        raise refuse(name, f"{argument} must be a number or an array of numbers; got {shown}.")
    return raw.astype(np.float64, copy=True)


def checked(family: Family, arguments: Mapping[str, Any]) -> dict[str, Array]:
    """Return the arguments as arrays with defaults filled in, or raise with everything that is wrong."""
    problems = list(_wrong_names(family, tuple(arguments)))
    given: dict[str, Array] = {}
    for argument, value in arguments.items():
        if not _known(family, argument):
            continue
        try:
            given[argument] = as_array(family.name, argument, value)
        except InputError as error:
            problems += error.problems
        else:
            problems += _out_of_domain(family, argument, given[argument])
    if problems:
        raise InputError(problems)
    try:
        np.broadcast_shapes(*(a.shape for a in given.values()))
    except ValueError:
        lengths = ", ".join(f"{n} {a.size}" for n, a in given.items() if a.ndim)
        message = "arguments differ in their number of situations:"
        raise refuse(family.name, f"{message} {lengths}.") from None
    if "mean" in given and "cov" in given:
        require(
            family.name, "mean", given["mean"] != 0, given["mean"], "different from zero when cov is given",
            "Give sd instead of cov.",
        )  # fmt: skip
    for q in family.parameters:
        if q.name not in given and q.default is not None:
            given[q.name] = np.asarray(q.default)
    return given


def moments_of(given: Mapping[str, Array], keep: Sequence[str]) -> Moments:
    """Return the moments from checked arguments; sd and cov are NaN when only the mean was given."""
    mean = given["mean"]
    kept = tuple(given[n] for n in keep)
    if "cov" in given:
        return Moments(mean, given["cov"] * np.abs(mean), given["cov"], kept)
    if "sd" in given:
        with np.errstate(divide="ignore"):
            return Moments(mean, given["sd"], given["sd"] / np.abs(mean), kept)
    return Moments(mean, np.asarray(np.nan), np.asarray(np.nan), kept)


def _known(family: Family, argument: str) -> bool:
    return argument in family.parameter_names or argument in _moment_arguments(family)


def _moment_arguments(family: Family) -> tuple[str, ...]:
    return {0: (), 1: ("mean",), 2: MOMENTS}[len(family.moment_names)]


def _wrong_names(family: Family, names: tuple[str, ...]) -> list[Problem]:
    """Return what is wrong with the set of names."""
    takes = f"It takes {described(family.argument_sets())}."
    known = (*_moment_arguments(family), *family.parameter_names)
    problems = []
    for argument in names:
        if argument in known:
            continue
        if argument in MOMENTS:
            problems.append(Problem(f"{family.name}: {argument} cannot be given.", suggestion=takes))
            continue
        alias = _OTHER_NAMES.get(argument.casefold())
        hint = f"Did you mean '{alias}'?" if alias in known else did_you_mean(argument, known)
        problems.append(
            Problem(f"{family.name}: unknown argument '{argument}'.", suggestion=f"{hint} {takes}")
        )
    if problems:
        return problems
    moments = [a for a in MOMENTS if a in names]
    if "cov" in moments and "sd" in moments:
        return [Problem(f"{family.name}: cov and sd are both given.", suggestion="Give one of them.")]
    replaced = [q.name for q in family.parameters if q.name not in family.moments_keep and q.name in names]
    if moments and replaced:
        text = (
            f"{family.name}: {' and '.join(moments)} cannot be given together with {' and '.join(replaced)}."
        )
        return [Problem(text, suggestion=takes)]
    if moments:
        needed = {"mean", *(s for s in family.argument_sets()[0] if s in family.moments_keep)}
        missing = [a for a in family.argument_sets()[0] if a in needed and a not in names]
        if len(family.moment_names) == 2 and "cov" not in moments and "sd" not in moments:
            missing.append("cov or sd")
    else:
        missing = [a for a in family.argument_sets()[-1] if a not in names]
    if missing:
        verb = "is" if len(missing) == 1 else "are"
        return [Problem(f"{family.name}: {' and '.join(missing)} {verb} missing.", suggestion=takes)]
    return []


def _out_of_domain(family: Family, argument: str, value: Array) -> list[Problem]:
    domain: Domain = REAL
    suggestion = None
    if argument in {"sd", "cov"}:
        domain = POSITIVE
        suggestion = "Use the family 'constant' for a value without scatter." if np.any(value == 0) else None
    elif argument == "mean":
        domain = POSITIVE if family.mean_positive else REAL
        suggestion = "Use a family without that limit, such as 'normal'." if family.mean_positive else None
    else:
        domain = next(q.domain for q in family.parameters if q.name == argument)
    bad = first_bad(domain.contains(value) & (np.isfinite(value) | domain.infinite), value)
    if bad is None:
        return []
    text = f"{family.name}: {argument} must be {domain}; got {bad}."
    return [Problem(text, suggestion=suggestion)]
