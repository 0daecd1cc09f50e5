"""All problems of a file are told together, sorted by line, and nothing else ever comes out of the reader."""

import re

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.study import read_study


def problems_of(path):
    """The problems of a study, none if it can be read; any other exception goes through."""
    try:
        read_study(path)
    except InputError as error:
        assert error.problems  # noqa: PT017 - an error without a reason is what this looks for
        return error.problems
    return ()


EVERYTHING_WRONG = """\
format = 1
colour = "red"

[study]
title = 5
reference_period = -1
seed = 0.5

[target]
beta = "3.8"

[records.strength]
file = "no-such-file.csv"
column = "f"
unit = "MPb"

[quantities]
P = "100 kM"
a = "b + 1"
b = "a"
r = nan

[variables.R]
records = "strengths"
family = "lognormal"

[variables.S]
family = "gumble"
mean = "P * chi"
cov = 0.1

[variables.T]
family = "normal"
mean = 1.0

[situations]
weight = "S"

[situations.axes]
chi = { from = 0.8, to = 0.2, count = 4 }
P = [1, 2]

[situations.derived]
d = "gamma * chi"

[rules.bending]
design_check = "z * R / gamma >= S_k"
sizes = "z"
limit_state = "R * z == S"

[rules.shear]
limit_stat = "T >= chi"

[factors]
gamma = { present = 1.2, lower = 2.0, upper = 1.0 }

[objective]
penalty = "absolute"
floor = "3"
"""


def test_everything_at_once(project):
    problems = project.problems(text=EVERYTHING_WRONG)
    told = [(p.line, p.message) for p in problems]
    expected = [
        (2, "unknown key 'colour' at the top of the file"),
        (5, "study.title must be a text"),
        (6, "study.reference_period must be greater than 0"),
        (7, "study.seed must be a whole number"),
        (10, "target.beta must be a number"),
        (13, "records.strength.file: 'no-such-file.csv' does not exist"),
        (15, "records.strength.unit: unknown unit 'MPb'"),
        (18, "quantities.P: unknown unit 'kM'"),
        (19, "quantities.a is defined by itself: a -> b -> a"),
        (21, "quantities.r must be a finite number"),
        (24, "variables.R.records names 'strengths'"),
        (28, "variables.S.family"),
        (32, "variables.T gives mean"),
        (37, "situations.weight: weights may not use basic variables"),
        (40, "situations.axes.chi has 'from' 0.8 above 'to' 0.2"),
        (41, "the name 'P' stands for two things"),
        (44, "situations.derived.d: derived quantities may not use factors"),
        (47, "rules.bending.design_check: design checks may not use basic variables; 'R'"),
        (47, "rules.bending.design_check: the name 'S_k' is not defined"),
        (49, "rules.bending.limit_state"),
        (52, "unknown key 'limit_stat' in [rules.shear]"),
        (55, "factors.gamma has lower = 2 above upper = 1"),
        (59, "objective.floor must be a number"),
    ]
    assert [line for line, _ in told] == sorted(line for line, _ in told)
    for line, start in expected:
        assert any(at == line and message.startswith(start) for at, message in told), (line, start, told)
    # The penalty and nothing else may come on top of these.
    rest = [t for t in told if not any(t[0] == line and t[1].startswith(start) for line, start in expected)]
    assert [(line, message[:17]) for line, message in rest] == [(58, "objective.penalty")]


def test_problems_of_data_files_follow_those_of_the_study(project):
    project.write_beside("bad.csv", "f_u\n500\n510\nabc\n")
    problems = project.problems(
        ("../../datasets/connectors/bar-strength.csv", "bad.csv"), ("beta = 3.8", "beta = true")
    )
    assert [(p.file, p.line) for p in problems] == [(str(project.study_file), 10), ("bad.csv", 4)]
    assert "'abc'" in problems[1].message
    assert f"records.bar_strength in line 12 of {project.study_file}" in str(problems[1])


def test_unknown_column(project):
    (problem,) = project.problems(('column = "f_u"', 'column = "f_y"'))
    assert problem.file == "../../datasets/connectors/bar-strength.csv"
    assert "no column 'f_y'" in problem.message
    assert "'f_u'" in str(problem)
    assert "records.bar_strength in line 12" in str(problem)


def test_a_size_that_is_not_in_the_check_is_told_where_it_matters(project):
    problems = project.problems(('sizes = "A_d" ', 'sizes = "B_d" '))
    told = "\n".join(str(p) for p in problems)
    assert "design_check does not contain the size 'B_d'" in told
    assert "the name 'A_d' is not defined. Did you mean 'B_d'?" in told
    assert {p.line for p in problems} == {51, 54}


def test_a_unit_of_a_size_without_size(project):
    problems = project.problems(('sizes = "A_d" ', '# "A_d" '))
    assert any(
        p.line == 53 and "size_unit is given, but the rule sizes nothing" in p.message for p in problems
    )


def test_table_and_axes_exclude_each_other(project):
    project.write_beside("situations.csv", "psi,name\n0.1,a\n0.2,b\n")
    (problem,) = project.problems(('weight = "1" ', 'table = "situations.csv"\nweight = "1" '))
    assert problem.line == 44
    assert "both 'table' and 'axes'" in problem.message


def test_format_inside_a_section(project):
    problems = project.problems(("format = 1\n\n[study]\n", "[study]\nformat = 1\n"))
    assert [p.line for p in problems] == [2, 2]
    assert "must stand above the first section. Here it belongs to the section [study]" in str(problems[0])


def test_nothing_but_a_format(project):
    problems = project.problems(text="format = 1\n")
    told = "\n".join(str(p) for p in problems)
    for piece in (
        "[study] with 'title', 'reference_period'",
        "[target] with 'beta'",
        "at least one factor",
        "at least one rule",
    ):
        assert piece in told
    assert len(problems) == 4


@pytest.mark.parametrize(
    "junk",
    ["true", "0", "-1", "nan", "-inf", "1e308", '""', '"x"', '"1 kN"', '"1e400"', "[]", "{}",
     "[[1], 'a']", "{ a = 1 }",
     "1979-05-27", "07:32:00", "1" + "0" * 400, '"a\\u0000b"', '"' + "(" * 300 + '"', '"chi >= 1"'],
)  # fmt: skip
def test_any_value_replaced_by_junk(project, example, junk):
    """Every value of the example in turn; whatever happens, it is a study or an InputError with a line."""
    pairs = list(re.finditer(r'(?m)^(\w+) = ("[^"\n]*"|\{[^}\n]*\}|[\w.]+)', example))
    pairs += list(re.finditer(r"(present|lower|upper|step|from|to|count)( = )([\w.]+)", example))
    refused = 0
    for match in pairs:
        at = match.start(match.lastindex)
        text = example[:at] + junk + example[match.end(match.lastindex) :]
        problems = problems_of(project.write(text))
        refused += bool(problems)
        assert all(p.line is not None or p.message.startswith("the section") for p in problems)
        assert not any("Input should" in str(p) for p in problems)
    assert refused > len(pairs) // 4


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=150)
@given(data=st.data())
def test_any_disorder_of_lines(project, example, data):
    """Lines deleted, doubled, exchanged, cut: a study or an InputError, never anything else."""
    lines = example.split("\n")
    for _ in range(data.draw(st.integers(1, 4))):
        i = data.draw(st.integers(0, len(lines) - 1))
        j = data.draw(st.integers(0, len(lines) - 1))
        match data.draw(st.sampled_from(["delete", "double", "exchange", "cut", "rename"])):
            case "delete":
                del lines[i]
            case "double":
                lines.insert(j, lines[i])
            case "exchange":
                lines[i], lines[j] = lines[j], lines[i]
            case "cut":
                lines[i] = lines[i][: data.draw(st.integers(0, len(lines[i])))]
            case "rename":
                old = data.draw(
                    st.sampled_from(["chi", "P", "G_k", "A_d", "f_u", "gamma_M", "G", "mean", "lognormal"])
                )
                new = data.draw(
                    st.sampled_from(["chi", "P", "G_k", "A_d", "f_u", "gamma_M", "G", "cov", "x_1", "sqrt"])
                )
                lines[i] = re.sub(rf"\b{old}\b", new, lines[i])
    problems = problems_of(project.write("\n".join(lines)))
    placed = [p.line or 0 for p in problems if p.file == str(project.study_file)]
    assert placed == sorted(placed)
    assert all(0 <= line <= len(lines) for line in placed)
