"""Design situations from tables and from axes in every form."""

import numpy as np
import pytest

TABLE = """\
line,member,share,Q_k,length
A,hanger,0.2,12.5,3000
A,strut,0.3,20,4500
B,hanger,0.5,7.5,1500
"""

STUDY = """\
format = 1
[study]
title = "Hangers"
reference_period = 50
[target]
beta = 3.8
[quantities]
f_yk = "355 MPa"
[variables.f_y]
family = "lognormal"
mean = "1.1 * f_yk"
cov = 0.06
unit = "MPa"
[variables.Q]
family = "gumbel"
mean = "0.6 * Q_k"
cov = 0.3
[situations]
table = "situations.csv"
weight = "share"
[situations.units]
Q_k = "kN"
length = "mm"
[situations.derived]
E = "Q_k * length / length"
[rules.tension]
design_check = "A * f_yk / gamma_M >= gamma_Q * E"
sizes = "A"
limit_state = "A * f_y >= Q"
[factors]
gamma_M = 1.0
gamma_Q = { present = 1.5, lower = 1.0, upper = 2.0 }
"""


@pytest.fixture
def hangers(project):
    project.write_beside("situations.csv", TABLE)
    return project


def test_table(hangers):
    study = hangers.read(text=STUDY)
    situations = study.situations
    assert situations.n == 3
    assert list(situations.columns) == ["line", "member", "share", "Q_k", "length"]
    assert situations.columns["Q_k"] == pytest.approx([12500.0, 20000.0, 7500.0], rel=1e-15)
    assert situations.columns["length"] == pytest.approx([3.0, 4.5, 1.5], rel=1e-15)
    assert situations.columns["member"].tolist() == ["hanger", "strut", "hanger"]
    assert situations.units["Q_k"].text == "kN"
    assert situations.units["share"].text == ""
    assert situations.weight == pytest.approx([0.2, 0.3, 0.5], rel=1e-15)
    assert study.table == "situations.csv"
    assert study.axes == ()
    assert study.weight_text == "share"
    assert study.doubts == ()


def test_weight_by_a_column_with_a_unit(hangers):
    study = hangers.read(('weight = "share"', 'weight = "length"'), text=STUDY)
    assert study.situations.weight == pytest.approx([3.0 / 9, 4.5 / 9, 1.5 / 9], rel=1e-15)


def test_weight_by_an_expression_of_columns(hangers):
    study = hangers.read(
        ('weight = "share"', 'weight = "where(Q_k >= 2 * f_yk * 1e-6 * length**2, 3, 1)"'), text=STUDY
    )
    limit = 2 * 355.0 * np.array([3.0, 4.5, 1.5]) ** 2
    raw = np.where(np.array([12500.0, 20000.0, 7500.0]) >= limit, 3.0, 1.0)
    assert study.situations.weight == pytest.approx(raw / raw.sum(), rel=1e-15)


def test_bare_number_as_weight(hangers):
    study = hangers.read(('weight = "share"', "weight = 2"), text=STUDY)
    assert study.situations.weight == pytest.approx([1 / 3] * 3, rel=1e-15)


@pytest.mark.parametrize(
    ("change", "line", "pieces"),
    [
        (('weight = "share"', 'weight = "member"'), 20, ["may not use table columns of text; 'member'", "labels"]),
        (('weight = "share"', 'weight = "share * Q_k"'), 20, ["must be dimensionless", "a force"]),
        (('length = "mm"', 'lenght = "mm"'), 23, ["situations.units names 'lenght'", "'length'?"]),
        (('length = "mm"', "length = 5"), 23, ["situations.units.length must be a text; got 5"]),
        (('length = "mm"', 'length = "nm_"'), 23, ["situations.units.length"]),
        (('"Q_k * length / length"', '"Q_k + length"'), 25, ["situations.derived.E", "a force", "a length"]),
        (('"0.6 * Q_k"', '"0.6 * q_k"'), 16, ["variables.Q.mean: the name 'q_k' is not defined", "'Q_k'?"]),
        (('table = "situations.csv"', 'table = "situation.csv"'), 19, ["table", "'situations.csv'?"]),
        (('table = "situations.csv"', 'table = "."'), 19, ["is a folder"]),
        (('E = "Q_k * length / length"', 'E = "Q_k"\nshare = 1'), 26, [
            "'share' stands for two things: a table column (line 19) and a derived quantity (line 26)"]),
    ],
)  # fmt: skip
def test_slips_around_a_table(hangers, change, line, pieces):
    problems = hangers.problems(change, text=STUDY)
    told = "\n".join(str(p) for p in problems)
    assert len(problems) == 1, told
    assert problems[0].line == line
    for piece in pieces:
        assert piece in told


def test_column_with_a_few_slips_says_where(hangers):
    hangers.write_beside("situations.csv", TABLE.replace("20,", "2O,"))
    (problem,) = hangers.problems(text=STUDY)
    assert (problem.file, problem.line) == ("situations.csv", 3)
    assert "'2O'" in problem.message


def test_column_of_text_without_unit_used_as_number(hangers):
    hangers.write_beside("situations.csv", TABLE.replace("0.3,", "0.3x,"))
    (problem,) = hangers.problems(text=STUDY)
    assert problem.line == 20
    assert "'share' is a table column of text" in problem.message
    assert "situations.csv:3" in str(problem)
    assert "'0.3x'" in str(problem)


def test_names_of_columns(hangers):
    hangers.write_beside(
        "situations.csv", TABLE.replace("line,", "status,").replace(",member", ",Type of member")
    )
    problems = hangers.problems(text=STUDY)
    told = "\n".join(str(p) for p in problems)
    assert [p.line for p in problems] == [19, 19]
    assert "'status' cannot name an axis or a table column" in told
    assert "'Type of member' is not a name" in told
    assert "'Type_of_member'?" in told


def test_missing_table_does_not_make_its_columns_unknown(hangers):
    problems = hangers.problems(
        ('table = "situations.csv"', 'table = "other.csv"'), ("cov = 0.06", "cov = true"), text=STUDY
    )
    assert [p.line for p in problems] == [12, 19]


def test_table_with_faulty_cells(hangers):
    hangers.write_beside("situations.csv", TABLE.replace("0.5,7.5", ",7.5"))
    (problem,) = hangers.problems(text=STUDY)
    assert (problem.file, problem.line) == ("situations.csv", 4)


def test_weights_of_a_column_that_is_negative(hangers):
    hangers.write_beside("situations.csv", TABLE.replace("0.2,", "-0.2,"))
    (problem,) = hangers.problems(text=STUDY)
    assert problem.line == 20
    assert "zero or positive" in problem.message


# ---------------------------------------------------------------------------- axes

AXIS = "chi = { from = 0.1, to = 0.8, count = 8 }"


def axis_of(project, text):
    study = project.read((AXIS, f"{AXIS}\npsi = {text} #"))
    (axis,) = (a for a in study.axes if a.name == "psi")
    return axis, study


@pytest.mark.parametrize(
    ("text", "values", "unit"),
    [
        ("{ from = 0.1, to = 0.8, count = 8 }", [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8], ""),
        ("{ from = 0, to = 1, count = 4 }", [0.0, 1 / 3, 2 / 3, 1.0], ""),
        ("{ from = 0.1, to = 0.7, step = 0.1 }", [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7], ""),
        ("{ from = 0, to = 1, step = 0.33333333333333 }", [0.0, 0.33333333333333, 0.66666666666666, 1.0], ""),
        ("{ from = 1, to = 1, count = 1 }", [1.0], ""),
        ("{ from = 1, to = 1, step = 0.5 }", [1.0], ""),
        ("{ from = -2, to = 2, step = 2 }", [-2.0, 0.0, 2.0], ""),
        ("[3, 1, 2]", [3.0, 1.0, 2.0], ""),
        ('["1/3", "2/3"]', [1 / 3, 2 / 3], ""),
        ("{ values = [60, 120], unit = \"mm\" }", [0.06, 0.12], "mm"),
        ("{ from = 100, to = 300, count = 3, unit = \"kN\" }", [1e5, 2e5, 3e5], "kN"),
        ('{ from = "100 kN", to = "0.3 MN", step = "50000 N" }', [1e5, 1.5e5, 2e5, 2.5e5, 3e5], "kN"),
        ('["1 m", "1500 mm", 0]', [1.0, 1.5, 0.0], "m"),
        ('{ values = ["1 m", "1500 mm"], unit = "cm" }', [1.0, 1.5], "cm"),
        ('{ from = "10 %", to = "30 %", count = 3 }', [0.1, 0.2, 0.3], "%"),
    ],
)  # fmt: skip
def test_forms_of_an_axis(project, text, values, unit):
    axis, study = axis_of(project, text)
    assert np.asarray(axis.values) == pytest.approx(values, rel=1e-14, abs=1e-300)
    assert axis.unit.text == unit
    assert study.situations.n == 8 * len(values)
    assert study.situations.units["psi"].text == unit
    # psi is not used by any rule: told, never refused
    assert [(d.code, d.where) for d in study.doubts] == [("unused-axis", "situations.axes.psi")]


def test_last_axis_varies_fastest(project):
    _, study = axis_of(project, "[7, 5]")
    assert study.situations.columns["psi"].tolist() == [7.0, 5.0] * 8
    assert study.situations.columns["chi"][:4].tolist() == [0.1, 0.1, 0.2, 0.2]


def test_step_that_misses_the_end(project):
    axis, study = axis_of(project, "{ from = 0, to = 1, step = 0.4 }")
    assert axis.values.tolist() == [0.0, 0.4, 0.8]
    assert "axis-stops-short" in {d.code for d in study.doubts}


def test_repeated_values(project):
    axis, study = axis_of(project, "[1, 1.0, 2]")
    assert axis.values.size == 3
    assert "axis-repeats-values" in {d.code for d in study.doubts}


def test_no_axes_at_all(project):
    problems = project.problems((AXIS, ""), ('"(1 - chi) * P"', '"P"'), ('"chi * P"', '"P"'))
    assert [(p.line, p.message) for p in problems] == [(43, "situations.axes holds no axis.")]


def test_description_of_an_axis(project):
    study = project.read(
        (AXIS, 'chi = { values = [0.1, 0.2], description = "share of the variable action" }')
    )
    assert study.axis_descriptions == {"chi": "share of the variable action"}


def test_axis_over_several_lines_points_to_the_value(project):
    (problem,) = project.problems((AXIS, 'chi = [\n  0.1,\n  0.2,\n  "high",\n]'))
    assert problem.line == 47
    assert "chi[3]" in problem.message
