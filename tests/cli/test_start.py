"""What starts without work: help and version answer at once, usage errors are told plainly."""

import subprocess
import sys

import pytest

HEAVY = {"numpy", "scipy", "pydantic", "pandas", "matplotlib", "statsmodels", "jinja2", "pint"}
PROGRAM = """\
import sys
from calibrate.cli import main
sys.argv = ["calibrate", *sys.argv[1:]]
try:
    main()
finally:
    print("LOADED", *sorted({name.split(".")[0] for name in sys.modules}), file=sys.stderr)
"""


@pytest.mark.parametrize(
    ("arguments", "allowed"),
    [
        (["--help"], set()),
        (["--version"], set()),
        (["run", "--help"], {"pydantic"}),  # typer reads the options of a command with it
        (["fit", "-h"], {"pydantic"}),
        (["resistance", "-h"], {"pydantic"}),
    ],
)
def test_help_loads_no_heavy_library(arguments, allowed):
    command = [sys.executable, "-c", PROGRAM, *arguments]
    ended = subprocess.run(command, capture_output=True, text=True, check=False)
    loaded = set(ended.stderr.split("LOADED", 1)[1].split())
    assert ended.returncode == 0
    assert "calibrate" in loaded
    assert loaded & HEAVY <= allowed


def test_help_lists_the_commands_and_the_caution(calibrate):
    shown = " ".join(calibrate("--help").out.split())
    for text in (
        "run Calibrate",
        "check Print",
        "fit Fit",
        "resistance Evaluate",
        "local codes and licensed practice prevail",
    ):
        assert text in shown


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["ruin"], "No such command 'ruin'"),
        (["run"], "Missing argument"),
        (["run", "x.toml", "--sed", "1"], "No such option: --sed"),
        (["run", "x.toml", "--seed", "-1"], "--seed"),
        (["fit", "x.csv"], "--column"),
        (["resistance", "x.csv", "--measured", "R"], "--prediction"),
    ],
)
def test_wrong_usage_ends_with_2_on_standard_error(calibrate, arguments, message):
    ended = calibrate(*arguments)
    assert ended.code == 2
    assert ended.out == ""
    assert message in ended.err


def test_a_process_ends_with_the_code_of_the_command(tmp_path):
    command = [sys.executable, "-m", "calibrate", "run", "missing.toml"]
    ended = subprocess.run(command, capture_output=True, text=True, check=False, cwd=tmp_path)
    assert (ended.returncode, ended.stdout) == (2, "")
    assert ended.stderr.splitlines() == ["missing.toml: no such file."]
