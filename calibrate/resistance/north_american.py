"""Resistance factor from tests in the North American form.

phi = C_phi M_m F_m P_m exp(-beta_0 sqrt(V_M² + V_F² + C_P V_P² + V_Q²)), as in AISI S100, chapters on tests (F in
editions until 2012, K since 2016), from memory.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.resistance.loads import LoadStatistics
from calibrate.resistance.positive_values import Array, positive_number, positive_values

Coefficients = Literal["printed", "derived"]

LEAST = 3
"""Tests below which the form has no C_P."""

C_P_OF_THREE = 5.7
"""C_P for three tests, where the formula has no value (AISI S100, from memory)."""

FLOOR = 0.065
"""Least coefficient of variation of the test results (AISI S100, from memory)."""


@dataclass(frozen=True, slots=True)
class Format:
    """A design format: the loads behind it, its target and the coefficients as printed.

    Attributes
    ----------
    name : str
    loads : LoadStatistics
        From which C_phi and V_Q are derived.
    target : float
        beta_0.
    printed_c_phi, printed_v_q : float
        The rounded coefficients of the standard.
    """

    name: str
    loads: LoadStatistics
    target: float
    printed_c_phi: float
    printed_v_q: float

    def coefficients(self, which: Coefficients) -> tuple[float, float]:
        """Return C_phi and V_Q."""
        if which == "printed":
            return self.printed_c_phi, self.printed_v_q
        return float(self.loads.calibration_coefficient), float(self.loads.cov)


_LOADS = {"dead_bias": 1.05, "dead_cov": 0.10, "live_bias": 1.0, "live_cov": 0.25}
_LRFD = LoadStatistics(dead_factor=1.2, live_factor=1.6, dead_to_live=1 / 5, **_LOADS)
_LSD = LoadStatistics(dead_factor=1.25, live_factor=1.5, dead_to_live=1 / 3, **_LOADS)

FORMATS: Mapping[str, Format] = MappingProxyType(
    {
        f.name: f
        for f in (
            Format("LRFD members", _LRFD, 2.5, 1.52, 0.21),
            Format("LRFD connections", _LRFD, 3.5, 1.52, 0.21),
            Format("LSD members", _LSD, 3.0, 1.42, 0.21),
            Format("LSD connections", _LSD, 4.0, 1.42, 0.21),
        )
    }
)
"""Load and resistance factor design (United States) and limit states design (Canada); all numbers from memory.

The derived V_Q of LSD is 0.187; the standard uses 0.21 for both.
"""


def format_named(name: str) -> Format:
    """Return a preset.

    Raises
    ------
    InputError
        An unknown name.
    """
    if name not in FORMATS:
        raise InputError(Problem(f"Unknown design format '{name}'.", suggestion=did_you_mean(name, FORMATS)))
    return FORMATS[name]


@dataclass(frozen=True, slots=True)
class Part:
    """Mean over nominal and coefficient of variation of one part of the resistance.

    Parameters
    ----------
    mean : float
        Above zero.
    cov : float
        Zero or above.

    Raises
    ------
    InputError
        Other values.
    """

    mean: float
    cov: float

    def __post_init__(self) -> None:
        positive_number(self.mean, "The mean over nominal")
        positive_number(self.cov, "The coefficient of variation", zero=True)


@dataclass(frozen=True, slots=True)
class NorthAmericanFactor:
    """The factor and every number in it.

    Attributes
    ----------
    phi : float
    format : Format
    coefficients : {"printed", "derived"}
        Which C_phi and V_Q are in ``phi``.
    c_phi, v_q : float
    phi_other : float
        The factor with the other pair of coefficients.
    material, fabrication, professional : Part
        M, F and P; P as the tests gave it.
    n : int
    c_p : float
    v_p : float
        In use: that of the tests, or the lower limit.
    floor_governs : bool
    v_total : float
        The root.
    doubts : tuple of Doubt
    """

    phi: float
    format: Format
    coefficients: Coefficients
    c_phi: float
    v_q: float
    phi_other: float
    material: Part
    fabrication: Part
    professional: Part
    n: int
    c_p: float
    v_p: float
    floor_governs: bool
    v_total: float
    doubts: tuple[Doubt, ...]


def correction_for_tests(n: ArrayLike) -> Array:
    """Return C_P = (1 + 1/n) m/(m - 2) with m = n - 1 for n >= 4, 5.7 for n = 3.

    Parameters
    ----------
    n : array_like
        Number of tests.

    Raises
    ------
    InputError
        Fewer than three tests, or numbers that are not whole.

    Notes
    -----
    (1 + 1/n) m/(m - 2) is the variance of the predictive Student t distribution over that of the sample.
    """
    count = np.asarray(n, dtype=np.float64)
    wrong = ~(np.isfinite(count) & (count >= LEAST) & (count == np.round(count)))
    if np.any(wrong):
        found = np.ravel(count)[int(np.argmax(np.ravel(wrong)))]
        raise InputError(f"C_P needs a whole number of at least {LEAST} tests; got {found:g}.")
    m = np.maximum(count, 4.0) - 1.0
    return np.where(count == LEAST, C_P_OF_THREE, (1.0 + 1.0 / count) * m / (m - 2.0))


def professional_part(delta: ArrayLike) -> Part:
    """Return P_m and V_P: mean and coefficient of variation (divisor n - 1) of tested over predicted.

    Parameters
    ----------
    delta : array, shape (n,)
        At least three, above zero, with measured inputs in the prediction.

    Raises
    ------
    InputError
        Fewer, or values that are not finite and positive.
    """
    d = positive_values(delta, "delta", LEAST)
    mean = float(np.mean(d))
    return Part(mean, float(np.std(d, ddof=1)) / mean)


def north_american_factor(
    professional: Part,
    n: int,
    *,
    material: Part,
    fabrication: Part,
    design_format: Format,
    coefficients: Coefficients = "printed",
    floor: float = FLOOR,
    where: str = "resistance",
) -> NorthAmericanFactor:
    """Return the resistance factor from tests.

    Parameters
    ----------
    professional : Part
        P_m and V_P, from `professional_part`.
    n : int
        Number of tests behind them, at least three.
    material, fabrication : Part
        M_m, V_M of the material property that governs; F_m, V_F of the dimensions.
    design_format : Format
        One of ``FORMATS``, or one of your own with other loads or another target.
    coefficients : {"printed", "derived"}
        The rounded C_phi and V_Q of the standard, or those that follow from the loads of the format.
    floor : float
        Lower limit on V_P, zero or above.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        Fewer than three tests, unknown coefficients, a lower limit below zero.

    Notes
    -----
    The form is the first-order one of lognormal resistance and load: with means R_m and Q_m,
    beta = ln(R_m/Q_m)/sqrt(V_R² + V_Q²), solved for phi at phi R_n = factored load.

    References
    ----------
    .. [1] AISI S100, North American Specification for the Design of Cold-Formed Steel Structural Members (from memory).
    """
    if coefficients not in get_args(Coefficients):
        known = get_args(Coefficients)
        text = f"The coefficients are 'printed' or 'derived'; got {coefficients!r}."
        raise InputError(Problem(text, suggestion=did_you_mean(str(coefficients), known)))
    positive_number(floor, "The lower limit on V_P", zero=True)
    c_p = float(correction_for_tests(n))
    governs = professional.cov < floor
    v_p = max(professional.cov, floor)
    resistance = material.cov**2 + fabrication.cov**2 + c_p * v_p**2
    means = material.mean * fabrication.mean * professional.mean

    def phi(which: Coefficients) -> float:
        c_phi, v_q = design_format.coefficients(which)
        return c_phi * means * math.exp(-design_format.target * math.sqrt(resistance + v_q**2))

    c_phi, v_q = design_format.coefficients(coefficients)
    other: Coefficients = "derived" if coefficients == "printed" else "printed"
    doubts = []
    if governs:
        text = (
            f"The {n} tests have a coefficient of variation of {professional.cov:.3f}; the lower limit {floor:g} is in "
            "the factor in its place."
        )
        doubts.append(Doubt("floor-on-scatter", text, where))
    return NorthAmericanFactor(
        phi=phi(coefficients), format=design_format, coefficients=coefficients, c_phi=c_phi, v_q=v_q,
        phi_other=phi(other), material=material, fabrication=fabrication, professional=professional, n=int(n),
        c_p=c_p, v_p=v_p, floor_governs=governs, v_total=math.sqrt(resistance + v_q**2), doubts=tuple(doubts),
    )  # fmt: skip
