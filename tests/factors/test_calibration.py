"""Optimal factors against general-purpose optimisers, and what is said where they are not unique or not reachable."""

import numpy as np
import pytest
from scipy.optimize import minimize

from calibrate.errors import InputError
from calibrate.factors import calibrate_factors, make_penalty

TARGET = 3.8
CHI = np.linspace(0.1, 0.9, 9)


def calibrated(response, factors, penalty="squared", floor=None):
    return calibrate_factors(response, factors, response.weight, TARGET, make_penalty(penalty), floor)


def free_values(found, factors):
    return np.array([found.optimal.factors[f.name] for f in factors if not f.held])


def objective(response, penalty):
    chosen = make_penalty(penalty)
    weight = response.weight / response.weight.sum()
    return lambda gamma: chosen.objective(response(np.asarray(gamma)).beta - TARGET, weight)


@pytest.mark.parametrize("penalty", ["squared", "asymmetric"])
def test_smooth_optimum_equals_scipy_with_finite_differences(kit, penalty):
    response = kit.response()
    found = calibrated(response, kit.factors, penalty)
    scipy = minimize(
        objective(response, penalty),
        [1.1, 1.5],
        method="L-BFGS-B",
        bounds=[(0.8, 2.0), (1.0, 2.5)],
        options={"ftol": 1e-15, "gtol": 1e-10},
    )
    np.testing.assert_allclose(free_values(found, kit.factors), scipy.x, atol=1e-4)
    assert found.optimal.objective <= scipy.fun + 1e-12


def test_minimax_equals_a_simplex_search(kit):
    response = kit.response()
    found = calibrated(response, kit.factors, "minimax")
    scipy = minimize(
        objective(response, "minimax"),
        free_values(found, kit.factors) + np.array([0.05, -0.05]),
        method="Nelder-Mead",
        options={"xatol": 1e-8, "fatol": 1e-10, "maxiter": 2000},
    )
    assert found.optimal.objective <= scipy.fun + 1e-8
    np.testing.assert_allclose(free_values(found, kit.factors), scipy.x, atol=1e-4)
    # A Chebyshev optimum of two factors: at least three situations share the largest departure.
    departure = np.abs(found.optimal.evaluation.beta - TARGET)
    assert np.sum(departure > departure.max() - 1e-6) >= 3


@pytest.mark.parametrize("penalty", ["squared", "asymmetric", "minimax"])
def test_floor_binds_optimal_and_proposed(kit, penalty):
    response = kit.response()
    loose = calibrated(response, kit.factors, penalty)
    floor = loose.optimal.min + 0.08
    found = calibrated(response, kit.factors, penalty, floor)
    assert found.constraint_failures == ()
    assert found.optimal.min >= floor - 1e-7
    assert found.proposed.min >= floor - 1e-7
    assert found.optimal.objective > loose.optimal.objective
    if penalty == "squared":
        scipy = minimize(
            objective(response, penalty),
            free_values(found, kit.factors) + 0.02,
            method="SLSQP",
            bounds=[(0.8, 2.0), (1.0, 2.5)],
            constraints={"type": "ineq", "fun": lambda g: response(np.asarray(g)).beta - floor},
            options={"ftol": 1e-14},
        )
        np.testing.assert_allclose(free_values(found, kit.factors), scipy.x, atol=1e-4)


def test_a_floor_out_of_reach_is_named_not_relaxed(kit):
    found = calibrated(kit.response(), kit.factors, floor=9.0)
    assert len(found.constraint_failures) == 2
    assert all("9" in text and "smallest β" in text for text in found.constraint_failures)


def test_one_factor_meets_the_target_of_one_situation(kit):
    response = kit.response(
        [kit.rule([0.5])], [kit.free("gamma_M", 1.0, 0.5, 3.0), *kit.factors[1:2], kit.held("gamma_Q", 1.5)]
    )
    found = calibrated(response, response.factors)
    assert found.optimal.evaluation.beta[0] == pytest.approx(TARGET, abs=1e-8)


def test_common_scale_of_all_factors_is_named_as_undetermined(kit):
    factors = (
        kit.free("gamma_M", 1.1, 0.8, 2.0),
        kit.free("gamma_G", 1.2, 0.5, 3.0),
        kit.free("gamma_Q", 1.5, 0.5, 3.0),
    )
    response = kit.response(factors=factors)
    found = calibrated(response, factors)
    doubts = [d for d in found.doubts if d.code == "undetermined-factors"]
    assert len(doubts) == 1
    assert "gamma_M by 1 %" in doubts[0].message or "gamma_M by" in doubts[0].message
    # gamma_M up, both others down by as much: the size stays as it is.
    direction = found.diagnostics.undetermined[0]
    np.testing.assert_allclose(direction / direction[0], [1, -1, -1], atol=1e-4)
    # The member of the family nearest to the present factors: no shift along it brings it nearer.
    present = np.array([1.1, 1.2, 1.5])
    width = np.array([1.2, 2.5, 2.5])
    gamma = free_values(found, factors)
    shifted = gamma * np.array([1.001, 1 / 1.001, 1 / 1.001])
    back = gamma / np.array([1.001, 1 / 1.001, 1 / 1.001])
    change = [np.linalg.norm((g - present) / width) for g in (shifted, gamma, back)]
    assert change[1] == min(change)


def test_bound_that_determines_a_factor_is_named(kit):
    factors = (kit.free("gamma_M", 1.1, 1.0, 1.12), *kit.factors[1:])
    found = calibrated(kit.response(factors=factors), factors)
    bound = [d for d in found.doubts if d.code == "factor-at-bound"]
    assert [d.where for d in bound] == ["factors.gamma_M"]
    assert "upper bound 1.12" in bound[0].message


def test_fewer_situations_than_factors_is_refused(kit):
    response = kit.response([kit.rule([0.4, 0.6], weight=[1.0, 0.0])])
    with pytest.raises(
        InputError, match=r"2 factors are free .*only 1 design situation with weight is there"
    ):
        calibrated(response, kit.factors)


def test_splitting_a_situation_in_two_halves_changes_nothing(kit):
    whole = calibrated(kit.response([kit.rule(CHI)]), kit.factors)
    halves = kit.rule([*CHI[:-1], CHI[-1], CHI[-1]], weight=[1.0] * 8 + [0.5, 0.5])
    split = calibrated(kit.response([halves]), kit.factors)
    np.testing.assert_allclose(free_values(split, kit.factors), free_values(whole, kit.factors), rtol=1e-9)


def test_held_factors_keep_their_value_in_every_set(kit):
    found = calibrated(kit.response(), kit.factors)
    for chosen in (found.present, found.optimal, found.proposed):
        assert chosen.factors["gamma_G"] == 1.2


def test_without_free_factors_the_rule_is_assessed(kit):
    factors = tuple(kit.held(n, v) for n, v in [("gamma_M", 1.1), ("gamma_G", 1.2), ("gamma_Q", 1.5)])
    found = calibrated(kit.response(factors=factors), factors)
    assert found.proposed.factors == found.present.factors
    assert found.lattice is None
