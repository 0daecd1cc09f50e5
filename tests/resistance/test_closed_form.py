"""Lognormal fractiles and factors in closed form."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.resistance import (
    FractileFactor,
    closed_form,
    combined_cov,
    partial_factor_lognormal,
    partial_factor_normal,
)


def test_fractiles_without_other_scatter_are_those_of_the_lognormal_distribution():
    known = FractileFactor.predictive(0.05)
    found = closed_form(
        [0.1, -0.05], 0.2, math.inf, FractileFactor.constant(known.known), FractileFactor.constant(3.04)
    )
    r_k = stats.lognorm(0.2, scale=np.exp([0.1, -0.05])).ppf(0.05)
    assert found.characteristic == pytest.approx(r_k, rel=1e-12)
    assert found.partial_factor == pytest.approx(math.exp(0.2 * (3.04 - stats.norm.isf(0.05))), rel=1e-12)
    assert found.characteristic / found.design == pytest.approx([found.partial_factor] * 2, rel=1e-14)


def test_two_kinds_of_scatter_follow_annex_d8():
    # Computed with mpmath (30 digits) and numpy, agreeing to 12 digits; the formulas of EN 1990:2002, D.8.3 from
    # memory. There alpha_rt² + alpha_delta² is 0.99939 as V_rt is the first-order sum; here the weights are exact, so
    # the sums of weights are compared after that correction.
    n, q_rt, q_delta, q = 12, 0.0760476479, 0.0379600327, 0.0850211350
    k_n, k_dn = 1.8692161830, 4.0869530392
    log_b = math.log(1.0918925971) - 0.5 * q**2
    form = closed_form(
        log_b, q_delta, n, FractileFactor(1.64, lambda n: k_n), FractileFactor(3.04, lambda n: k_dn), q_rt
    )
    exact = math.hypot(q_rt, q_delta)
    published = (math.log(0.9427664535), math.log(0.8255104686))
    for value, target in zip((form.characteristic[0], form.design[0]), published, strict=True):
        assert (math.log(value) - log_b) * exact / q == pytest.approx(target - log_b, rel=2e-8)
    assert form.log_sd == pytest.approx(exact, rel=1e-15)


def test_predictive_factor_allows_for_the_number_of_tests():
    # EN 1990:2002 Table D1, V_X unknown (from memory): 2.33 for n = 5, 1.92 for n = 10. Printed entries of this row
    # differ from the formula by up to 0.012.
    k = FractileFactor.predictive(0.05)
    assert [k.estimated(5), k.estimated(10)] == pytest.approx([2.33, 1.92], abs=0.012)
    assert k.known == pytest.approx(1.644853627, abs=1e-8)
    assert 1.92 < k.estimated(7.5) < 2.33


def test_factors_of_existing_concrete_structures():
    # exp(alpha_R beta V_R - 1.645 V_f) and (1 - 1.645 V)/(1 - 3.04 V) of the type of fib Bulletin 80 (formulas from
    # memory, alpha_R beta = 3.04, V_R = V_f; values recomputed by separate code to 1e-6).
    v = np.array([0.05, 0.10, 0.15, 0.20])
    lognormal = [1.072240, 1.149699, 1.232753, 1.321807]
    normal = [1.082252, 1.200431, 1.384651, 1.711735]
    assert partial_factor_lognormal(v, v) == pytest.approx(lognormal, abs=1e-6)
    assert partial_factor_normal(v, v) == pytest.approx(normal, abs=1e-6)


@pytest.mark.parametrize(
    ("parts", "conversion", "v_r", "gamma", "printed"),
    [
        ((0.05, 0.05, 0.15), 1.15, 0.165831, 1.488679, 1.5),
        ((0.025, 0.05, 0.04), 1.0, 0.068739, 1.154151, 1.15),
    ],
)
def test_origin_of_the_factors_of_concrete_and_reinforcement(parts, conversion, v_r, gamma, printed):
    # European Concrete Platform, Eurocode 2 Commentary, 2008 (from memory): printed 1.5 and 1.15; V_R and the factor
    # recomputed by separate code.
    combined = combined_cov(*parts)
    assert combined == pytest.approx(v_r, abs=1e-6)
    found = partial_factor_lognormal(combined, parts[-1], conversion=conversion, characteristic=1.64)
    assert found == pytest.approx(gamma, abs=1e-6)
    assert found == pytest.approx(printed, abs=0.015)


def test_wrong_input_is_refused():
    with pytest.raises(InputError, match=r"below 0\.5; got 0\.95"):
        FractileFactor.predictive(0.95)
    with pytest.raises(InputError, match="not below zero"):
        combined_cov(0.1, -0.1)
    with pytest.raises(InputError, match="fractile below zero"):
        partial_factor_normal(0.4, 0.1)
    with pytest.raises(InputError, match="conversion factor is 0"):
        partial_factor_lognormal(0.1, 0.1, conversion=0.0)
