"""Samples whose likelihood has no maximum, or one where the usual theory fails: told, never a silent number."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.fitting import fit_family


@pytest.mark.parametrize(
    ("name", "values", "given", "reason"),
    [
        ("student_t", range(1, 20), {}, "no heavier tails than the normal family"),
        ("student_t", [1, 1, 1, 1, 1, 2], {}, "grows without bound around equal or nearly equal"),
        ("gev", [1, 2, 4, 3.5], {}, "approaches the largest value"),
        ("gev", [3.51, 3.63, 3.85, 3.95, 6.45, 10.48], {}, "lie close together at the lower end"),
        ("truncated_normal", [0.1, 0.14, 0.36, 0.56, 3.2, 5.4], {"lower": 0}, "scattered more than any"),
        ("truncated_normal", [1, 1.1, 9.9, 10], {"lower": 0, "upper": 11}, "scattered more than any"),
    ],
)
def test_a_missing_maximum_is_told(name, values, given, reason):
    found = fit_family(list(values), name, fixed=given)
    assert found.status == "failed"
    assert reason in found.reason
    assert found.distribution is None
    assert found.parameters == {}


@pytest.mark.parametrize(
    ("name", "values", "reason"),
    [
        ("weibull3", [1, 2, 4, 3.5], "the family gumbel_min is the limit"),
        ("lognormal3", [1, 2, 4, 3.5], "the family normal is the limit"),
        ("weibull3", [1, 1, 1, 1, 2, 2, 3, 5], "approaches the smallest value"),
        ("lognormal3", [1, 1, 1, 1, 2, 2, 3, 5], "approaches the smallest value"),
    ],
)
def test_a_missing_threshold_is_told(name, values, reason):
    assert reason in fit_family(values, name, estimate=["threshold"]).reason


def test_a_local_maximum_beside_a_spike_is_doubted():
    values = np.array([-3.0, -2.0, -1.0, -4.0, -2.5, -3.3])
    found = fit_family(values, "weibull3", estimate=["threshold"])
    assert found.converged
    assert "unbounded-likelihood" in [d.code for d in found.doubts]


@pytest.mark.parametrize(
    ("name", "values", "estimate"),
    [
        ("weibull3", stats.weibull_min(1.5).rvs(400, random_state=1), ("threshold",)),
        ("gev", stats.genextreme(0.7).rvs(400, random_state=1), ()),
        ("uniform", stats.uniform.rvs(size=40, random_state=1), ()),
    ],
)
def test_errors_are_withheld_where_the_theory_gives_none(name, values, estimate):
    found = fit_family(values, name, estimate=estimate)
    assert found.converged
    assert all(math.isnan(e) for e in found.standard_errors.values())
    assert np.all(np.isnan(found.covariance))
    assert "not-regular" in [d.code for d in found.doubts]


def test_a_heavy_tail_without_standard_deviation_is_doubted():
    values = stats.invweibull(1.5).rvs(200, random_state=1)
    assert [d.code for d in fit_family(values, "frechet").doubts] == ["no-standard-deviation"]
