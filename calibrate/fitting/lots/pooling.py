"""Whether the lots speak against being pooled: three tests, each against another way of being different."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from calibrate.errors import InputError
from calibrate.fitting.lots.anova import mean_squares
from calibrate.fitting.lots.grouping import Grouped, Scale, grouped
from calibrate.fitting.lots.k_sample import anderson_darling_k

LEAST_FOR_SCATTER = 3
"""Two values lie equally far from their median: they would seem to have no scatter of scatter."""


@dataclass(frozen=True, slots=True)
class PoolingTest:
    """One test.

    Attributes
    ----------
    name : str
    statistic, p_value : float
        NaN where the test cannot be made.
    reason : str
        Why it cannot be made; otherwise empty.
    """

    name: str
    statistic: float
    p_value: float
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Pooling:
    """The tests, and what they say together.

    Attributes
    ----------
    distributions : PoolingTest
        k-sample Anderson-Darling: the lots differ in anything.
    scatter : PoolingTest
        Levene's test about the medians (Brown-Forsythe): they differ in scatter.
    means : PoolingTest
        F test of the one-way analysis of variance: they differ in the mean.
    level : float
        Level of significance of the sentence.
    sentence : str
        What is rejected and what is not rejected, with p-values.
    """

    distributions: PoolingTest
    scatter: PoolingTest
    means: PoolingTest
    level: float
    sentence: str

    @property
    def tests(self) -> tuple[PoolingTest, ...]:
        """All three."""
        return (self.distributions, self.scatter, self.means)

    @property
    def rejected(self) -> bool:
        """Whether any test that could be made rejects one population for all lots."""
        return any(t.p_value < self.level for t in self.tests)


def pooling(
    values: ArrayLike,
    lots: ArrayLike,
    rng: np.random.Generator,
    *,
    scale: Scale = "as measured",
    level: float = 0.05,
    replicates: int = 999,
) -> Pooling:
    """Test whether the lots may come from one population.

    Parameters
    ----------
    values : array, shape (n,)
        Specimens that were observed exactly, n >= 2.
    lots : sequence, shape (n,)
        Lot of each, as text or number.
    rng : Generator
        Draws the permutations of the Anderson-Darling test. The result does not depend on the order of rows.
    scale : {"as measured", "logarithmic"}
        For Levene's and the F test; Anderson-Darling's goes by ranks and gives the same on both.
    level : float
        Level of significance of the sentence, between 0 and 1.
    replicates : int
        Number of permutations.

    Raises
    ------
    InputError
        As for `lot_scatter`; a level or number of permutations that is not allowed.

    Notes
    -----
    A test that does not reject shows only that so few specimens cannot tell the lots apart. Lots that do scatter
    stay a reason to use both variances even where no test rejects.

    References
    ----------
    .. [1] F. W. Scholz, M. A. Stephens, K-sample Anderson-Darling tests, JASA 82 (1987) 918-924.
    .. [2] M. B. Brown, A. B. Forsythe, Robust tests for the equality of variances, JASA 69 (1974) 364-367.
    """
    if not 0.0 < level < 1.0:
        raise InputError(f"The level of significance lies between 0 and 1; got {level:g}.")
    if replicates < 1:
        raise InputError(f"The permutation test needs at least one permutation; got {replicates}.")
    g = grouped(values, lots, scale)
    distributions, scatter, means = _distributions(g, rng, replicates), _scatter(g), _means(g)
    sentence = _sentence((distributions, scatter, means), g.k, level)
    return Pooling(distributions, scatter, means, level, sentence)


def _distributions(g: Grouped, rng: np.random.Generator, replicates: int) -> PoolingTest:
    name = "k-sample Anderson-Darling test"
    reason = _too_little(g) or ("there are fewer than four specimens" if g.n < 4 else "")
    return _impossible(name, reason) if reason else PoolingTest(name, *anderson_darling_k(g, rng, replicates))


def _scatter(g: Grouped) -> PoolingTest:
    name = "Levene test of scatter"
    usable = [x for x in g.by_lot() if x.size >= LEAST_FOR_SCATTER]
    if len(usable) < 2:
        return _impossible(name, f"fewer than two lots have {LEAST_FOR_SCATTER} specimens or more")
    # The analysis of variance of the distances from the medians of lots (scipy.stats takes half a second to load).
    distances = [np.abs(x - np.median(x)) / g.unit for x in usable]
    whole = np.concatenate(distances)
    between = sum(d.size * (d.mean() - whole.mean()) ** 2 for d in distances) / (len(distances) - 1)
    within = sum(float(np.sum((d - d.mean()) ** 2)) for d in distances) / (whole.size - len(distances))
    if not within > 0.0:
        return _impossible(name, "the distances from the median do not scatter in any lot")
    statistic = float(between / within)
    freedom = (len(distances) - 1, whole.size - len(distances))
    return PoolingTest(name, statistic, float(special.fdtrc(*freedom, statistic)))


def _means(g: Grouped) -> PoolingTest:
    name = "F test of means"
    reason = _too_little(g)
    if reason:
        return _impossible(name, reason)
    between, within = mean_squares(g)
    statistic = between / within if within > 0.0 else math.inf
    return PoolingTest(name, statistic, float(special.fdtrc(g.k - 1, g.n - g.k, statistic)))


def _too_little(g: Grouped) -> str:
    if g.k == 1:
        return "there is only one lot"
    return "every lot has one specimen" if g.k == g.n else ""


def _impossible(name: str, reason: str) -> PoolingTest:
    return PoolingTest(name, math.nan, math.nan, reason)


def _sentence(tests: tuple[PoolingTest, ...], k: int, level: float) -> str:
    """Return what the tests say together; a test that does not reject is never proof of sameness."""
    made = [t for t in tests if not t.reason]
    claim = f"That the {k} lots come from one population is"
    against = [f"the {t.name} (p = {t.p_value:.2g})" for t in made if t.p_value < level]
    quiet = [f"the {t.name} (p = {t.p_value:.2g})" for t in made if t.p_value >= level]
    if not made:
        return f"Whether the lots may be pooled cannot be tested: {tests[0].reason}."
    if not against:
        return f"{claim} not rejected at the {level:.2g} level by {_listed(quiet)}; this does not show that it is so."
    also = f", and not rejected by {_listed(quiet)}" if quiet else ""
    return f"{claim} rejected at the {level:.2g} level by {_listed(against)}{also}."


def _listed(items: list[str]) -> str:
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} and {items[-1]}"
