"""Proposed factors against exhaustive search of the lattice."""

import itertools

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.factors import calibrate_factors, levels, make_penalty

TARGET = 3.8


@pytest.mark.parametrize(
    ("lower", "upper", "step", "expected"),
    [
        (1.0, 1.2, 0.05, [1.0, 1.05, 1.1, 1.15, 1.2]),
        (1.01, 1.19, 0.05, [1.05, 1.1, 1.15]),
        (0.3, 0.9, 0.3, [0.3, 0.6, 0.9]),
        (1.0, 1.0, 0.1, [1.0]),
    ],
)
def test_levels_are_multiples_as_their_decimals_read(kit, lower, upper, step, expected):
    assert levels(kit.free("gamma", 1.0, lower, upper, step)).tolist() == expected


def test_a_step_without_a_multiple_between_the_bounds_is_refused(kit):
    with pytest.raises(
        InputError, match=r"Factor gamma: no multiple of its step 0.5 lies between 1.1 and 1.4"
    ):
        levels(kit.free("gamma", 1.2, 1.1, 1.4, 0.5))


def whole_lattice(response, penalty, floor):
    chosen, weight = make_penalty(penalty), response.weight / response.weight.sum()
    best = (np.inf, None)
    for point in itertools.product(*(levels(f) for f in response.free)):
        beta = response(np.array(point)).beta
        if floor is None or beta.min() >= floor:
            best = min(best, (chosen.objective(beta - TARGET, weight), point))
    return best


@pytest.mark.parametrize("penalty", ["squared", "asymmetric", "minimax"])
@pytest.mark.parametrize("floor", [None, 3.65])
@pytest.mark.parametrize("step", [0.1, 0.14])
def test_the_search_finds_the_best_point_of_the_whole_lattice(kit, penalty, floor, step):
    factors = (
        kit.free("gamma_M", 1.1, 0.8, 1.6, step),
        kit.held("gamma_G", 1.2),
        kit.free("gamma_Q", 1.5, 1.0, 2.5, step),
    )
    response = kit.response(factors=factors)
    found = calibrate_factors(response, factors, response.weight, TARGET, make_penalty(penalty), floor)
    value, point = whole_lattice(response, penalty, floor)
    assert [found.proposed.factors["gamma_M"], found.proposed.factors["gamma_Q"]] == list(point)
    assert found.proposed.objective == pytest.approx(value, abs=1e-9)
    assert found.lattice.complete
    assert len(found.candidates) == 10
    assert found.lattice.evaluated < found.lattice.points
    fine = [c.objective for c in found.candidates if c.meets_floor]
    assert fine == sorted(fine)


def test_rounding_together_beats_rounding_one_by_one(kit):
    """Rounding each factor by itself must not be better; on a coarse lattice it is worse."""
    factors = (
        kit.free("gamma_M", 1.1, 0.8, 2.0, 0.2),
        kit.held("gamma_G", 1.2),
        kit.free("gamma_Q", 1.5, 1.0, 3.0, 0.5),
    )
    response = kit.response(factors=factors)
    costs = []
    for target in (3.0, 3.4, 3.8, 4.2):
        found = calibrate_factors(response, factors, response.weight, target, make_penalty("squared"))
        costs.append(found.lattice.rounded_singly.objective - found.proposed.objective)
    assert min(costs) >= 0.0
    assert max(costs) > 1e-3


def test_ties_go_to_the_smallest_change_then_to_names(kit):
    # gamma_A and gamma_B only act through their product: (1.0, 1.2) and (1.2, 1.0) are the same rule.
    check = "z / (gamma_A * gamma_B) >= 1.2 * (1 - chi) + 1.5 * chi"
    rule = kit.rule(np.linspace(0.1, 0.9, 5), check=check)

    def proposed(a, b):
        factors = (kit.free("gamma_B", b, 1.0, 1.4, 0.2), kit.free("gamma_A", a, 1.0, 1.4, 0.2))
        response = kit.response([rule], factors)
        found = calibrate_factors(response, factors, response.weight, 3.7, make_penalty("squared"))
        return found.proposed.factors

    first = proposed(1.2, 1.0)
    assert (first["gamma_A"], first["gamma_B"]) == (1.2, 1.0)
    second = proposed(1.0, 1.2)
    assert (second["gamma_A"], second["gamma_B"]) == (1.0, 1.2)
    even = proposed(1.1, 1.1)  # the same change for both: the name that comes first takes the smaller value
    assert (even["gamma_A"], even["gamma_B"]) == (1.0, 1.2)


def test_a_factor_without_step_stays_at_its_optimum(kit):
    factors = (
        kit.free("gamma_M", 1.1, 0.8, 2.0, 0.05),
        kit.held("gamma_G", 1.2),
        kit.free("gamma_Q", 1.5, 1.0, 2.5),
    )
    response = kit.response(factors=factors)
    found = calibrate_factors(response, factors, response.weight, TARGET, make_penalty("squared"))
    assert found.proposed.factors["gamma_Q"] == found.optimal.factors["gamma_Q"]
    assert found.proposed.factors["gamma_M"] in levels(factors[0])
