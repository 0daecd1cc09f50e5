"""Exact derivatives and elasticities of beta by everything that was stated about the variables."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution, Extreme, ratio_slope
from calibrate.errors import InputError
from calibrate.reliability.correlated_pairs import CorrelatedPair
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.dependence.slopes import RATIO, Margin, equivalent_slopes
from calibrate.reliability.importance.moments import by_moments
from calibrate.reliability.importance.quantities import quantity_slopes
from calibrate.reliability.importance.vectors import slopes_by_z
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability

Array = npt.NDArray[np.float64]

MOMENT, PARAMETER, CORRELATION, QUANTITY = "moment", "parameter", "correlation", "quantity"


@dataclass(frozen=True, slots=True, eq=False)
class Elasticities:
    """A table of derivatives of beta: one row for each argument, one column for each of n situations.

    Attributes
    ----------
    kinds : tuple of str
        ``moment``, ``parameter``, ``correlation`` or ``quantity``.
    names : tuple of str
        The variable, the pair ("A, B") or the quantity.
    arguments : tuple of str
        ``mean`` or ``sd``; the own parameter, or ``ratio`` of an extreme; ``product-moment`` or ``rank``; ``value``.
    values : array (rows, n)
        What the argument is, p.
    slopes : array (rows, n)
        d beta/d p, in units of 1/p; NaN where there is no design point.
    elasticities : array (rows, n)
        (d beta/d p) p/beta, the relative change of beta by that of p; NaN where beta or p is 0.
    """

    kinds: tuple[str, ...]
    names: tuple[str, ...]
    arguments: tuple[str, ...]
    values: Array
    slopes: Array
    elasticities: Array

    def row(self, name: str, argument: str, kind: str | None = None) -> int:
        """Return the number of a row; ``kind`` matters where a parameter is called like a moment.

        Raises
        ------
        InputError
            There is no such row.
        """
        for i, found in enumerate(zip(self.kinds, self.names, self.arguments, strict=True)):
            if found[1:] == (name, argument) and kind in (None, found[0]):
                return i
        raise InputError(f"There is no derivative of beta by '{argument}' of '{name}'.")


@dataclass(frozen=True, slots=True, eq=False)
class _Row:
    kind: str
    name: str
    argument: str
    value: Array
    slope: Array


def elasticities(
    problem: Problem, reliability: Reliability, pairs: Sequence[CorrelatedPair] = ()
) -> Elasticities:
    """Return derivatives and elasticities of beta at the design points.

    Parameters
    ----------
    problem : Problem
        Of n situations.
    reliability : Reliability
        Its design points.
    pairs : sequence of CorrelatedPair
        The coefficients from which the correlation of the problem was made; they are held while distributions
        change. Without them, the correlation in standard normal space is held.

    Returns
    -------
    Elasticities
        First the variables in their order: mean and standard deviation (the other one held) where they determine the
        distribution, each own parameter, and the ratio of an extreme; moments and parameters of an extreme or an
        intermittent action are those of its base. Mixtures and conditional variables have no rows. Then pairs of
        random variables, and quantities of the limit state.

    Notes
    -----
    As the design point is the nearest one, its own movement changes beta in second order only, so that
    d beta/d p = (dg/dp at fixed u*)/|grad_u g| (M. Hohenbichler and R. Rackwitz, "Sensitivity and importance
    measures in structural reliability", Civil Engineering Systems 3, 1986). A change dR of the correlation matrix of
    z = L u turns L by dL = L Phi(L^-1 dR L^-T), where Phi takes the lower triangle and half the diagonal. With
    u* = -beta alpha this leaves d beta = -beta/2 a^T dR a, a = L^-T alpha, which no longer depends on the kind of
    factor: d beta/d rho0_ij = -beta a_i a_j. The stated coefficient moves rho0 by 1/(d rho/d rho0), and a parameter
    that changes the shape of a distribution by -(d rho/d p)/(d rho/d rho0).
    """
    with np.errstate(all="ignore"):
        turned, correlations = _by_pairs(problem, reliability, pairs)
        rows = [*_by_variables(problem, reliability, turned), *correlations]
        found = quantity_slopes(problem.limit_state, problem.x(reliability.u))
        rows += [
            _Row(QUANTITY, name, "value", value, by / reliability.gradient_norm)
            for name, (value, by) in found.items()
        ]
        shape = (len(rows), reliability.n)
        values, slopes = np.empty(shape), np.empty(shape)
        for i, row in enumerate(rows):
            values[i], slopes[i] = row.value, row.slope
        usable = (values != 0.0) & (reliability.beta != 0.0)
        relative = np.where(usable, slopes * values / reliability.beta, np.nan)
    return Elasticities(
        tuple(r.kind for r in rows),
        tuple(r.name for r in rows),
        tuple(r.argument for r in rows),
        values,
        slopes,
        relative,
    )


def _by_variables(
    problem: Problem, reliability: Reliability, turned: Sequence[dict[str, Array]]
) -> Iterator[_Row]:
    z = problem.z(reliability.u)
    x, linear = problem.transform(reliability.u)
    _, direct = problem.limit_state.gradient(x, None, linear.slopes)
    by_x = problem.total_slopes(direct, linear)
    for i, (name, law) in enumerate(zip(reliability.variables, problem.distributions, strict=True)):
        if not isinstance(law, Distribution):
            continue
        own = dict(law.parameter_slopes(z[i]))
        if isinstance(law, Extreme):
            own[RATIO] = ratio_slope(law.base, law.ratio, z[i], of_maxima=law.of_maxima)
        slopes = {
            p: by_x[i] * dx / reliability.gradient_norm + turned[i].get(p, 0.0) for p, dx in own.items()
        }
        for moment in by_moments(law, slopes):
            yield _Row(MOMENT, name, moment.name, moment.value, moment.slope)
        values = {**law.parameters, RATIO: law.ratio} if isinstance(law, Extreme) else law.parameters
        for p, slope in slopes.items():
            yield _Row(PARAMETER, name, p, values[p], slope)


def _by_pairs(
    problem: Problem, reliability: Reliability, pairs: Sequence[CorrelatedPair]
) -> tuple[list[dict[str, Array]], list[_Row]]:
    """Return d beta/d p through the correlation for parameters of each variable, and the rows of the pairs."""
    laws, names = problem.distributions, reliability.variables
    turned: list[dict[str, Array]] = [{} for _ in laws]
    rows: list[_Row] = []
    margins: dict[int, Margin] = {}
    a = slopes_by_z(problem.correlation, reliability.alpha)
    for pair in pairs:
        if pair.first not in names or pair.second not in names:
            continue
        i, j = names.index(pair.first), names.index(pair.second)
        for k in (i, j):
            law = laws[k]
            if isinstance(law, Distribution) and not law.is_constant and k not in margins:
                margins[k] = Margin(law, problem.n)
        if i not in margins or j not in margins:
            continue
        by_equivalent = -reliability.beta * a[i] * a[j]
        found = equivalent_slopes(margins[i], margins[j], _entry(problem.correlation, i, j), kind=pair.kind)
        slope = by_equivalent * found.by_coefficient
        rows.append(_Row(CORRELATION, pair.label, pair.kind, np.asarray(pair.coefficient), slope))
        for k, by_parameter in ((i, found.by_first), (j, found.by_second)):
            for p, moved in by_parameter.items():
                turned[k][p] = turned[k].get(p, 0.0) + by_equivalent * moved
    return turned, rows


def slopes_through_correlation(
    problem: Problem, reliability: Reliability, pairs: Sequence[CorrelatedPair]
) -> list[dict[str, Array]]:
    """Return, for each variable, d beta/d p by the own parameters that change the correlation in standard normal space.

    The stated coefficients of the pairs are held; variables without such parameters have none.
    """
    with np.errstate(all="ignore"):
        return _by_pairs(problem, reliability, pairs)[0]


def _entry(correlation: Correlation | None, i: int, j: int) -> Array:
    """Return the element of the correlation matrix, () or (n,), in a fixed order of addition."""
    if correlation is None:
        return np.zeros(())
    total = np.zeros(())
    for k in range(min(i, j) + 1):
        total = total + correlation.factor[i, k] * correlation.factor[j, k]
    return total
