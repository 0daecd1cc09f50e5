"""``[resistance.NAME]`` in a study: what is read and refused, and what the evaluation says."""

from __future__ import annotations

import numpy as np
import pytest

import calibrate
from calibrate.errors import InputError

STUDY = """
format = 1
[study]
title = "Anchors"
reference_period = 50
seed = 7
[target]
beta = 3.0
[resistance.anchors]
file = "tests.csv"
measured = "R"
unit = "kN"
prediction = "0.25 * pi * D**2 * f"
units = {{ D = "mm", f = "MPa" }}
survived = "end"
cluster = "site"
{tests}
[variables.theta]
resistance = "anchors"
family = "lognormal"
{theta}
[variables.E]
family = "normal"
mean = "10 kN"
cov = 0.2
[quantities]
Q = "10 kN"
{quantities}
[situations.axes]
D = {{ values = [10, 20], unit = "mm" }}
{axes}
[rules.pull]
design_check = "R_n / gamma >= Q"
sizes = "R_n"
size_unit = "kN"
limit_state = "theta * R_n >= E"
{more}
[factors]
gamma = {{ present = 1.5, lower = 0.5, upper = 9.0 }}
"""


def invented_rows(n=40, survivors=0, slope=0.0, site_sd=0.0, seed=11):
    """Self-made tests: D in mm, f in MPa, capacity in kN with a lognormal error of log-sd 0.15."""
    rng = np.random.default_rng(seed)
    diameter, strength = rng.uniform(8.0, 24.0, n), rng.uniform(300.0, 500.0, n)
    site = np.arange(n) % 8
    log = 0.05 + 0.15 * rng.normal(size=n) + slope * np.log(diameter / 14.0)
    log += site_sd * np.random.default_rng(3).normal(size=8)[site]
    capacity = 0.25 * np.pi * diameter**2 * strength / 1e3 * np.exp(log)
    ends = np.where(np.arange(n) < survivors, "stopped", "failed")
    capacity = np.where(ends == "stopped", 0.9 * capacity, capacity)
    return [
        {"D": f"{d:.3f}", "f": f"{f:.2f}", "R": f"{r:.6g}", "end": e, "site": f"S{s}", "kind": "ab"[i % 2]}
        for i, (d, f, r, e, s) in enumerate(zip(diameter, strength, capacity, ends, site, strict=True))
    ]


@pytest.fixture
def study(tmp_path):
    """Write a study and its tests; ``change`` replaces parts of the study's text."""

    def write(rows=None, change=(), **parts):
        rows = invented_rows() if rows is None else rows
        lines = [",".join(rows[0]), *(",".join(r.values()) for r in rows)]
        (tmp_path / "tests.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
        given = {"tests": "", "theta": "", "quantities": "", "axes": "", "more": "", **parts}
        text = STUDY.format(**given)
        for old, new in change:
            assert text.count(old) == 1
            text = text.replace(old, new)
        (tmp_path / "study.toml").write_text(text, encoding="utf-8")
        return calibrate.read_study(tmp_path / "study.toml")

    return write


def edited(rows, at, **cells):
    """Return the rows with some cells of one replaced; ``at`` counts from 0."""
    return [{**r, **cells} if i == at else r for i, r in enumerate(rows)]


def ratios(rows):
    """Return measured over predicted by hand, and which did not fail."""
    number = {k: np.array([float(r[k]) for r in rows]) for k in ("D", "f", "R")}
    ratio = number["R"] * 1e3 / (0.25 * np.pi * number["D"] ** 2 * number["f"])
    return ratio, np.array([r["end"] == "stopped" for r in rows])


def problem_of(call, words):
    with pytest.raises(InputError) as caught:
        call()
    (found,) = [p for p in caught.value.problems if words in p.message]
    return found


# What is refused


@pytest.mark.parametrize("value", ["0", "-3.5"])
def test_a_capacity_that_is_not_positive_is_told_with_its_row(study, value):
    rows = edited(invented_rows(), 4, R=value)
    found = problem_of(lambda: study(rows), f"the measured capacity is {float(value):g} kN")
    assert (found.file, found.line) == ("tests.csv", 6)
    assert "exclude the row" in found.suggestion
    assert "resistance.anchors in line 9" in found.suggestion


def test_a_prediction_that_is_not_positive_is_told_with_its_row(study):
    found = problem_of(lambda: study(edited(invented_rows(), 0, f="-400")), "it must be above zero")
    assert found.message.startswith("The prediction '0.25 * pi * D**2 * f' is -")
    assert (found.file, found.line) == ("tests.csv", 2)


def test_many_wrong_rows_are_counted(study):
    rows = [{**r, "R": "0"} for r in invented_rows()]
    with pytest.raises(InputError) as caught:
        study(rows)
    assert len(caught.value.problems) == 6
    assert caught.value.problems[-1].message == "35 more rows have the same problem."


def test_a_prediction_that_misses_an_input_names_the_nearest_column(study):
    change = [("* D**2 * f", "* D**2 * fs"), ('f = "MPa"', 'fs = "MPa"')]
    found = problem_of(lambda: study(change=change), "There is no column 'fs'")
    assert (found.file, found.line) == ("tests.csv", 1)
    assert "Did you mean 'f'?" in found.suggestion


def test_a_prediction_of_another_dimension_tells_both(study):
    found = problem_of(lambda: study(change=[("* D**2 * f", "* D * f")]), "but the measured capacity 'R'")
    assert "in kN is a force" in found.message
    assert found.line == 13
    bare = problem_of(lambda: study(change=[(', f = "MPa"', "")]), "but the measured capacity 'R'")
    assert "is an area (m²)" in bare.message
    assert "No unit is stated for f." in bare.suggestion


@pytest.mark.parametrize(
    ("change", "words", "line"),
    [
        (("* D**2 * f", "* D**2 * f + R"), "uses 'R', the measured capacity itself", 13),
        (("* D**2 * f", "* D**2 * ("), "prediction", 13),
        (('f = "MPa"', 'f = "MPa", g = "mm"'), "states a unit for the column 'g'", 14),
        (
            ('survived = "end"', 'survived = "end"\nnominal = ["f"]'),
            "uses 'f', a column of nominal values",
            13,
        ),
        (('measured = "R"', 'measured = "R"\nknown_scatter = { m = -0.1 }'), "known_scatter.m", 12),
        (('measured = "R"', 'measured = "R"\ncovs = { f = -0.1 }'), "covs.f", 12),
        (('resistance = "anchors"', 'resistance = "anchor"'), "Did you mean", None),
        (('resistance = "anchors"', 'resistance = "anchors"\nrecords = "x"'), "name one", None),
    ],
)
def test_slips_of_the_section_are_told_with_their_line(study, change, words, line):
    with pytest.raises(InputError) as caught:
        study(change=[change])
    (found,) = [p for p in caught.value.problems if words in str(p)]
    assert found.line is not None
    assert line in (None, found.line)


def test_too_few_tests_are_refused(study):
    found = problem_of(
        lambda: study(invented_rows(3)), "There are 3 tests; a resistance model needs at least 4."
    )
    assert found.file is not None


def test_an_empty_subgroup_and_an_empty_covariate_are_told_with_their_row(study):
    rows = edited(invented_rows(), 2, kind="")
    found = problem_of(lambda: study(rows, tests='subgroup = "kind"'), "Column 'kind': the cell is empty")
    assert (found.file, found.line) == ("tests.csv", 4)
    rows = edited([{**r, "age": "28"} for r in invented_rows()], 2, age="")
    found = problem_of(lambda: study(rows, tests='inputs = ["age"]'), "Column 'age': ")
    assert (found.file, found.line) == ("tests.csv", 4)


def test_odd_entries_of_the_flags_are_told_with_what_is_allowed(study):
    found = problem_of(lambda: study(edited(invented_rows(), 2, end="perhaps")), "'perhaps'")
    assert (found.file, found.line) == ("tests.csv", 4)
    assert "'survived'" in found.suggestion
    found = problem_of(
        lambda: study(edited(invented_rows(), 2, end="left")), "the capacity is known to lie below"
    )
    assert found.line == 4


def test_one_name_for_records_and_tests_is_refused(study):
    more = '[records.anchors]\nfile = "tests.csv"\ncolumn = "R"\nunit = "kN"'
    found = problem_of(lambda: study(more=more), "has the name of records.anchors")
    assert found.line == 9


def test_an_unknown_north_american_form_names_those_that_there_are(study):
    part = "{ mean = 1.0, cov = 0.05 }"
    tests = f'north_american = {{ format = "LRFD member", material = {part}, fabrication = {part} }}'
    found = problem_of(lambda: study(tests=tests), "'LRFD member'")
    assert "Did you mean 'LRFD members'?" in found.suggestion
    assert found.line == 17


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ([('family = "lognormal"', 'family = "weibull"')], "variables.theta.family is 'weibull'"),
        ([('family = "lognormal"', 'family = "lognormal"\npredictive = true')], "variables.theta.predictive"),
    ],
)
def test_known_scatter_needs_a_plain_lognormal_model_factor(study, change, words):
    found = problem_of(lambda: study(tests="known_scatter = { measurement = 0.05 }", change=change), words)
    assert "known_scatter (measurement)" in found.message
    assert found.line is not None


def test_subgroups_are_no_failure_modes(study):
    made = study(tests='subgroup = "kind"')
    assert set(made.resistances["anchors"].tests.subgroups) == {"a", "b"}
    assert set(made.records["anchors"].labels) == {"lot"}
