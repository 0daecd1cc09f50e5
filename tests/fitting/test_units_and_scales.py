"""A change of unit, or of the origin where a family has no own one, changes nothing but unit and origin."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibrate.fitting import compare, fit_family

SEED = 2


@pytest.fixture
def scaled_fit():
    def fit(case, values, factor, **options):
        fixed = case.scaled(case.fixed, factor)
        return fit_family(values * factor, case.family, fixed=fixed, estimate=case.estimate, **options)

    return fit


@pytest.mark.parametrize("factor", [1e-6, 25.4, 1e12])
def test_likelihood_in_another_unit(case, scaled_fit, factor):
    values = case.sample(30, SEED)
    first, second = case.fit(values), scaled_fit(case, values, factor)
    assert second.parameters == pytest.approx(case.scaled(first.parameters, factor), rel=1e-9)
    errors = case.scaled(first.standard_errors, factor)
    assert second.standard_errors == pytest.approx(errors, rel=1e-7, nan_ok=True)
    # Densities carry the inverse of the unit.
    shift = -values.size * np.log(factor)
    assert second.log_likelihood - first.log_likelihood == pytest.approx(shift, rel=1e-10)
    assert second.anderson_darling == pytest.approx(first.anderson_darling, rel=1e-9)


@pytest.mark.parametrize("factor", [1e-6, 25.4, 1e12])
@pytest.mark.parametrize("name", ["gumbel", "lognormal", "weibull", "gamma", "frechet", "uniform", "gev"])
def test_moments_in_another_unit(cases, scaled_fit, name, factor):
    case = cases[name]
    values = case.sample(30, SEED)
    first, second = (scaled_fit(case, values, f, method="moments") for f in (1.0, factor))
    assert second.parameters == pytest.approx(case.scaled(first.parameters, factor), rel=1e-10)
    assert second.standard_errors == pytest.approx(case.scaled(first.standard_errors, factor), rel=1e-7)


@pytest.mark.parametrize("factor", [1e-6, 1e12])
def test_ranking_in_another_unit(cases, factor):
    values = cases["weibull"].sample(40, SEED)
    first, second = (compare(values * f) for f in (1.0, factor))
    assert [c.family for c in first.candidates] == [c.family for c in second.candidates]
    gaps = [[c.aicc - fit.best.aicc for c in fit.candidates if c.converged] for fit in (first, second)]
    assert len(gaps[0]) > 4
    np.testing.assert_allclose(*gaps, atol=1e-7)


@pytest.mark.parametrize(
    "name", ["normal", "gumbel", "gumbel_min", "gev", "student_t", "weibull3, estimated"]
)
@settings(max_examples=12)
@given(shift=st.floats(-1e3, 1e3), factor=st.floats(1e-3, 1e3))
def test_families_with_location_follow_any_shift(cases, name, shift, factor):
    case = cases[name]
    values = case.sample(30, SEED)
    first = case.fit(values)
    second = case.fit(shift + factor * values)
    moved = case.scaled(first.parameters, factor)
    origin = {"location", "threshold"} & moved.keys()
    moved |= {p: moved[p] + shift for p in origin}
    # The shift rounds the values, by 2e-16 of themselves; measured in their scatter, with room for the fit.
    rounding = 1e-11 * (1.0 + abs(shift) / (factor * np.std(values)))
    for p, value in second.parameters.items():
        size = first.standard_errors[p] * (factor if p in origin or p == "scale" else 1.0)
        assert abs(value - moved[p]) <= rounding * size + 1e-12 * abs(moved[p]), p


@given(power=st.floats(0.2, 5.0), factor=st.floats(1e-3, 1e3))
def test_lognormal_follows_any_power(cases, power, factor):
    values = cases["lognormal"].sample(30, SEED)
    first, second = (fit_family(v, "lognormal").parameters for v in (values, factor * values**power))
    assert second["median"] == pytest.approx(factor * first["median"] ** power, rel=1e-12)
    assert second["log_sd"] == pytest.approx(power * first["log_sd"], rel=1e-12)


@given(factor=st.floats(-10.0, -0.1))
def test_smallest_values_are_mirrored_largest_values(cases, factor):
    values = cases["gumbel"].sample(30, SEED)
    first, second = fit_family(values, "gumbel"), fit_family(factor * values, "gumbel_min")
    assert second.parameters["location"] == pytest.approx(factor * first.parameters["location"], rel=1e-10)
    assert second.parameters["scale"] == pytest.approx(-factor * first.parameters["scale"], rel=1e-10)


def test_order_of_the_values_does_not_matter(case):
    values = case.sample(30, SEED)
    first, second = case.fit(values), case.fit(values[::-1])
    assert second.parameters == pytest.approx(first.parameters, rel=1e-9)
    assert second.anderson_darling == pytest.approx(first.anderson_darling, rel=1e-9)
