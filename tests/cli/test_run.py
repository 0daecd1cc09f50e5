"""The command that does the main job: what it prints, what it leaves, and how it ends."""

import json
import re

import pytest

FILES = {"result.json", "situations.csv", "factors.csv", "units.json", "report.html", "figures"}


def test_it_writes_the_files_and_prints_a_summary(finished):
    _, out, ended = finished
    assert ended.code == 0
    assert ended.err == ""
    assert {p.name for p in out.iterdir()} >= FILES
    for text in (
        "Tie rods",
        "gamma_Q",
        "1.20 … 2.50",
        "proposed",
        "Worst situation",
        f"{out / 'report.html'}",
    ):
        assert text in ended.out
    assert " ".join(ended.out.split()).endswith("local codes and licensed practice prevail.")


def test_no_colour_codes_and_no_line_beyond_the_width_when_piped(finished, calibrate):
    file, _, ended = finished
    for text in (ended.out, calibrate("check", file).out):
        assert "\x1b" not in text
        assert max(map(len, re.sub(r"Report: \S+", "", text).splitlines())) <= 118


def test_json_is_the_text_of_the_result_and_nothing_else(study, calibrate, light, tmp_path):
    ended = calibrate("run", study, "--out", tmp_path / "out", "--json", "--seed", "11")
    assert ended.code == 0
    assert ended.err == ""
    assert ended.out == (tmp_path / "out" / "result.json").read_text(encoding="utf-8")
    content = json.loads(ended.out)
    assert (content["format"], content["seed"]) == ("calibrate-result/1", 11)


def test_a_floor_that_cannot_be_met_is_named_and_ends_with_3(study, calibrate, change, tmp_path):
    change("beta = 3.8\n", "beta = 3.8\n[objective]\nfloor = 6.5\n")
    ended = calibrate("run", study, "--out", tmp_path / "out")
    assert ended.code == 3
    assert re.search(r"floor.* 6\.5", ended.err)
    assert "Traceback" not in ended.err
    content = json.loads((tmp_path / "out" / "result.json").read_text(encoding="utf-8"))
    assert content["constraint_failures"]
    assert all(sentence in ended.err for sentence in content["constraint_failures"])
    assert "Constraint not met" in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_situations_without_beta_are_named_even_when_quiet_and_end_with_3(
    study, calibrate, change, light, tmp_path
):
    change('limit_state = "A * f >= Q"', 'limit_state = "A * f >= where(chi >= 0.8, 0, 1) * Q"')
    change("step = 0.05", "step = 0.5")  # few points to search, since each is dear without a failure region
    ended = calibrate("run", study, "--out", tmp_path / "out", "--quiet")
    assert ended.code == 3
    assert ended.out == ""
    assert "Rule rupture, situation 3: no failure region within reach" in ended.err
    assert "1 of 3 design situations have no β and were left out." in ended.err
    assert json.loads((tmp_path / "out" / "result.json").read_text(encoding="utf-8"))["unconverged"] == 1


def test_doubts_are_printed_and_do_not_change_the_code(finished):
    _, out, ended = finished
    assert ended.code == 0
    assert "period-converted, variables.Q" in ended.out
    codes = [d["code"] for d in json.loads((out / "result.json").read_text(encoding="utf-8"))["doubts"]]
    assert codes
    assert all(code in ended.out for code in codes)


@pytest.mark.parametrize("command", ["run", "check"])
def test_interruption_ends_with_130_and_writes_nothing(study, calibrate, monkeypatch, tmp_path, command):
    def interrupted(*arguments, **options):
        raise KeyboardInterrupt

    monkeypatch.setattr("calibrate.study.read_study", interrupted)
    options = ["--out", tmp_path / "out"] if command == "run" else []
    ended = calibrate(command, study, *options)
    assert ended.code == 130
    assert (ended.out, ended.err) == ("", "Interrupted; nothing was written.\n")
    assert not (tmp_path / "out").exists()
