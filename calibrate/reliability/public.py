"""FORM for people: names, broadcasting, and messages about what does not fit together."""

from __future__ import annotations

import inspect
import math
import operator
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution, Extreme, maximum_of, minimum_of
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import Expression, ExpressionError, parse, parse_comparison
from calibrate.reliability.correlated_pairs import CorrelatedPair, nataf_correlation
from calibrate.reliability.form import form
from calibrate.reliability.limit_state import CallableLimitState, ExpressionLimitState, LimitState
from calibrate.reliability.problem import Problem as LimitStateProblem
from calibrate.reliability.result import Reliability

Array = npt.NDArray[np.float64]
Shape = tuple[int, ...]


@dataclass(frozen=True, slots=True, eq=False)
class FormResult:
    """What :func:`calibrate.form` returns; every array has the broadcast shape of its arguments.

    NaN stands for what a situation without design point does not have.

    Attributes
    ----------
    beta : array
        Reliability index, negative when the medians fail.
    failure_probability : array
        First-order failure probability Phi(-beta).
    design_point : mapping of str to array
        The design point in physical units, by variable.
    sensitivity : mapping of str to array
        Sensitivity factors alpha, positive for resistances; the design value of an independent variable is
        F^-1(Phi(-alpha beta)). Of correlated variables they belong to independent standard normal ones behind them,
        in the order in which the variables are given (u* = -alpha beta, z* = L u* with the factor L of the
        correlation matrix).
    converged : bool array
        Whether there is a beta.
    status : array of str
        ``converged``, ``several design points``, ``no failure region within reach`` or
        ``not converged: <reason>``.
    iterations : int array
        Evaluations of limit state and gradient on the way to the design point.
    """

    beta: Array
    failure_probability: Array
    design_point: Mapping[str, Array]
    sensitivity: Mapping[str, Array]
    converged: npt.NDArray[np.bool_]
    status: npt.NDArray[Any]
    iterations: npt.NDArray[np.int64]
    standard_point: Mapping[str, Array]
    """The design point in standard normal space, by variable."""
    gradient_norm: Array
    """Length of dg/du at the design point: d beta/d p = (dg/dp at fixed u) / gradient_norm."""


def public_form(
    limit_state: str | Callable[..., Any],
    variables: Mapping[str, Distribution],
    correlation: Mapping[tuple[str, str], float] | None = None,
    quantities: Mapping[str, npt.ArrayLike] | None = None,
    workers: int = 1,
    start: FormResult | None = None,
    gradient: Callable[..., Mapping[str, Any]] | None = None,
    solver: str | None = None,
) -> FormResult:
    """Find reliability index and design point by FORM, for one situation or for many at once.

    Parameters
    ----------
    limit_state : str or callable
        An expression g, positive when safe, such as ``"R - S"``; a comparison that holds when safe, such as
        ``"R >= S"``; or a function ``g(**names) -> array`` that works elementwise on one-dimensional arrays of any
        length.
    variables : mapping of str to Distribution
        The basic variables; their parameters may be arrays, one element for each situation.
    correlation : mapping, optional
        Product-moment coefficients by pair of names; other pairs are independent. They are those of the physical
        values (Nataf model).
    quantities : mapping, optional
        Deterministic names, numbers or arrays that broadcast with the parameters.
    workers : int
        Number of threads, at least 1.
    start : FormResult, optional
        A previous result of the same variables and shape, from whose design points to continue.
    gradient : callable, optional
        For a function: ``gradient(**names) -> mapping`` from each basic variable to dg/dx. Without it derivatives
        are central differences.
    solver : str, optional
        Another way to find the design points, for cross-checks: ``"gradient projection"`` or ``"slsqp"``. The usual
        one is ``"hasofer-lind-rackwitz-fiessler"``, which alone uses ``workers``.

    Returns
    -------
    FormResult
        Arrays of the broadcast shape, ``()`` when everything is scalar. A situation without design point has NaN
        and a status in words.

    Raises
    ------
    InputError
        Names, shapes or values do not fit together, an expression is wrong, or a function returns something else
        than an array of the shape of its arguments.

    Examples
    --------
    >>> import calibrate
    >>> r = calibrate.form(
    ...     "R - S",
    ...     {"R": calibrate.distribution("normal", mean=350.0, sd=35.0),
    ...      "S": calibrate.distribution("normal", mean=200.0, sd=[40.0, 50.0])},
    ... )
    >>> r.beta.round(6)
    array([2.822163, 2.45765 ])
    """
    for what, given in (("variables", variables), ("quantities", quantities), ("correlation", correlation)):
        if given is not None and not isinstance(given, Mapping):
            raise InputError(f"{what}: must be a mapping; got {given!r}.")
    fixed = _quantities(quantities or {})
    _check_variables(variables, fixed)
    pairs = _pairs(correlation or {}, variables)
    threads = _threads(workers)
    shape = _shape(variables, fixed)
    n = math.prod(shape)
    flat = {name: _flat(value, shape) for name, value in fixed.items()}
    distributions = tuple(_spread(d, shape) for d in variables.values())
    names = tuple(variables)
    state = _limit_state(limit_state, names, flat, gradient)
    begin = None if start is None else _start(start, names, shape)
    dependence = nataf_correlation(pairs, names, distributions, n)
    if solver is None:
        found = form(state, distributions, n, correlation=dependence, start=begin, workers=threads)
    else:
        from calibrate.reliability.solvers import solve

        found = solve(LimitStateProblem(state, distributions, n, dependence), solver, begin)
    return _result(found, shape)


def _threads(workers: Any) -> int:
    try:
        threads = operator.index(workers)
    except TypeError:
        threads = 0
    if threads < 1:
        raise InputError(f"workers must be a whole number of at least 1; got {workers!r}.")
    return threads


def _quantities(given: Mapping[str, npt.ArrayLike]) -> dict[str, Array]:
    quantities = {}
    for name, value in given.items():
        array = np.asarray(value)
        if array.dtype.kind not in "iuf":
            raise InputError(f"quantities: '{name}' must be a number or an array of numbers; got {value!r}.")
        array = array.astype(np.float64)
        if not np.all(np.isfinite(array)):
            raise InputError(f"quantities: '{name}' must be finite; got {value!r}.")
        quantities[name] = array
    return quantities


def _check_variables(variables: Mapping[str, Any], quantities: Mapping[str, Array]) -> None:
    if not variables:
        raise InputError("variables: at least one basic variable is needed.")
    for name in (*variables, *quantities):
        if not isinstance(name, str):
            raise InputError(f"variables and quantities: names must be texts; got {name!r}.")
    for name, value in variables.items():
        if not isinstance(value, Distribution):
            hint = "Make it with calibrate.distribution, or give it among the quantities."
            raise InputError(
                Problem(f"variables: '{name}' must be a distribution; got {value!r}.", suggestion=hint)
            )
    twice = [name for name in variables if name in quantities]
    if twice:
        raise InputError(f"'{twice[0]}' is given both as variable and as quantity.")


def _pairs(
    correlation: Mapping[tuple[str, str], float], variables: Mapping[str, Distribution]
) -> list[CorrelatedPair]:
    pairs: list[CorrelatedPair] = []
    seen: set[frozenset[str]] = set()
    for pair, value in correlation.items():
        if not isinstance(pair, tuple) or len(pair) != 2:
            raise InputError(f"correlation: keys must be pairs of names; got {pair!r}.")
        for name in pair:
            if name not in variables:
                hint = did_you_mean(str(name), variables)
                raise InputError(Problem(f"correlation: unknown variable '{name}'.", suggestion=hint))
        if pair[0] == pair[1]:
            raise InputError(f"correlation: '{pair[0]}' is paired with itself.")
        if frozenset(pair) in seen:
            raise InputError(f"correlation: {pair[0]} and {pair[1]} are given twice.")
        seen.add(frozenset(pair))
        array = np.asarray(value)
        if array.dtype.kind not in "iuf" or array.ndim or not -1.0 <= array <= 1.0:
            raise InputError(
                f"correlation of {pair[0]} and {pair[1]} must be a number from -1 to 1; got {value!r}."
            )
        pairs.append(CorrelatedPair(pair[0], pair[1], float(array)))
    return pairs


def _shape(variables: Mapping[str, Distribution], quantities: Mapping[str, Array]) -> Shape:
    shapes = {name: d.shape for name, d in variables.items()}
    shapes |= {name: q.shape for name, q in quantities.items()}
    try:
        return np.broadcast_shapes(*shapes.values())
    except ValueError:
        told = ", ".join(f"{name} {shape}" for name, shape in shapes.items() if shape)
        raise InputError(f"Parameters and quantities do not broadcast; their shapes are: {told}.") from None


def _flat(value: Array, shape: Shape) -> Array:
    return value if value.ndim == 0 else np.ascontiguousarray(np.broadcast_to(value, shape)).reshape(-1)


def _spread(distribution: Distribution, shape: Shape) -> Distribution:
    """Return the distribution with one-dimensional parameters for all situations, or with numbers."""
    own = distribution.shape
    if own == () or (own == shape and len(own) == 1):
        return distribution
    if isinstance(distribution, Extreme):
        extreme = maximum_of if distribution.of_maxima else minimum_of
        return extreme(_spread(distribution.base, shape), _flat(distribution.ratio, shape))
    at = np.broadcast_to(np.arange(math.prod(own)).reshape(own), shape).reshape(-1)
    values = tuple(v.reshape(-1) if v.ndim else v for v in distribution.values)
    return Distribution.of(distribution.family, values).take(at)


def _limit_state(
    given: str | Callable[..., Any],
    names: tuple[str, ...],
    quantities: Mapping[str, Array],
    gradient: Callable[..., Mapping[str, Any]] | None,
) -> LimitState:
    known = (*names, *quantities)
    if isinstance(given, str):
        if gradient is not None:
            raise InputError("gradient belongs to a callable limit state; a text has its own.")
        margin = _margin(given)
        for name in margin.names:
            if name not in known:
                text = f"limit state: '{name}' is neither a variable nor a quantity."
                raise InputError(Problem(text, suggestion=did_you_mean(name, known)))
        return ExpressionLimitState(
            margin, names, {q: quantities[q] for q in margin.names if q in quantities}
        )
    if not callable(given):
        raise InputError(f"limit state: must be a text or a callable; got {given!r}.")
    _check_signature("limit state", given, known)
    if gradient is not None:
        if not callable(gradient):
            raise InputError(f"gradient: must be a callable; got {gradient!r}.")
        _check_signature("gradient", gradient, known)
    return CallableLimitState(given, names, quantities, gradient)


def _margin(text: str) -> Expression:
    """Return g of an expression or of a comparison."""
    try:
        return parse(text)
    except ExpressionError:
        # A condition inside where(...) has a comparison, too: only the grammar can tell.
        if not any(sign in text for sign in "<>="):
            raise
        return parse_comparison(text).margin


def _check_signature(what: str, function: Callable[..., Any], known: tuple[str, ...]) -> None:
    try:
        parameters = inspect.signature(function).parameters.values()
    except (TypeError, ValueError):
        return
    takes = [p.name for p in parameters if p.kind in (p.POSITIONAL_OR_KEYWORD, p.KEYWORD_ONLY)]
    needs = [p.name for p in parameters if p.name in takes and p.default is p.empty]
    for name in needs:
        if name not in known:
            text = f"{what}: its argument '{name}' is neither a variable nor a quantity."
            raise InputError(Problem(text, suggestion=did_you_mean(name, known)))
    if any(p.kind == p.VAR_KEYWORD for p in parameters):
        return
    for name in known:
        if name not in takes:
            text = f"{what}: it takes no argument '{name}'."
            raise InputError(Problem(text, suggestion=did_you_mean(name, takes)))


def _start(start: Any, names: tuple[str, ...], shape: Shape) -> Array:
    if not isinstance(start, FormResult):
        raise InputError(f"start: must be a result of calibrate.form; got {start!r}.")
    points = start.standard_point
    if tuple(points) != names and set(points) != set(names):
        raise InputError(f"start: belongs to the variables {', '.join(points)}, not {', '.join(names)}.")
    if start.beta.shape != shape:
        raise InputError(f"start: has shape {start.beta.shape}, the arguments have {shape}.")
    return np.array([points[name].reshape(-1) for name in names])


def _result(r: Reliability, shape: Shape) -> FormResult:
    def shaped(array: npt.NDArray[Any]) -> npt.NDArray[Any]:
        view = array.reshape(shape)
        view.setflags(write=False)
        return view

    def by_name(rows: Array) -> Mapping[str, Array]:
        return MappingProxyType({name: shaped(row) for name, row in zip(r.variables, rows, strict=True)})

    return FormResult(
        shaped(r.beta), shaped(r.failure_probability), by_name(r.x), by_name(r.alpha), shaped(r.converged),
        shaped(r.status), shaped(r.iterations), by_name(r.u), shaped(r.gradient_norm),
    )  # fmt: skip
