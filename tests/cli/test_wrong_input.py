"""Wrong input: told with file and line, all of it at once, without a traceback, with exit code 2."""

import re

import pytest

SLIPS = [
    ('family = "gumbel"', 'family = "gumble"', "gumble"),
    ('mean = "0.6 * Q_k"', 'mean = "0.6 * Qk"', "Qk"),
    ('P = "100 kN"', 'P = "100 kM"', "kM"),
    ("chi = [0.3, 0.6, 0.9]", "chi = []", "chi"),
    ('limit_state = "A * f >= Q"', 'limit_state = "A * f >= Q + f_k"', "limit_state"),
    ('column = "f"', 'column = "g"', "column"),
    ('file = "strength.csv"', 'file = "strength.xls"', "strength.xls"),
    ("lower = 1.2", "lower = 2.6", "lower"),
    ("beta = 3.8", 'beta = "high"', "beta"),
    ("gamma_M = 1.2", "gamma_M = = 1.2", "TOML"),
]


@pytest.mark.parametrize("command", ["check", "run"])
@pytest.mark.parametrize(("old", "new", "word"), SLIPS, ids=[s[2] for s in SLIPS])
def test_every_slip_is_told_with_file_and_line(study, calibrate, change, command, old, new, word):
    change(old, new)
    line = study.read_text(encoding="utf-8").split(new)[0].count("\n") + 1
    ended = calibrate(command, study)
    assert (ended.code, ended.out) == (2, "")
    assert "Traceback" not in ended.err
    place, message = re.fullmatch(r"(\S+:\d+): (.+)\n", ended.err.split("\n")[0] + "\n").groups()
    assert word in message
    assert place == ("strength.csv:1" if word == "column" else f"{study}:{line}")


def test_a_slip_in_the_records_has_the_line_of_the_records(study, calibrate):
    file = study.with_name("strength.csv")
    file.write_text(file.read_text(encoding="utf-8").replace("477.0", "477,0 MPa"), encoding="utf-8")
    ended = calibrate("check", study)
    assert ended.code == 2
    assert re.search(r"strength\.csv:4: ", ended.err)


def test_all_slips_are_told_at_once_and_counted(study, calibrate, change):
    for old, new, _ in (SLIPS[0], SLIPS[2], SLIPS[7]):
        change(old, new)
    ended = calibrate("run", study)
    lines = ended.err.splitlines()
    assert lines[-1] == "3 problems; nothing was written."
    numbers = [int(re.match(rf"{re.escape(str(study))}:(\d+): ", text)[1]) for text in lines[:-1]]
    assert numbers == sorted(set(numbers))
    assert len(numbers) == 3


def test_the_file_is_named_as_the_user_named_it(study, calibrate, change, monkeypatch):
    change('family = "gumbel"', 'family = "gumble"')
    monkeypatch.chdir(study.parent)
    assert calibrate("check", "study.toml").err.startswith("study.toml:19: ")


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("missing.toml", None, "missing.toml: no such file."),
        ("binary.toml", b"\xff\xfe\x00", "binary.toml:1: "),
        ("empty.toml", b"", "empty.toml"),
        ("nul.toml", b"format = 1\n\x00", "nul.toml:2: "),
    ],
)
def test_files_that_are_no_study(study, calibrate, monkeypatch, name, content, message):
    monkeypatch.chdir(study.parent)
    if content is not None:
        study.with_name(name).write_bytes(content)
    ended = calibrate("run", name)
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith(message)
    assert "Traceback" not in ended.err


def test_control_characters_of_a_file_do_not_reach_the_terminal(study, calibrate, change):
    change('family = "gumbel"', r'family = "gum\u001b[31mbel"')
    ended = calibrate("check", study)
    assert ended.code == 2
    assert "\x1b" not in ended.err


def test_a_folder_is_no_study(study, calibrate):
    ended = calibrate("run", study.parent)
    assert ended.code == 2
    assert ended.err.startswith(f"{study.parent}: this is a folder; a study is one TOML file.")
    assert f"Did you mean '{study}'?" in ended.err


def test_files_outside_the_project_need_leave(study, calibrate, change, tmp_path):
    (tmp_path / "outside.csv").write_text(study.with_name("strength.csv").read_text(encoding="utf-8"))
    change('file = "strength.csv"', 'file = "../../../outside.csv"')
    ended = calibrate("check", study)
    assert ended.code == 2
    assert "--allow-outside" in ended.err
    assert calibrate("check", study, "--allow-outside", "--quiet").code == 0
