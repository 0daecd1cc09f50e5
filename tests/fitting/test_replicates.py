"""Refits of many simulated samples at once are the fits of each."""

import numpy as np
import pytest

from calibrate.fitting import FITTABLE, fit_family
from calibrate.fitting.batch_newton import fit_rows
from calibrate.fitting.registry import model_of
from calibrate.fitting.replicates import ONE_BY_ONE, replicate

SEED = 2


def fitted(case, n=200, **more):
    found = case.fit(case.sample(n, SEED), **more)
    assert found.converged
    return found


def test_all_families_take_part(cases):
    assert {case.family for case in cases.values()} == set(FITTABLE)


def test_each_row_has_its_own_fit(case):
    fit = fitted(case)
    several = 8
    found = replicate(fit, several, 40, np.random.default_rng(1))
    assert found.asked == several
    assert found.x.shape[0] > several // 2
    assert np.all(np.diff(found.x, axis=1) >= 0.0)
    held = {name: value for name, value in fit.fixed.items() if np.isfinite(value) or case.family != "beta"}
    for i, row in enumerate(found.x):
        single = fit_family(row, case.family, fixed=held, estimate=case.estimate)
        assert single.converged, i
        scale = {name: max(abs(p), float(np.std(row))) for name, p in single.parameters.items()}
        for name, values in found.laws.parameters.items():
            expected = single.parameters[name]
            value = float(np.broadcast_to(values, (found.x.shape[0], 1))[i, 0])
            assert value == pytest.approx(expected, abs=1e-6 * scale[name]), (i, name)


def test_rows_without_a_maximum_are_left_out(cases):
    """Normal samples: about half show no heavier tails than the normal family."""
    case = cases["student_t"]
    model, start = model_of("student_t"), dict(case.parameters)
    x = np.random.default_rng(3).normal(7.0, 2.0, (40, 30))
    rows = fit_rows(model, {}, case.free, start, x)
    single = [fit_family(row, "student_t") for row in x]
    np.testing.assert_array_equal(np.isfinite(rows["freedom"]), [f.converged for f in single])
    for i in np.flatnonzero(np.isfinite(rows["freedom"])):
        assert rows["location"][i] == pytest.approx(single[i].parameters["location"], abs=1e-6)
        assert np.log(rows["freedom"][i]) == pytest.approx(np.log(single[i].parameters["freedom"]), abs=1e-4)


def test_blocks_change_no_result(cases):
    case = cases["gev"]
    x = np.random.default_rng(3).gumbel(4.0, 0.5, (300, 60))  # more values than one block holds
    start = dict(case.parameters)
    whole = fit_rows(model_of("gev"), {}, case.free, start, x)
    later = fit_rows(model_of("gev"), {}, case.free, start, x[[0, *range(200, 300)]])
    for name in case.free:
        np.testing.assert_array_equal(whole[name][200:], later[name][1:])


def test_the_same_generator_gives_the_same_bits(cases):
    fit = fitted(cases["weibull"])
    one, other = (replicate(fit, 20, 30, np.random.default_rng(5)) for _ in range(2))
    np.testing.assert_array_equal(one.x, other.x)
    np.testing.assert_array_equal(one.laws.parameters["shape"], other.laws.parameters["shape"])


@pytest.mark.parametrize(
    ("method", "family", "options"),
    [
        ("moments", "gamma", {}),
        ("moments", "gev", {}),
        ("l_moments", "gumbel", {}),
        ("probability_paper", "lognormal", {}),
        ("known_cov", "weibull", {"cov": 0.2}),
        ("likelihood_unbiased", "weibull", {}),
        ("lower_tail", "weibull", {"fraction": 0.4}),
    ],
)
def test_other_methods_are_repeated(cases, method, family, options):
    fit = fitted(cases[family], 30, method=method, options=options)
    found = replicate(fit, 4, 30, np.random.default_rng(1))
    for i, row in enumerate(found.x):
        single = cases[family].fit(row, method=method, options=options)
        for name, values in found.laws.parameters.items():
            assert values[i, 0] == pytest.approx(single.parameters[name], rel=1e-9)


def test_rows_whose_moments_no_member_has_are_left_out():
    values = np.linspace(0.01, 0.99, 40) ** np.tile([0.2, 5.0], 20)  # most near the bounds
    fit = fit_family(values, "beta", method="moments")
    found = replicate(fit, 60, 4, np.random.default_rng(1))
    assert 0 < found.x.shape[0] < 60
    for i, row in enumerate(found.x):
        single = fit_family(row, "beta", method="moments")
        assert found.laws.parameters["shape_1"][i, 0] == pytest.approx(single.parameters["shape_1"], rel=1e-9)


def test_fewer_samples_where_they_are_fitted_one_by_one(cases):
    fit = fitted(cases["normal"], 30, method="l_moments")
    assert replicate(fit, 999, 30, np.random.default_rng(1)).asked == ONE_BY_ONE
