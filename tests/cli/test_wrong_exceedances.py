"""Wrong exceedances in a study: told with line and value, by ``check`` and ``run`` alike, with exit code 2."""

import re

import pytest

STUDY = """\
format = 1
[study]
title = "Screen"
reference_period = 50
[target]
beta = 3.0
[records.gusts]
file = "gusts.csv"
column = "v"
unit = "m/s"
time = "t"
[variables.v]
records = "gusts"
family = "gev"
role = "action"
[variables.v.exceedances]
threshold = "21 m/s"
years = 11
run_length = "3 day"
[variables.q]
family = "gumbel"
mean = "5 m/s"
cov = 0.3
[variables.R]
family = "lognormal"
mean = "60 m/s"
cov = 0.1
[rules.screen]
limit_state = "R >= v + q"
[factors]
gamma = 1.0
"""

# Self-made: invented gusts; the third to last two belong to one storm.
GUSTS = [
    (0.4, 22.1), (1.1, 19.5), (1.9, 24.0), (2.7, 21.6), (3.3, 26.2), (5.0, 20.2), (6.2, 23.3), (7.9, 22.8), (9.6, 25.1),
    (9.6027, 24.2), (10.6, 21.9),
]  # fmt: skip

RUN = 'run_length = "3 day"'
FAMILY = '"gusts"\nfamily = "gev"'
ACTION = 'role = "action"'

# What is changed, by what; the line of the message; what it says.
SLIPS = {
    "threshold too high": ('"21 m/s"', '"25 m/s"', 17, ["exceeded by 2 of the 11 values", "19.5 and 26.2 m/s"]),
    "threshold of another dimension": ('"21 m/s"', '"21 kN"', 17, ["is a force", "the records are"]),
    "threshold without unit": ('"21 m/s"', "21", 17, ["dimensionless", "the records are"]),
    "threshold missing": ('threshold = "21 m/s"\n', "", 16, ["the key 'threshold' is missing"]),
    "years not positive": ("years = 11", "years = 0", 18, ["years", "0"]),
    "years missing": ("years = 11\n", "", 16, ["the key 'years' is missing"]),
    "unknown key": (RUN, 'runlength = "3 day"', 19, ["unknown key 'runlength'", "Did you mean 'run_length'?"]),
    "not a table": ("[variables.v.exceedances]", "exceedances = 3\n[variables.z]", 16, ["exceedances"]),
    "run length without unit": (RUN, "run_length = 3", 19, ["must be a time, such as '3 day'", "'3'"]),
    "run length of another dimension": (RUN, 'run_length = "3 m"', 19, ["must be a time", "'3 m'"]),
    "run length zero": (RUN, 'run_length = "0 day"', 19, ["must be positive", "'0 day'"]),
    "run length joins all": (RUN, 'run_length = "20 year"', 19, ["leaves 1 of the 9 exceedances"]),
    "run length without times": ('time = "t"\n', "", 18, ["name no column of times", 'Add time = "COLUMN"']),
    "family": (FAMILY, '"gusts"\nfamily = "lognormal"', 14, ["'gev'", "'gumbel'", "got lognormal"]),
    "families": (FAMILY, '"gusts"\nfamily = ["gev", "gumbel"]', 14, ["got gev and gumbel"]),
    "best family": (FAMILY, '"gusts"\nfamily = "best"', 14, ["got best"]),
    "predictive": (ACTION, f"{ACTION}\npredictive = true", 16, ["does not go with exceedances", "uncertainty"]),
    "method": (ACTION, f'{ACTION}\nmethod = "l_moments"', 16, ["does not go with exceedances", "likelihood"]),
    "stands for": (ACTION, f'{ACTION}\nstands_for = "lot mean"', 16, ["does not go with exceedances", "lots"]),
    "shape": (ACTION, f"{ACTION}\nshape = 0.1", 16, ["does not go with exceedances", "gumbel"]),
    "role": (ACTION, 'role = "resistance"', 15, ["is resistance"]),
    "unit of the variable": (ACTION, f'{ACTION}\nunit = "kN"', 16, ["'kN' is a force"]),
    "no records": ('records = "gusts"\nfamily', "family", 15, ["needs 'records'"]),
    "unknown records": ('records = "gusts"', 'records = "gust"', 13, ["Did you mean 'gusts'?"]),
    "blocks": ('time = "t"', 'time = "t"\nblocks = 11', 12, ["block maxima", "variables.v"]),
    "largest missing": ('time = "t"', 'time = "t"\nbelow = "30 m/s"', 14, ["below 30", "largest are missing"]),
    "unknown column of times": ('time = "t"', 'time = "when"', "gusts.csv:1", ["There is no column 'when'"]),
    "unit of times": ('time = "t"', 'time = "t"\ntime_unit = "m"', 12, ["must be a unit of time"]),
    "unit without times": ('time = "t"', 'time_unit = "day"', 11, ["no column 'time'"]),
    "combined": ("[factors]", "[combination]\nv = { repetitions = 40 }\nq = { repetitions = 9 }\n[factors]", 31, [
        "says 40 repetitions", "holds 50",
    ]),
    "fractile of the records": ("[variables.q]", '[quantities]\nv_k = { characteristic_of = "v" }\n[variables.q]', 21, [
        "maximum from exceedances", "is =",
    ]),
}  # fmt: skip


def write(folder, text, rows=GUSTS):
    (folder / "gusts.csv").write_text("t,v\n" + "".join(f"{t},{v}\n" for t, v in rows), encoding="utf-8")
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize("name", SLIPS)
def test_a_slip_is_told_with_its_line(tmp_path, calibrate, name):
    old, new, line, pieces = SLIPS[name]
    assert STUDY.count(old) == 1
    study = write(tmp_path, STUDY.replace(old, new))
    ended = calibrate("check", study)
    assert (ended.code, ended.out) == (2, "")
    place = line if isinstance(line, str) else f"{study}:{line}"
    assert ended.err.startswith(f"{place}: "), ended.err
    for piece in pieces:
        assert piece in ended.err
    assert "Traceback" not in ended.err


def test_as_it_stands_it_is_sound(tmp_path, calibrate):
    ended = calibrate("check", write(tmp_path, STUDY))
    assert ended.code == 0
    assert re.search(r"records gusts, 8 events above 21 m/s in 11 years,\s+for 1 year", ended.out)


def test_truncated_below_the_threshold(tmp_path, calibrate):
    text = STUDY.replace('time = "t"', 'time = "t"\nabove = "19 m/s"')
    assert calibrate("check", write(tmp_path, text)).code == 0


def test_truncated_at_more_than_the_threshold(tmp_path, calibrate):
    text = STUDY.replace('time = "t"', 'time = "t"\nabove = "21.5 m/s"')
    ended = calibrate("check", write(tmp_path, text, [row for row in GUSTS if row[1] > 21.5]))
    assert ended.code == 2
    assert "only values above 21.5 could enter the records 'gusts'" in ended.err


@pytest.mark.parametrize(
    ("entry", "message"),
    [
        ("", "the cell is empty"),
        ("winter", "'winter' is not a number"),
        ("2013-05-01", "The first entry is a number"),
    ],
)
def test_a_time_that_is_none(tmp_path, calibrate, entry, message):
    rows = [*GUSTS[:4], (entry, 22.0), *GUSTS[4:]]
    ended = calibrate("check", write(tmp_path, STUDY, rows))
    assert ended.code == 2
    assert ended.err.startswith("gusts.csv:6: Column 't': ")
    assert message in ended.err


def test_dates_take_no_unit(tmp_path, calibrate):
    rows = [(f"{2001 + k}-01-0{k + 1}", v) for k, (_, v) in enumerate(GUSTS[:9])]
    assert calibrate("check", write(tmp_path, STUDY, rows)).code == 0
    ended = calibrate(
        "check", write(tmp_path, STUDY.replace('time = "t"', 'time = "t"\ntime_unit = "day"'), rows)
    )
    assert ended.code == 2
    assert "Column 't' holds dates, which take no unit of time; got 'day'." in ended.err


def test_values_known_by_bounds(tmp_path, calibrate):
    ended = calibrate("check", write(tmp_path, STUDY, [*GUSTS, (10.9, ">27")]))
    assert ended.code == 2
    assert "1 of 12 values known by bounds only" in ended.err


def test_what_only_the_fit_can_tell_has_the_line_of_the_variable(tmp_path, calibrate):
    rows = [(0.5 + k, 21.0 + 5.0 * part) for k, part in enumerate((1.0, 0.999, 0.998, 0.997, 0.2))]
    study = write(tmp_path, STUDY, rows)
    ended = calibrate("run", study, "--out", tmp_path / "out")
    assert ended.code == 2
    assert ended.err.startswith(f"{study}:12: [variables.v] The likelihood of the excesses has no maximum")
