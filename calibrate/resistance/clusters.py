"""Tests in clusters: studies, sites, laboratories, whose means differ; and what a factor owes to each of them."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import Doubt, InputError, Problem
from calibrate.fitting.lots import LotScatter, lot_scatter
from calibrate.fitting.lots.grouping import grouped
from calibrate.resistance.closed_form import CHARACTERISTIC, DESIGN, FractileFactor, closed_form
from calibrate.resistance.positive_values import Array, positive_number, positive_values

LEAST_CLUSTERS = 2

SWAY = 0.05
"""Change of the design resistance from leaving out one cluster that is told; the step to which factors are rounded."""


@dataclass(frozen=True, slots=True, eq=False)
class ClusterEffects:
    """The model factor with a random effect of the cluster.

    Attributes
    ----------
    scatter : LotScatter
        Of ln delta between and within clusters, by restricted maximum likelihood.
    b : float
        Mean correction for the population of clusters, exp(mean + total²/2).
    cov : float
        V of the model factor, of a test in a cluster drawn at random.
    share_between : float
        Share of the variance of ln delta that is between clusters.
    effective_n : float
        Independent tests that would tell the mean as well; NaN where between and within cannot be told apart and
        there is no total.
    design, characteristic : float
        r_d and r_k over the prediction, with the effective number of tests.
    partial_factor : float
        r_k over r_d.
    pooled_b, pooled_cov, pooled_design : float
        The same as if all tests were independent.
    names : tuple of str
        The k clusters in order of first appearance.
    left_out_b, left_out_cov, left_out_design, left_out_factor : array, shape (k,)
        b, V, r_d over prediction and partial factor without the tests of each cluster; NaN where one cluster remains
        (but for b).
    doubts : tuple of Doubt
    """

    scatter: LotScatter
    b: float
    cov: float
    share_between: float
    effective_n: float
    design: float
    characteristic: float
    partial_factor: float
    pooled_b: float
    pooled_cov: float
    pooled_design: float
    names: tuple[str, ...]
    left_out_b: Array
    left_out_cov: Array
    left_out_design: Array
    left_out_factor: Array
    doubts: tuple[Doubt, ...]


def cluster_effects(
    delta: ArrayLike,
    clusters: ArrayLike,
    *,
    characteristic: FractileFactor = CHARACTERISTIC,
    design: FractileFactor = DESIGN,
    other_log_sd: float = 0.0,
    level: float = 0.90,
    where: str = "resistance",
) -> ClusterEffects:
    """Divide the scatter of the model factor between and within clusters.

    Parameters
    ----------
    delta : array, shape (n,)
        Measured over predicted, above zero, of tests that ended in failure.
    clusters : sequence, shape (n,)
        Study, site or laboratory of each, as text or number.
    characteristic, design : FractileFactor
        How far below the mean of the logarithm the fractiles lie; their n is the effective number of tests.
    other_log_sd : float
        Scatter of the logarithm of the prediction in use, at least 0.
    level : float
        Coverage of the intervals in ``scatter``.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        One cluster only: nothing can be said of the scatter between clusters. Also wrong lengths, values that are not
        finite and positive, tests without cluster or without any scatter.

    Notes
    -----
    The effective number is that of the mean: variance of the population over variance of the estimated mean. It
    serves in k_n for the scatter as well, which few clusters tell no better than the mean; it is at least two there.
    With few clusters the interval of the scatter between them is the more honest number.

    References
    ----------
    .. [1] S. R. Searle, G. Casella, C. E. McCulloch, Variance Components, Wiley 1992, chapter 3.
    """
    d = positive_values(delta, "delta", 2)
    positive_number(other_log_sd, "The other scatter of the resistance", zero=True)
    scatter = lot_scatter(d, clusters, scale="logarithmic", level=level, where=where)
    names = scatter.lots
    if len(names) < LEAST_CLUSTERS:
        raise InputError(
            Problem(
                f"All {d.size} tests come from one cluster, '{names[0]}': they cannot tell the scatter between "
                "clusters.",
                suggestion="Evaluate them without clusters, and say that the result holds for this one only; or add "
                "tests of another.",
            )
        )
    k = (characteristic, design, other_log_sd)
    whole = _of(scatter, *k)
    parts = [_of(s, *k) for s in _without_each(d, clusters, scatter, level)]
    left_out = np.array([[p.b, p.cov, p.design, p.partial_factor] for p in parts]).T
    y = np.log(d)
    pooled_sd = float(np.std(y, ddof=1))
    pooled = closed_form(float(np.mean(y)), pooled_sd, d.size, *k)
    return ClusterEffects(
        scatter=scatter, b=whole.b, cov=whole.cov, share_between=scatter.intraclass, effective_n=scatter.effective_n,
        design=whole.design, characteristic=whole.characteristic, partial_factor=whole.partial_factor,
        pooled_b=math.exp(float(np.mean(y)) + 0.5 * pooled_sd**2), pooled_cov=math.sqrt(math.expm1(pooled_sd**2)),
        pooled_design=float(pooled.design[0]), names=names, left_out_b=left_out[0], left_out_cov=left_out[1],
        left_out_design=left_out[2], left_out_factor=left_out[3],
        doubts=_doubts(scatter, whole.design, left_out[2], where),
    )  # fmt: skip


@dataclass(frozen=True, slots=True)
class _Numbers:
    b: float
    cov: float
    design: float
    characteristic: float
    partial_factor: float


def _of(
    scatter: LotScatter, characteristic: FractileFactor, design: FractileFactor, other_log_sd: float
) -> _Numbers:
    """Return the numbers of a factor; all but b are NaN for one cluster, whose total scatter is unknown."""
    q = scatter.total_sd
    if math.isnan(q):
        b = math.exp(scatter.mean + 0.5 * scatter.within_sd**2)
        return _Numbers(b, math.nan, math.nan, math.nan, math.nan)
    form = closed_form(scatter.mean, q, max(scatter.effective_n, 2.0), characteristic, design, other_log_sd)
    return _Numbers(
        math.exp(scatter.mean + 0.5 * q * q),
        math.sqrt(math.expm1(q * q)),
        float(form.design[0]),
        float(form.characteristic[0]),
        form.partial_factor,
    )


def _without_each(d: Array, clusters: ArrayLike, scatter: LotScatter, level: float) -> list[LotScatter]:
    """Return the scatter without each cluster."""
    codes = grouped(d, clusters, "logarithmic").codes
    labels = np.asarray(clusters, dtype=object).ravel()
    found = []
    for code, name in enumerate(scatter.lots):
        rest = codes != code
        if np.count_nonzero(rest) < 2 or np.ptp(d[rest]) == 0.0:
            raise InputError(
                Problem(
                    f"Without cluster '{name}' there is no scatter left: the other tests are too few or all the same.",
                    suggestion="Evaluate the tests without clusters.",
                )
            )
        found.append(lot_scatter(d[rest], labels[rest], scale="logarithmic", level=level))
    return found


def _doubts(scatter: LotScatter, design: float, left_out: Array, where: str) -> tuple[Doubt, ...]:
    # The scatter speaks of lots and specimens; here they are clusters and tests.
    words = (
        ("Specimens", "Tests"),
        ("specimens", "tests"),
        ("specimen", "test"),
        ("lots", "clusters"),
        ("lot", "cluster"),
    )
    found = []
    for doubt in scatter.doubts:
        message = doubt.message
        for old, new in words:
            message = message.replace(old, new)
        found.append(replace(doubt, code=doubt.code.replace("lot", "cluster"), message=message))
    change = left_out / design - 1.0
    if np.any(np.abs(change) > SWAY):
        at = int(np.nanargmax(np.abs(change)))
        text = (
            f"Without cluster '{scatter.lots[at]}' the design resistance would be {abs(change[at]):.0%} "
            f"{'higher' if change[at] > 0.0 else 'lower'}: the factor hangs on one cluster."
        )
        found.append(Doubt("one-cluster-sways", text, where))
    return tuple(found)
