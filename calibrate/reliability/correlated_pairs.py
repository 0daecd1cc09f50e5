"""Correlations as people state them, pair by pair, turned into the factor of the Nataf model."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.errors import InputError, Problem
from calibrate.reliability.conditional import Conditional
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.dependence import CorrelationFactor, correlation_factor, equivalent_correlation

Array = npt.NDArray[np.float64]

PRODUCT_MOMENT, RANK = "product-moment", "rank"
KINDS = (PRODUCT_MOMENT, RANK)


@dataclass(frozen=True, slots=True)
class CorrelatedPair:
    """The correlation coefficient of two basic variables.

    Parameters
    ----------
    first, second : str
        Their names.
    coefficient : float
        In [-1, 1]; 0 says that they are independent.
    kind : str
        ``product-moment`` or ``rank`` (Spearman).
    line : int or None
        Where it stands in the study file.
    """

    first: str
    second: str
    coefficient: float
    kind: str = PRODUCT_MOMENT
    line: int | None = None

    @property
    def label(self) -> str:
        """The pair as it is written in study files."""
        return f"{self.first}, {self.second}"


def nataf_correlation(
    pairs: Sequence[CorrelatedPair],
    names: Sequence[str],
    laws: Sequence[Distribution | Conditional],
    n: int,
) -> Correlation | None:
    """Return the correlation of the standard normal variables behind the basic ones; None where none is correlated.

    Parameters
    ----------
    pairs : sequence of CorrelatedPair
        Those of which both variables are among ``names`` count.
    names : sequence of str
        The m basic variables.
    laws : sequence
        Their distributions, parameters of shape () or (n,).
    n : int
        Number of situations.

    Raises
    ------
    InputError
        A coefficient is out of reach of its pair of distributions, a variable is not random or conditional, or the
        matrix is not positive definite; all pairs at once.

    Notes
    -----
    P.-L. Liu and A. Der Kiureghian, "Multivariate distribution models with prescribed marginals and covariances",
    Probabilistic Engineering Mechanics 1 (1986); the coefficients are solved exactly, not by the formulas there.
    """
    acting = [p for p in pairs if p.coefficient != 0.0 and p.first in names and p.second in names]
    if not acting:
        return None
    m = len(names)
    found: dict[tuple[int, int], Array] = {}
    problems: list[Problem] = []
    for pair in acting:
        i, j = sorted((names.index(pair.first), names.index(pair.second)))
        first, second = laws[i], laws[j]
        wrong = _not_correlated(pair, names, (i, j), laws)
        if wrong is not None:
            problems.append(wrong)
            continue
        assert isinstance(first, Distribution)
        assert isinstance(second, Distribution)
        equivalent = equivalent_correlation(first, second, pair.coefficient, kind=pair.kind)
        coefficient = np.asarray(equivalent.coefficient)
        if not np.all(np.isfinite(coefficient)):
            problems.append(_out_of_reach(pair, coefficient, equivalent.lowest, equivalent.highest))
        found[i, j] = coefficient
    if problems:
        raise InputError(problems)
    varies = any(c.ndim for c in found.values())
    matrix = np.zeros((m, m, n) if varies else (m, m))
    matrix[np.arange(m), np.arange(m)] = 1.0
    for (i, j), coefficient in found.items():
        matrix[i, j] = matrix[j, i] = coefficient
    factor = correlation_factor(matrix)
    if np.any(factor.failed):
        raise InputError(_not_definite(acting, names, factor))
    return Correlation.of(factor.lower)


def indefinite(pairs: Sequence[CorrelatedPair], names: Sequence[str]) -> Problem | None:
    """Return what is wrong with pairs that no variables can have, whatever their distributions; None where nothing is.

    The matrix of product-moment coefficients must be positive definite itself; a rank coefficient stands for that of
    normal variables. What the distributions add to it shows only once they are known.
    """
    matrix = np.eye(len(names))
    for p in pairs:
        i, j = names.index(p.first), names.index(p.second)
        value = 2.0 * np.sin(np.pi * p.coefficient / 6.0) if p.kind == RANK else p.coefficient
        matrix[i, j] = matrix[j, i] = value
    factor = correlation_factor(matrix)
    return _not_definite(pairs, names, factor) if np.any(factor.failed) else None


def _not_correlated(
    pair: CorrelatedPair,
    names: Sequence[str],
    rows: tuple[int, int],
    laws: Sequence[Distribution | Conditional],
) -> Problem | None:
    for i in rows:
        law = laws[i]
        if isinstance(law, Conditional):
            text = f"correlations: '{names[i]}' depends on other basic variables through its model already."
            return Problem(text, None, pair.line, "Say either a correlation or a dependent mean, cov or sd.")
        if law.is_constant:
            return Problem(f"correlations: '{names[i]}' does not vary.", None, pair.line, "Remove the pair.")
    return None


def _out_of_reach(pair: CorrelatedPair, coefficient: Array, lowest: Array, highest: Array) -> Problem:
    at = int(np.argmax(~np.isfinite(np.atleast_1d(coefficient))))
    low, high = (float(np.broadcast_to(v, np.shape(coefficient)).reshape(-1)[at]) for v in (lowest, highest))
    where = f" in situation {at + 1}" if coefficient.ndim else ""
    return Problem(
        f"correlations: '{pair.label}' = {pair.coefficient:g} is out of reach of these two distributions{where}: their "
        f"product-moment coefficient lies between {low:.4f} and {high:.4f}.",
        None,
        pair.line,
        'Correct it, or give a rank correlation: { coefficient = .., kind = "rank" }.',
    )


def _not_definite(
    pairs: Sequence[CorrelatedPair], names: Sequence[str], factor: CorrelationFactor
) -> Problem:
    at = int(np.argmin(np.atleast_1d(factor.smallest)))
    involved = [names[i] for i in factor.block]
    told = "; ".join(
        f"{p.label} = {p.coefficient:g}" for p in pairs if p.first in involved and p.second in involved
    )
    where = f" in situation {at + 1}" if factor.smallest.ndim else ""
    line = next((p.line for p in pairs if p.first in involved and p.second in involved), None)
    return Problem(
        f"correlations: no variables can be correlated like this{where}: the matrix of {', '.join(involved)} is "
        f"not positive definite (smallest eigenvalue {float(np.atleast_1d(factor.smallest)[at]):.3g}; {told}). "
        "Pairs that are not given count as 0.",
        None,
        line,
        "Weaken a coefficient, or give the missing pairs.",
    )
