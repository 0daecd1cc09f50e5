"""A model factor in two layers: a formula against numerical "tests", and those against physical tests."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import Doubt, InputError
from calibrate.fitting.lots import lot_scatter
from calibrate.resistance.closed_form import CHARACTERISTIC, DESIGN, ClosedForm, FractileFactor, closed_form
from calibrate.resistance.positive_values import positive_number, positive_values


@dataclass(frozen=True, slots=True)
class Layer:
    """A lognormal factor with what is known of it.

    Attributes
    ----------
    log_mean, log_sd : float
        Of the logarithm; the scatter of one result, in a cluster drawn at random where there are clusters.
    n : int
        Results.
    effective_n : float
        Variance of one result over variance of the mean; n without clusters.
    freedom : float
        Degrees of freedom of the scatter; effective n less one.
    """

    log_mean: float
    log_sd: float
    n: int
    effective_n: float
    freedom: float


def layer(delta: ArrayLike, name: str, clusters: ArrayLike | None = None) -> Layer:
    """Return the lognormal factor of a sample.

    Parameters
    ----------
    delta : array, shape (n,)
        Ratios, at least two, above zero: numerical over formula, or physical over numerical.
    name : str
        What they are, for the messages.
    clusters : sequence, shape (n,), optional
        Study or site of each.

    Raises
    ------
    InputError
        Fewer, values that are not finite and positive or without scatter, one cluster only.
    """
    d = positive_values(delta, name, 2)
    y = np.log(d)
    if clusters is None:
        return Layer(float(np.mean(y)), float(np.std(y, ddof=1)), d.size, float(d.size), d.size - 1.0)
    scatter = lot_scatter(d, clusters, scale="logarithmic")
    if len(scatter.lots) < 2:
        raise InputError(
            f"{name}: all {d.size} results come from one cluster, '{scatter.lots[0]}', which cannot tell the scatter "
            "between clusters."
        )
    n = scatter.effective_n
    return Layer(scatter.mean, scatter.total_sd, d.size, n, max(n - 1.0, 1.0))


@dataclass(frozen=True, slots=True, eq=False)
class TwoLayers:
    """The product of both factors.

    Attributes
    ----------
    numerical, physical : Layer
        Numerical over formula, physical over numerical.
    log_mean, log_sd : float
        Of the logarithm of the product.
    b, cov : float
        Mean and coefficient of variation of the product.
    share_physical : float
        Share of the variance that comes from the physical layer.
    effective_n : float
        Variance of the product over variance of its mean.
    freedom : float
        Of its variance, by Welch and Satterthwaite.
    n_in_factors : float
        What k_n is taken for: the smaller of ``effective_n`` and ``freedom + 1``, at least 2.
    closed_form : ClosedForm
        Fractiles over the prediction of the formula.
    doubts : tuple of Doubt
    """

    numerical: Layer
    physical: Layer
    log_mean: float
    log_sd: float
    b: float
    cov: float
    share_physical: float
    effective_n: float
    freedom: float
    n_in_factors: float
    closed_form: ClosedForm
    doubts: tuple[Doubt, ...]


def two_layers(
    numerical: Layer,
    physical: Layer,
    *,
    characteristic: FractileFactor = CHARACTERISTIC,
    design: FractileFactor = DESIGN,
    other_log_sd: float = 0.0,
    where: str = "resistance",
) -> TwoLayers:
    """Return the model factor of a formula that was fitted to numerical results.

    Parameters
    ----------
    numerical : Layer
        Numerical over formula. However many runs there are, they do not tell how wrong the numerical model is.
    physical : Layer
        Physical over numerical, of tests that were calculated with the same numerical model.
    characteristic, design : FractileFactor
        How far below the mean of the logarithm the fractiles lie.
    other_log_sd : float
        Scatter of the logarithm of the prediction in use, at least 0.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        Both layers without scatter, an other scatter below zero.

    Notes
    -----
    Physical over formula = (physical over numerical)(numerical over formula), taken as independent: means and
    variances of the logarithms add. Each mean has the variance s_i²/n_i, so the effective number of the product is
    (s_1² + s_2²)/(s_1²/n_1 + s_2²/n_2), and its variance has about (s_1² + s_2²)²/(s_1⁴/nu_1 + s_2⁴/nu_2) degrees of
    freedom.

    References
    ----------
    .. [1] F. E. Satterthwaite, An approximate distribution of estimates of variance components, Biometrics Bulletin 2
       (1946) 110-114.
    """
    positive_number(other_log_sd, "The other scatter of the resistance", zero=True)
    a, c = numerical.log_sd**2, physical.log_sd**2
    variance = a + c
    if not variance > 0.0:
        raise InputError("Neither layer of the model factor has any scatter.")
    mean = numerical.log_mean + physical.log_mean
    n = variance / (a / numerical.effective_n + c / physical.effective_n)
    freedom = variance**2 / (a * a / numerical.freedom + c * c / physical.freedom)
    least = max(min(n, freedom + 1.0), 2.0)
    sd = math.sqrt(variance)
    share = c / variance
    text = (
        f"The formula was compared with {numerical.n} numerical results and the numerical model with {physical.n} "
        f"physical tests. Together they are worth about {least:.0f} independent tests; {share:.0%} of the variance "
        "comes from the physical layer. The two layers are taken as independent, and the physical tests as typical of "
        "the numerical ones."
    )
    return TwoLayers(
        numerical=numerical, physical=physical, log_mean=mean, log_sd=sd, b=math.exp(mean + 0.5 * variance),
        cov=math.sqrt(math.expm1(variance)), share_physical=share, effective_n=n, freedom=freedom, n_in_factors=least,
        closed_form=closed_form(mean, sd, least, characteristic, design, other_log_sd),
        doubts=(Doubt("two-layers", text, where),),
    )  # fmt: skip
