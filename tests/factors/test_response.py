"""Beta and its exact derivatives by factor, and the factor that one situation requires."""

import dataclasses

import numpy as np
import pytest

from calibrate.factors import required_factor
from calibrate.reliability import CorrelatedPair

CHI = np.linspace(0.1, 0.9, 9)


def rules(kit):
    sized = kit.rule(CHI, share=0.6)
    with_size_in_a_moment = kit.rule(
        CHI,
        name="corroded",
        check="z**2 / gamma_M >= gamma_G * (1 - chi) + gamma_Q * chi + 0.2 * gamma_Q * z",
        limit_state="(z - c)**2 * R >= G + Q + 0.1 * Q * z",
        more=(kit.variable("c", "normal", mean="0.03 * z", sd="0.005 + 0.002 * z"),),
        share=0.4,
    )
    return [sized, with_size_in_a_moment]


def test_derivatives_agree_with_central_differences(kit):
    response = kit.response(rules(kit))
    gamma = np.array([1.15, 1.6])
    here = response(gamma)
    assert here.valid.all()
    h = 1e-5
    for k in range(2):
        sides = [response(gamma + d * np.eye(2)[k]).beta for d in (-h, h)]
        np.testing.assert_allclose(here.jacobian[k], (sides[1] - sides[0]) / (2 * h), rtol=1e-6, atol=1e-8)


def test_warm_start_changes_beta_by_rounding_only(kit):
    response = kit.response(rules(kit))
    near, there = response(np.array([1.2, 1.5])), np.array([1.25, 1.65])
    np.testing.assert_allclose(response(there, near).beta, response(there).beta, atol=1e-9)


def test_workers_change_no_bit(kit):
    one, two = (kit.response(rules(kit), workers=w)(np.array([1.2, 1.5])) for w in (1, 2))
    np.testing.assert_array_equal(one.beta, two.beta)
    np.testing.assert_array_equal(one.jacobian, two.jacobian)


def test_each_row_may_have_its_own_factors(kit):
    response = kit.response(rules(kit))
    sets = [np.array([1.1, 1.4]), np.array([1.3, 1.7])]
    rows = np.arange(18) % 2
    mixed = response(np.array(sets)[rows].T)
    for k, gamma in enumerate(sets):
        alone = response(gamma)
        np.testing.assert_allclose(mixed.beta[rows == k], alone.beta[rows == k], atol=1e-12)
        np.testing.assert_allclose(mixed.jacobian[:, rows == k], alone.jacobian[:, rows == k], rtol=1e-9)


@pytest.mark.parametrize("name", ["gamma_M", "gamma_Q"])
def test_required_factor_gives_the_target(kit, name):
    response = kit.response(rules(kit))
    at = response(np.array([1.1, 1.5]))
    required = required_factor(response, name, 3.8, at)
    index = ["gamma_M", "gamma_Q"].index(name)
    found = np.isfinite(required)
    assert found.sum() >= 12
    gamma = np.repeat(at.gamma[:, None], 18, axis=1)
    gamma[index] = np.where(found, required, gamma[index])
    np.testing.assert_allclose(response(gamma).beta[found], 3.8, atol=1e-7)
    # Where none is given, beta stays on one side of the target over the whole reach.
    factor = response.free[index]
    for bound in (factor.lower / 3, factor.upper * 3):
        gamma[index] = bound
        low_or_high = response(gamma).beta[~found] - 3.8
        gamma[index] = np.where(bound < 1, factor.upper * 3, factor.lower / 3)
        assert (low_or_high * (response(gamma).beta[~found] - 3.8) > 0).all()


def test_required_factor_is_closed_form_for_a_lognormal_ratio(kit):
    # R/S with both lognormal: beta = ln(z m_R / m_S) / s, hence gamma_M = exp(beta s) m_S / m_R in every situation.
    chi = np.array([0.3, 0.6])
    only = kit.rule(chi, check="z / gamma_M >= 1", limit_state="z * R >= S")
    variables = (
        kit.variable("R", "lognormal", median="1", log_sd="0.1"),
        kit.variable("S", "lognormal", median="1", log_sd="0.3"),
    )
    only = type(only)(only.name, only.check, "z", only.limit_state, variables, only.values, only.weight, 1.0)
    response = kit.response([only], [kit.free("gamma_M", 1.1, 0.8, 4.0)])
    required = required_factor(response, "gamma_M", 3.8, response(np.array([1.1])))
    np.testing.assert_allclose(required, np.exp(3.8 * np.hypot(0.1, 0.3)), rtol=1e-8)


def test_a_factor_without_effect_has_no_required_value(kit):
    response = kit.response([kit.rule(CHI)], [*kit.factors, kit.free("gamma_other", 1.0, 0.5, 2.0)])
    required = required_factor(response, "gamma_other", 3.8, response(np.array([1.1, 1.5, 1.0])))
    assert np.isnan(required).all()


def test_derivatives_with_a_correlated_model_that_depends_on_the_size(kit):
    """The scatter of the strength is fixed, so that its shape, and the coefficient in normal space, follow the size."""
    strength = kit.variable("S", "lognormal", mean="1.2 * z", sd="0.15")
    moved = dataclasses.replace(
        kit.rule(CHI, limit_state="S * R >= G + Q", more=(strength,)),
        correlations=(CorrelatedPair("S", "Q", -0.5), CorrelatedPair("S", "R", 0.6)),
    )
    response = kit.response([moved])
    gamma = np.array([1.15, 1.6])
    here = response(gamma)
    assert here.valid.all()
    h = 1e-4
    for k in range(2):
        near = [response(gamma + d * h * np.eye(2)[k]).beta for d in (-1, 1)]
        far = [response(gamma + d * h * np.eye(2)[k]).beta for d in (-2, 2)]
        difference = (8.0 * (near[1] - near[0]) - (far[1] - far[0])) / (12.0 * h)
        np.testing.assert_allclose(here.jacobian[k], difference, rtol=2e-7, atol=1e-8)
