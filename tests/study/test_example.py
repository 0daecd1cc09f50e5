"""The example of the study format, read as it stands."""

import hashlib
from pathlib import Path

import numpy as np
import pytest

from calibrate.study import read_study


def test_head_and_target(project):
    study = project.read()
    assert study.title == "Rupture of threaded bars in balcony connectors"
    assert study.summary == "One paragraph for the report."
    assert study.reference_period == 50.0
    assert study.seed == 20261
    assert study.target_beta == 3.8
    assert (study.objective.penalty, study.objective.floor) == ("squared", 3.3)
    assert study.doubts == ()


def test_where_it_came_from(project):
    study = project.read()
    assert study.project == project.folder.resolve()
    assert study.file == "studies/connectors/study.toml"
    assert study.path == project.study_file.resolve()
    assert study.shown == str(project.study_file)
    assert study.sha256 == hashlib.sha256(project.study_file.read_bytes()).hexdigest()
    assert study.lines["rules.bar_rupture.limit_state"] == 54
    assert study.lines["factors.gamma_M.lower"] == 61


def test_records(project):
    sample = project.read().records["bar_strength"]
    assert sample.n == 12
    assert sample.unit.text == "MPa"
    assert sample.si_values[0] == pytest.approx(561e6, rel=1e-15)


def test_quantities_are_in_si(project):
    quantities = project.read().quantities
    assert quantities["f_uk"].value == pytest.approx(5e8, rel=1e-15)
    assert quantities["P"].value == pytest.approx(1e5, rel=1e-15)
    assert quantities["P"].unit.text == "kN"


def test_grid_and_weights(project):
    study = project.read()
    situations = study.situations
    assert situations.n == 8
    assert situations.columns["chi"].tolist() == [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8]
    assert situations.weight == pytest.approx(np.full(8, 0.125), rel=1e-15)
    assert situations.derived["Q_k"] == pytest.approx(np.linspace(0.1, 0.8, 8) * 1e5, rel=1e-14)
    assert situations.derived["G_k"] == pytest.approx((1 - np.linspace(0.1, 0.8, 8)) * 1e5, rel=1e-14)
    assert [a.name for a in study.axes] == ["chi"]


def test_variables(project):
    variables = project.read().variables
    fitted = variables["f_u"]
    assert (fitted.families, fitted.records, fitted.unit.text) == (("lognormal",), "bar_strength", "MPa")
    given = variables["G"]
    assert given.families == ("normal",)
    assert given.texts == {"mean": "1.0 * G_k", "cov": "0.1"}
    assert given.arguments["mean"].value({"G_k": 7.0}) == 7.0
    assert given.arguments["cov"].constant == 0.10
    assert (given.unit.text, given.period) == ("N", None)
    assert variables["theta_R"].unit.text == ""
    assert str(variables["Q"].dimension) == "mass·length/time²"


def test_rule(project):
    study = project.read()
    rule = study.rules["bar_rupture"]
    assert rule.size == "A_d"
    assert (rule.size_unit.text, rule.size_unit.factor) == ("mm^2", 1e-6)
    assert str(study.size_dimensions["bar_rupture"]) == "length²"
    assert rule.variables == ("f_u", "theta_R", "G", "Q")
    assert rule.weight == 1.0
    assert rule.limit_state.margin.value(
        {"theta_R": 1.0, "A_d": 2.0, "f_u": 3.0, "G": 1.0, "Q": 2.0}
    ) == pytest.approx(3.0)


def test_factors(project):
    m, q, g = project.read().factors
    assert (m.name, m.present, m.lower, m.upper, m.step, m.held) == ("gamma_M", 1.25, 1.0, 2.0, 0.05, False)
    assert (q.name, q.lower, q.held) == ("gamma_Q", 1.2, False)
    assert (g.name, g.present, g.held) == ("gamma_G", 1.35, True)


def test_defaults(project):
    text = """
format = 1
[study]
title = "Least"
reference_period = 1
[target]
beta = 4
[quantities]
S_k = 2.0
[variables.R]
family = "normal"
mean = "1.2 * z"
cov = 0.1
[rules.only]
design_check = "z >= gamma * S_k"
sizes = "z"
limit_state = "R >= S_k"
[factors]
gamma = 1.5
"""
    study = project.read(text=text)
    assert study.seed == 0
    assert study.summary == ""
    assert study.objective.penalty == "squared"
    assert study.objective.floor is None
    assert study.rules["only"].weight == 1.0
    assert study.situations.n == 1
    assert study.situations.weight.tolist() == [1.0]
    assert study.rules["only"].size_unit.text == ""
    assert study.weight_text == "1"


def test_example_without_what_is_optional_is_the_same(project):
    study = project.read(
        ('size_unit = "mm^2"               # optional where the check implies the dimension\n', ""),
        ("[correlations]                   # optional; product-moment coefficients of basic variables\n", ""),
        ("floor = 3.3                      # optional: no situation's beta below this\n", ""),
    )
    assert study.rules["bar_rupture"].size_unit.text == "m^2"
    assert study.objective.floor is None


def test_byte_order_mark_and_windows_line_ends(project, example):
    project.study_file.write_bytes(b"\xef\xbb\xbf" + example.replace("\n", "\r\n").encode())
    study = read_study(str(project.study_file))
    assert study.rules["bar_rupture"].size == "A_d"
    assert study.lines["rules.bar_rupture.limit_state"] == 54


@pytest.mark.parametrize("name", ["facade_bracket", "pipe_gallery"])
def test_demonstration_studies_leave_no_doubt(name):
    study = read_study(Path(__file__).parents[2] / "studies" / name / "study.toml")
    assert study.doubts == ()
    assert study.situations.weight.sum() == pytest.approx(1.0, rel=1e-14)
    assert all(rule.variables for rule in study.rules.values())
