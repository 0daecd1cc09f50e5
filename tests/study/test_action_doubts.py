"""What is doubted of actions: mixed periods, fractiles of another period, time-invariant terms, bounded actions."""

import numpy as np
import pytest
from scipy.stats import genextreme

import calibrate
from calibrate.distributions import distribution
from calibrate.errors import InputError

STUDY = """
format = 1
[study]
title = "Frame"
reference_period = 50
[target]
beta = 3.8
{records}
[quantities]
{quantities}
[variables.R]
family = "lognormal"
mean = "4 kPa"
cov = 0.1
role = "resistance"
{R}
[variables.q]
family = "gumbel"
{q}
role = "action"
[variables.S]
family = "gumbel"
mean = "0.5 kPa"
cov = 0.3
role = "action"
{S}
[rules.frame]
limit_state = "R >= q + S"
[factors]
gamma = 1.0
"""
ANNUAL = 'mean = "0.5 kPa"\ncov = 0.25\nperiod = 1\n'


@pytest.fixture
def run_study(tmp_path):
    def run(values=None, **parts):
        texts = {"records": "", "quantities": "", "R": "", "q": ANNUAL, "S": "period = 50", **parts}
        if values is not None:
            rows = "\n".join(f"{v:.6g}" for v in values)
            (tmp_path / "q.csv").write_text(f"q\n{rows}\n", encoding="utf-8")
        path = tmp_path / "study.toml"
        path.write_text(STUDY.format(**texts), encoding="utf-8")
        return calibrate.run(calibrate.read_study(path))

    return run


@pytest.fixture
def doubts(run_study):
    return lambda *values, **parts: {d.code: d for d in run_study(*values, **parts).doubts}


def typed(value, kind):
    return f'q_k = {{ value = "{value:.6g} kPa", of = "q", is = "{kind}" }}'


def test_an_annual_fractile_of_an_annual_model_is_right(doubts, run_study):
    """0.5 kPa with V = 0.25: the 98 % value of a year is 0.5 (1 + 0.25 · 2.592) kPa, by the formula of Gumbel."""
    level = float(distribution("gumbel", mean=0.5, cov=0.25).ppf(0.98))
    assert level == pytest.approx(0.5 * (1.0 + 0.25 * 2.5923), rel=1e-4)
    quantities = typed(level, "98 % fractile")
    assert not {"fractile-differs", "fractile-of-another-period"} & set(doubts(quantities=quantities))
    (bond,) = run_study(quantities=quantities).biases
    assert bond.fractile == pytest.approx((0.98, 0.98), abs=1e-6)
    assert bond.period == 1.0
    # The mean is that of the reference period: 0.98 of a year is 0.364 of fifty.
    assert bond.bias[0] > 1.0


def test_an_annual_fractile_of_a_model_for_fifty_years_is_doubted(doubts):
    level = float(distribution("gumbel", mean=0.5, cov=0.25).ppf(0.98))
    fifty = distribution("gumbel", mean=0.5, cov=0.25)
    scale = float(fifty.parameters["scale"])
    mean = 0.5 + scale * np.log(50.0)
    model = f'mean = "{mean:.8g} kPa"\nsd = "{0.125:.8g} kPa"\n'
    doubt = doubts(quantities=typed(level, "98 % fractile"), q=model)["fractile-of-another-period"]
    assert doubt.where == "quantities.q_k"
    assert "in its model for 50 years the probability below this value is 36.417 %" in doubt.message
    assert "that fractile of the maximum of 1 year" in doubt.message


def test_a_fractile_of_no_period_is_doubted_as_before(doubts):
    found = doubts(quantities=typed(0.3, "98 % fractile"))
    assert "fractile-differs" in found
    assert "for 1 year" in found["fractile-differs"].message


def test_a_model_factor_is_not_raised_to_a_period(doubts):
    doubt = doubts(S="period = 1\n").get("constant-in-time-converted")
    assert doubt is None
    doubt = doubts(R="period = 1")["constant-in-time-converted"]
    assert doubt.where == "variables.R"
    assert "role resistance" in doubt.message


def test_maxima_without_a_period_beside_annual_ones_are_doubted(doubts):
    assert "period-not-stated" not in doubts()
    doubt = doubts(S="")["period-not-stated"]
    assert doubt.where == "variables.S"
    assert "counts as for 50 years, while 'q' is given for 1 year" in doubt.message


def test_design_points_beyond_what_can_occur_are_doubted(doubts):
    assert "beyond-upper-limit" not in doubts(S='period = 50\nupper_limit = "30 kPa"')
    doubt = doubts(S='period = 50\nupper_limit = "0.6 kPa"')["beyond-upper-limit"]
    assert doubt.where == "variables.S"
    assert "beyond its upper limit 0.6 kPa" in doubt.message


RECORDS = '[records.q]\nfile = "q.csv"\ncolumn = "q"\nunit = "kPa"'
FITTED = 'records = "q"\nperiod = 1\n'


def test_a_bounded_action_with_an_unbounded_family_is_doubted(doubts):
    """Eighty quantiles of a distribution with the shape −0.4 (scipy: c = 0.4), whose end is 1.25; then of a Gumbel."""
    p = (np.arange(80) + 0.5) / 80
    bounded = 0.75 + 0.2 * genextreme(0.4).ppf(p)
    doubt = doubts(bounded, records=RECORDS, q=FITTED)["bounded-action"]
    assert doubt.where == "variables.q"
    assert "the end about 1.2" in doubt.message
    assert "bounded-action" not in doubts(0.75 + 0.2 * genextreme(0.0).ppf(p), records=RECORDS, q=FITTED)


@pytest.mark.parametrize(
    ("limit", "words"),
    [
        ('upper_limit = "3 kN"', "upper_limit is a force"),
        ('upper_limit = "R"', "R"),
        ("upper_limits = 3", "unknown key 'upper_limits'"),
    ],
)
def test_slips_of_limits_are_told(doubts, limit, words):
    with pytest.raises(InputError, match=words):
        doubts(S=f"period = 50\n{limit}")
