"""What a variable stands for."""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting.lots import lot_scatter, population

KINDS = ("whole population", "lot mean", "within a lot")


@pytest.fixture
def measured(uneven):
    return lot_scatter(uneven.values, uneven.lots)


@pytest.fixture
def logarithmic(uneven):
    return lot_scatter(np.exp(0.2 * uneven.values), uneven.lots, scale="logarithmic")


def test_scatter_as_measured(measured):
    whole, mean, within = (population(measured, kind) for kind in KINDS)
    assert {p.family for p in (whole, mean, within)} == {"normal"}
    assert {p.mean for p in (whole, mean, within)} == {measured.mean}
    assert (whole.sd, mean.sd, within.sd) == (measured.total_sd, measured.between_sd, measured.within_sd)
    assert whole.sd == pytest.approx(math.hypot(mean.sd, within.sd), rel=1e-12)


def test_logarithmic_scatter_obeys_the_laws_of_total_mean_and_variance(logarithmic):
    whole, mean, within = (population(logarithmic, kind) for kind in KINDS)
    assert whole.parameters == pytest.approx(
        {"median": math.exp(logarithmic.mean), "log_sd": logarithmic.total_sd}
    )
    assert mean.parameters["log_sd"] == logarithmic.between_sd
    assert within.parameters == pytest.approx(
        {"median": math.exp(logarithmic.mean), "log_sd": logarithmic.within_sd}
    )
    assert mean.mean == pytest.approx(whole.mean, rel=1e-12)
    # A lot with mean m has the variance m² (exp(within²) - 1).
    own = math.expm1(logarithmic.within_sd**2) * (mean.sd**2 + mean.mean**2)
    assert whole.sd**2 == pytest.approx(mean.sd**2 + own, rel=1e-12)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("scale", ["measured", "logarithmic"])
def test_parameters_and_moments_belong_together(request, scale, kind):
    found = population(request.getfixturevalue(scale), kind)
    other = distribution(found.family, **found.parameters)
    assert (found.mean, found.sd) == pytest.approx((float(other.mean), float(other.sd)), rel=1e-12)
    assert found.stands_for == kind
    assert not found.doubts


def test_a_known_lot_has_its_shrunken_mean(measured, logarithmic):
    share = measured.shares[3]
    found = population(measured, "within a lot", lot=share.name)
    assert found.parameters == {"location": share.shrunken_mean, "scale": measured.within_sd}
    found = population(logarithmic, "within a lot", lot=share.name)
    assert found.parameters["median"] == pytest.approx(
        math.exp(logarithmic.shares[3].shrunken_mean), rel=1e-14
    )


def test_no_scatter_between_lots_makes_their_mean_a_constant():
    scatter = lot_scatter([1.0, 3.0, 1.5, 2.5], list("aabb"))
    found = population(scatter, "lot mean", where="variables.R")
    assert (found.family, found.parameters, found.sd) == ("constant", {"value": 2.0}, 0.0)
    assert [(d.code, d.where) for d in found.doubts] == [("no-scatter", "variables.R")]
    assert float(distribution(found.family, **found.parameters).mean) == 2.0


def test_one_lot_stands_for_the_population_only_with_a_doubt():
    scatter = lot_scatter([1.0, 3.0, 1.5, 2.5], ["a"] * 4)
    found = population(scatter, "whole population")
    assert found.sd == scatter.within_sd == population(scatter, "within a lot").sd
    assert [d.code for d in found.doubts] == ["one-lot"]
    with pytest.raises(InputError, match="only one lot"):
        population(scatter, "lot mean")


def test_single_specimens_tell_the_total_only():
    scatter = lot_scatter([1.0, 3.0, 1.5, 2.5], list("abcd"))
    assert population(scatter, "whole population").sd == scatter.total_sd
    for kind in KINDS[1:]:
        with pytest.raises(InputError, match="every lot has one specimen"):
            population(scatter, kind)


@pytest.mark.parametrize(
    ("kind", "lot", "told"),
    [
        ("lot means", None, "Did you mean 'lot mean'"),
        ("within a lot", "lot 9", "There is no lot 'lot 9'"),
        ("lot mean", "lot 1", "is about all lots"),
    ],
)
def test_wrong_choice_is_told(measured, kind, lot, told):
    with pytest.raises(InputError, match=told):
        population(measured, kind, lot=lot)
