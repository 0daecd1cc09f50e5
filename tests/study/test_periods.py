"""Reference periods: conversion of actions, beta for other periods, targets of another period, size of a strength."""

import json

import numpy as np
import pytest
from scipy.special import log_ndtr, ndtri_exp

import calibrate
from calibrate.errors import InputError
from calibrate.study.export import table_files

STUDY = """
format = 1
[study]
title = "Mast"
reference_period = {period}
{study}
[target]
beta = 4.2
{target}
[quantities]
W = "10 kN"
[variables.R]
family = "weibull"
mean = "30 kN"
cov = 0.12
role = "resistance"
{resistance}
[variables.Q]
family = "gumbel"
mean = "8 kN"
cov = 0.2
period = 1
role = "action"
{action}
[situations.axes]
c = [1.0, 1.3]
[rules.mast]
limit_state = "R >= c * Q"
[factors]
gamma = 1.0
"""


@pytest.fixture
def study(tmp_path):
    def write(period=1, **parts):
        texts = {"study": "", "target": "", "resistance": "", "action": "", **parts}
        path = tmp_path / "study.toml"
        path.write_text(STUDY.format(period=period, **texts), encoding="utf-8")
        return calibrate.read_study(path)

    return write


def betas(result):
    return result.situations["beta_proposed"].to_numpy()


def test_beta_of_another_period_is_reported_both_ways(study):
    result = calibrate.run(study(study="other_periods = [50, 10]"))
    fifty, ten = result.other_periods
    assert (fifty.period, ten.period) == (50, 10)
    np.testing.assert_allclose(fifty.direct, betas(calibrate.run(study(period=50))), atol=1e-9)
    # EN 1990 C.3: Φ(β_n) = Φ(β_1)^n, here in log space.
    exact = ndtri_exp(50 * log_ndtr(betas(result)))
    np.testing.assert_allclose(fifty.converted, exact, atol=1e-9)
    assert (fifty.converted < ten.converted).all()
    # The resistance is the same in every year, so that failures go together.
    assert (fifty.direct > fifty.converted).all()
    first = json.loads(table_files(result)["result.json"])["other_periods"][0]
    assert first["period"] == 50
    assert first["direct"]["mean"] == pytest.approx(fifty.direct.mean(), abs=1e-12)
    assert first["converted"]["min"] == pytest.approx(fifty.converted.min(), abs=1e-12)


def test_longer_independence_intervals_lower_beta_less(study):
    yearly = calibrate.run(study(study="other_periods = [50]")).other_periods[0]
    blocks = calibrate.run(study(study="other_periods = [50]\nindependence = 10")).other_periods[0]
    assert (blocks.converted > yearly.converted).all()
    # Published by hand for ten-year blocks: 4.7 for one year becomes 4.36 for fifty (five blocks).
    assert float(ndtri_exp(5 * log_ndtr(4.7))) == pytest.approx(4.36, abs=0.005)


def test_an_action_without_period_cannot_follow(study):
    action = 'conversion = "none"\nconversion_reason = "largest load of the crane, limited by its drive"'
    result = calibrate.run(study(study="other_periods = [50]", action=action))
    codes = {d.code: d.message for d in result.doubts}
    assert "Q stayed as given" in codes["period-not-followed"]
    np.testing.assert_allclose(result.other_periods[0].direct, betas(result), atol=1e-9)


def test_conversion_may_be_left_out_with_a_reason_only(study):
    action = 'conversion = "none"\nconversion_reason = "limited by its drive"'
    result = calibrate.run(study(period=50, action=action))
    np.testing.assert_allclose(betas(result), betas(calibrate.run(study(period=1))), atol=1e-9)
    (doubt,) = [d for d in result.doubts if d.code == "period-not-converted"]
    assert "limited by its drive" in doubt.message
    with pytest.raises(InputError, match="without a reason"):
        study(period=50, action='conversion = "none"')


def test_a_target_of_another_period_stops_with_both_values(study):
    with pytest.raises(InputError) as caught:
        study(period=50, target="period = 1")
    message = str(caught.value)
    # EN 1990 Table B2 and C.3: 4.2 for one year is 3.21 for fifty under full independence.
    for part in (
        "target.period is 1 year, but every β of this study is for 50 years",
        "4.2 for 1 year is 3.21 for 50",
    ):
        assert part in message
    assert study(period=50, target="period = 50").target_beta == 4.2


def test_the_size_of_a_strength_is_weakest_link(study):
    plain, large = (calibrate.run(study(resistance=text)) for text in ("", "size_ratio = 20"))
    (before,), (after,) = (r.variables["R"].mean for r in (plain, large))
    shape = float(plain.variables["R"].parameters["shape"][0])
    # Weibull: strength falls with (A1/A2)^(1/m).
    assert after / before == pytest.approx(20 ** (-1 / shape), rel=1e-10)
    assert (betas(large) < betas(plain)).all()


def test_a_renewal_rate_is_the_period_between_renewals(study, tmp_path):
    text, path = study(period=50).text, tmp_path / "renewed.toml"

    def run(key):
        path.write_text(text.replace("period = 1\nrole", f"{key}\nrole"), encoding="utf-8")
        return betas(calibrate.run(calibrate.read_study(path)))

    np.testing.assert_array_equal(run("renewal_rate = 52"), run(f"period = {1 / 52!r}"))
    with pytest.raises(InputError, match="and so does period; state one"):
        run("renewal_rate = 52\nperiod = 1")


def test_uneven_stress_counts_by_its_equivalent_size(study):
    """A rectangular beam in even bending: 1/(2 (m + 1)) of its volume counts (W. Weibull 1939, from memory)."""
    profile = 'stress_profile = "2 * position - 1"\nsize_ratio = 20'
    plain, bent = (calibrate.run(study(resistance=text)) for text in ("", profile))
    m = float(plain.variables["R"].parameters["shape"][0])
    (before,), (after,) = (r.variables["R"].mean for r in (plain, bent))
    assert after / before == pytest.approx((20.0 / (2.0 * (m + 1.0))) ** (-1.0 / m), rel=1e-9)
    alone = calibrate.run(study(resistance='stress_profile = "position ** 2"'))
    assert alone.variables["R"].mean[0] / before == pytest.approx(
        (1.0 / (2.0 * m + 1.0)) ** (-1.0 / m), rel=1e-9
    )


@pytest.mark.parametrize(
    ("parts", "words"),
    [
        ({"resistance": 'stress_profile = "W"'}, "must be dimensionless"),
        (
            {"resistance": 'stress_profile = "c * position"'},
            "uses 'c'; a stress profile is written in quantities",
        ),
        ({"resistance": 'stress_profile = "posit"'}, "posit"),
        ({"action": 'stress_profile = "position"'}, 'needs family = "weibull"'),
        ({"resistance": 'size_ratio = "3 mm"'}, "must be dimensionless"),
        ({"resistance": "size_ratio = 2\nperiod = 1"}, "a variable cannot have both"),
        ({"resistance": 'conversion = "none"\nconversion_reason = "x"'}, "has no period"),
        ({"study": "other_periods = [0]"}, "greater than 0"),
        ({"study": "independence = -1"}, "greater than 0"),
        ({"action": 'conversion = "sometimes"'}, "must be one of"),
    ],
)
def test_slips_of_periods_are_told(study, parts, words):
    with pytest.raises(InputError, match=words):
        study(**parts)


def test_a_size_ratio_that_is_not_positive_is_refused_with_its_variable(study):
    with pytest.raises(InputError, match=r"Variable 'R', stress_profile: The stress is nowhere above zero"):
        calibrate.run(study(resistance='stress_profile = "0 - position"'))
    with pytest.raises(InputError, match="Variable 'R', size_ratio"):
        calibrate.run(study(resistance='size_ratio = "1 - c"'))
