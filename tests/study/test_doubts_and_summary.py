"""What a study leaves to think about, and what ``check`` says that it understood."""

import json

import pytest

from calibrate.study import check_summary

FILE = "../../datasets/connectors/bar-strength.csv"
UNUSED = (
    ('P = "100 kN"', 'P = "100 kN"\nspare = 3'),
    ("[variables.Q]", '[variables.idle]\nfamily = "normal"\nmean = 1\ncov = 0.1\n\n[variables.Q]'),
    ('Q_k = "chi * P"', 'Q_k = "chi * P"\nW_k = "2 * P"'),
    ("gamma_G = 1.35 ", "gamma_0 = 1.1\ngamma_G = 1.35 "),
    ("[quantities] ", f'[records.more]\nfile = "{FILE}"\ncolumn = "f_u"\n[quantities] '),
)  # fmt: skip


def test_what_is_not_used_is_told_and_kept(project):
    study = project.read(*UNUSED)
    assert {(d.code, d.where) for d in study.doubts} == {
        ("unused-quantity", "quantities.spare"),
        ("unused-variable", "variables.idle"),
        ("unused-derived", "situations.derived.W_k"),
        ("unused-factor", "factors.gamma_0"),
        ("unused-records", "records.more"),
    }
    assert "idle" in study.variables
    assert all(d.message.endswith(".") for d in study.doubts)


@pytest.mark.parametrize(
    ("change", "code"),
    [
        (("floor = 3.3", "floor = 3.9"), "floor-above-target"),
        (("gamma_G = 1.35 ", "gamma_G = -1.35 "), "negative-factor"),
        (("lower = 1.0, upper = 2.0", "lower = -1.0, upper = 2.0"), "negative-factor"),
    ],
)
def test_what_is_allowed_but_odd(project, change, code):
    assert [d.code for d in project.read(change).doubts] == [code]


def test_a_check_without_size_determines_nothing(project):
    study = project.read(
        ('sizes = "A_d"                    # solved in each situation so that the check is just met\n', ""),
        ('size_unit = "mm^2"               # optional where the check implies the dimension\n', ""),
        ('P = "100 kN"', 'P = "100 kN"\nA_d = "400 mm^2"'),
    )
    rule = study.rules["bar_rupture"]
    assert (rule.size, rule.size_unit) == (None, None)
    assert study.size_dimensions == {}
    assert [(d.code, d.where) for d in study.doubts] == [("check-without-size", "rules.bar_rupture")]


def test_a_rule_may_have_neither_check_nor_size(project):
    study = project.read(
        ('design_check = "A_d * f_uk / gamma_M >= gamma_G * G_k + gamma_Q * Q_k"\n', ""),
        ('sizes = "A_d"                    # solved in each situation so that the check is just met\n', ""),
        ('size_unit = "mm^2"               # optional where the check implies the dimension\n', ""),
        ('P = "100 kN"', 'P = "100 kN"\nA_d = "400 mm^2"'),
        ('"theta_R * A_d * f_u >= G + Q"', '"theta_R * A_d * f_u / gamma_M >= gamma_G * G + gamma_Q * Q"'),
    )
    assert study.rules["bar_rupture"].design_check is None
    assert [d.code for d in study.doubts] == ["unused-quantity"]  # f_uk


def test_correlations_of_zero_are_accepted(project):
    assert project.read(('# "f_u, theta_R" = 0.2', '"f_u, theta_R" = 0.0\n"G, Q" = 0')).doubts == ()


def test_asymmetric_penalty_has_a_scale(project):
    assert project.read(('penalty = "squared"', 'penalty = "asymmetric"\nd = 0.3')).objective.scale == 0.3
    assert project.read(('penalty = "squared"', 'penalty = "asymmetric"')).objective.scale == 0.23


def test_descriptions(project):
    study = project.read(
        ("gamma_M = { present", 'gamma_M = { description = "resistance", present'),
        ("weight = 1.0 ", 'description = "rupture of the bar"\nweight = 1.0 '),
    )
    assert study.factor_descriptions == {"gamma_M": "resistance"}
    assert study.rules["bar_rupture"].description == "rupture of the bar"


def test_summary_of_the_example(project):
    summary = check_summary(project.read())
    assert json.loads(json.dumps(summary, allow_nan=False)) == summary
    assert summary["format"] == "calibrate-check/1"
    assert summary["study"]["title"] == "Rupture of threaded bars in balcony connectors"
    assert (summary["target_beta"], summary["reference_period"], summary["seed"]) == (3.8, 50.0, 20261)
    sample = summary["records"]["bar_strength"]
    assert (sample["n"], sample["unit"], sample["file"], sample["column"]) == (
        12, "MPa", "../../datasets/connectors/bar-strength.csv", "f_u"
    )  # fmt: skip
    assert summary["quantities"]["P"].items() >= {"unit": "kN", "text": "100 kN", "of": None}.items()
    assert summary["quantities"]["P"]["value"] == pytest.approx(100.0)
    assert summary["variables"]["f_u"]["family"] == "lognormal"
    assert summary["variables"]["f_u"]["records"] == "bar_strength"
    assert summary["variables"]["G"]["dimension"] == "mass·length/time²"
    assert summary["variables"]["G"]["arguments"] == {"mean": "1.0 * G_k", "cov": "0.1"}
    assert summary["situations"]["count"] == 8
    assert summary["situations"]["axes"] == {"chi": {"n": 8, "smallest": 0.1, "largest": 0.8, "unit": ""}}
    derived = summary["situations"]["derived"]["Q_k"]
    assert derived["expression"] == "chi * P"
    assert (derived["smallest"], derived["largest"], derived["unit"]) == (
        pytest.approx(1e4), pytest.approx(8e4), "N"
    )  # fmt: skip
    assert summary["weights"] == {"expression": "1", "positive": 8, "smallest": 0.125, "largest": 0.125}
    rule = summary["rules"]["bar_rupture"]
    assert rule["factors"] == ["gamma_M", "gamma_Q", "gamma_G"]
    assert rule["variables"] == ["f_u", "theta_R", "G", "Q"]
    assert (rule["size"], rule["size_dimension"], rule["size_unit"]) == ("A_d", "length²", "mm^2")
    assert summary["factors"]["gamma_M"] == {
        "present": 1.25, "held": False, "lower": 1.0, "upper": 2.0, "step": 0.05
    }  # fmt: skip
    assert summary["factors"]["gamma_G"]["lower"] is None
    assert summary["objective"] == {"penalty": "squared", "floor": 3.3, "d": None, "index": "form"}
    assert summary["doubts"] == []


def test_summary_of_a_table(project):
    project.write_beside("situations.csv", "name,chi,share\na,0.1,1\nb,0.4,2\nb,0.3,0\n")
    study = project.read(
        ("[situations.axes]                # full factorial grid\n", ""),
        ("chi = { from = 0.1, to = 0.8, count = 8 }", ""),
        ('weight = "1" ', 'table = "situations.csv"\nweight = "share" '),
        ('family = "lognormal"             # a family', 'family = "best"             # a family'),
    )  # fmt: skip
    summary = check_summary(study)
    assert summary["situations"]["table"] == "situations.csv"
    assert summary["situations"]["axes"] == {}
    assert summary["situations"]["columns"]["name"] == {"labels": 2, "n": 3}
    assert summary["situations"]["columns"]["chi"]["largest"] == 0.4
    assert summary["weights"] == {
        "expression": "share", "positive": 2, "smallest": 0.0, "largest": pytest.approx(2 / 3)
    }  # fmt: skip
    assert summary["variables"]["f_u"]["family"] == "best"
