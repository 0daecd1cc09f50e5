"""Few tests are allowed for once between a sample and a rule, and a limit of the mean is no fractile."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

import calibrate
from calibrate.errors import InputError

STUDY = """
format = 1
[study]
title = "Rods"
reference_period = 50
[target]
beta = 3.0
[records.rods]
file = "rods.csv"
column = "F"
unit = "kN"
[quantities]
{quantities}
[variables.F]
records = "rods"
family = "{family}"
{variable}
[variables.S]
family = "normal"
mean = "20 kN"
cov = 0.2
[situations.derived]
F_d = "F_h * 1.0"
[rules.rods]
design_check = "z * F_d / gamma >= F_0"
sizes = "z"
limit_state = "z * F >= S"
[rules.more]
design_check = "y * F_d / gamma >= F_0"
sizes = "y"
limit_state = "y * F >= S"
[factors]
gamma = {{ present = 1.0, lower = 0.2, upper = 9.0 }}
"""
# Self-made: sixteen invented strengths in kN.
VALUES = np.array(
    [61.2, 55.8, 66.1, 58.4, 70.3, 62.5, 49.7, 64.8, 59.9, 67.4, 53.6, 60.7, 72.9, 57.1, 63.3, 65.0]
)


@pytest.fixture
def study(tmp_path):
    """Read a study whose rules reach the quantity F_k through F_h and F_d."""

    def write(value, variable="", family="lognormal", values=VALUES, half='"0.5 * F_k"'):
        (tmp_path / "rods.csv").write_text(
            "F\n" + "".join(f"{v!r}\n" for v in values.tolist()), encoding="utf-8"
        )
        quantities = f'F_0 = "20 kN"\nF_k = {value}\nF_h = {half}'
        text = STUDY.format(quantities=quantities, variable=variable, family=family)
        (tmp_path / "study.toml").write_text(text, encoding="utf-8")
        return calibrate.read_study(tmp_path / "study.toml")

    return write


def value(**keys):
    shown = ", ".join(f'{k} = "{v}"' if isinstance(v, str) else f"{k} = {v}" for k, v in keys.items())
    return "{ " + shown + " }"


WITH_CONFIDENCE = value(characteristic_of="F", fractile=0.05, confidence=0.75)
PREDICTED = value(characteristic_of="F", fractile=0.05, route="prediction")
PLAIN = value(characteristic_of="F", fractile=0.05)


@pytest.mark.parametrize("typed", [WITH_CONFIDENCE, PREDICTED])
def test_few_tests_in_the_value_and_in_the_variable_are_refused(study, typed):
    with pytest.raises(InputError) as caught:
        study(typed, "predictive = true")
    (found,) = caught.value.problems  # once, although two rules have it
    assert found.message == (
        "On the path records.rods to rules.rods the small number of tests (n = 16) is allowed for twice: by a factor "
        "k_n for the number of tests in 'quantities.F_k' and by a predictive distribution in 'variables.F'. "
        "(quantities.F_k in line 14, variables.F in line 16)"
    )
    assert found.line == 14
    assert "Keep one" in found.suggestion


@pytest.mark.parametrize(
    ("typed", "variable"), [(WITH_CONFIDENCE, ""), (PREDICTED, ""), (PLAIN, "predictive = true")]
)
def test_one_allowance_passes(study, typed, variable):
    assert "few-tests-not-allowed-for" not in {d.code for d in study(typed, variable).doubts}


def test_no_allowance_is_doubted_where_the_tests_are_few(study):
    found = [d for d in study(PLAIN).doubts if d.code == "few-tests-not-allowed-for"]
    assert [d.where for d in found] == ["quantities.F_k"]
    many = np.exp(np.random.default_rng(2).normal(4.0, 0.1, 40))
    assert "few-tests-not-allowed-for" not in {d.code for d in study(PLAIN, values=many).doubts}


def test_a_value_that_no_check_reaches_is_on_no_path(study):
    made = study(WITH_CONFIDENCE, "predictive = true", half='"30 kN"')
    assert made.variables["F"].predictive


def floored(least, **more):
    keys = {"characteristic_of": "F", "fractile": 0.05, "confidence": 0.75, "least_cov": least, **more}
    return value(**keys)


def test_a_floor_that_acts_is_an_allowance_and_one_that_does_not_is_none(study):
    with pytest.raises(
        InputError, match=r"allowed for twice: by a factor k_n .* lower limit on the coefficient"
    ):
        study(floored(0.20))
    assert float(VALUES.std(ddof=1) / VALUES.mean()) > 0.08
    study(floored(0.08))


def test_confidence_and_floor_of_one_standard_are_one_allowance(study):
    # EN 14358: sd of logarithms at least 0.05, k_s at 75 % confidence (from memory).
    close = 60.0 * (VALUES / 60.0) ** 0.3
    made = study(floored(math.sqrt(math.expm1(0.05**2))), values=close)
    assert made.quantities["F_k"].characteristic.floored
    assert "one-procedure-two-allowances" in {d.code for d in made.doubts}
    with pytest.raises(InputError, match="allowed for twice"):
        study(floored(math.sqrt(math.expm1(0.05**2)), confidence=0.95), values=close)


# A limit of the mean for a fractile


def doubted(study, typed, **more):
    made = study(value(value=f"{typed!r} kN", of="F", **{"is": "5 % fractile"}), **more)
    return [d for d in calibrate.run(made).doubts if d.code == "limit-of-the-mean"]


MEAN, ERROR = float(VALUES.mean()), float(stats.sem(VALUES))
LOG_MEAN, LOG_ERROR = float(np.log(VALUES).mean()), float(stats.sem(np.log(VALUES)))


@pytest.mark.parametrize(
    ("typed", "words"),
    [
        (
            MEAN - stats.t.ppf(0.975, 15) * ERROR,
            "lower end of the two-sided 95 % interval for the mean of these",
        ),
        (
            MEAN - stats.t.ppf(0.95, 15) * ERROR,
            "lower end of the one-sided 95 % interval for the mean of these",
        ),
        (
            MEAN - stats.t.ppf(0.995, 15) * ERROR,
            "lower end of the two-sided 99 % interval for the mean of these",
        ),
        (
            math.exp(LOG_MEAN - stats.t.ppf(0.99, 15) * LOG_ERROR),
            "lower end of the one-sided 99 % interval for the mean of the logarithms of these",
        ),
    ],
)
def test_a_limit_of_the_mean_typed_as_a_fractile_is_doubted(study, typed, words):
    (doubt,) = doubted(study, float(typed))
    assert doubt.where == "quantities.F_k"
    assert words in doubt.message
    # One-sided tolerance limit of a normal sample of logarithms from the non-central t.
    k = stats.nct.ppf(0.75, 15, stats.norm.ppf(0.95) * 4.0) / 4.0
    limit = math.exp(LOG_MEAN - k * LOG_ERROR * 4.0)
    assert f"at 75 % confidence is {limit:.4g} kN (lognormal)" in doubt.message
    assert f"{100 * (1 - limit / typed):.2g} % below the typed value" in doubt.message


@pytest.mark.parametrize("typed", [40.0, 50.0, 55.0])
def test_other_values_are_none(study, typed):
    assert doubted(study, typed) == []


def test_the_fractile_itself_is_no_slip_where_both_agree(study):
    # So little scatter that the fractile lies within a percent of the limits of the mean.
    close = 60.0 * (VALUES / 60.0) ** 0.02
    log = np.log(close)
    fractile = math.exp(log.mean() - stats.norm.ppf(0.95) * log.std())
    limit = math.exp(log.mean() - stats.t.ppf(0.995, 15) * stats.sem(log))
    assert fractile == pytest.approx(limit, rel=0.01)
    assert doubted(study, fractile, values=close) == []
