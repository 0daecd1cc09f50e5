"""``calibrate selfcheck``: known answers, and the end with 3 where one is missed."""

import importlib
import json
import subprocess
import sys

import pytest
import typer
from typer.testing import CliRunner

from calibrate.cli import selfcheck


def call(*arguments):
    app = typer.Typer()
    app.command("selfcheck", help=selfcheck.HELP)(selfcheck.selfcheck)
    ended = CliRunner().invoke(app, list(arguments), prog_name="selfcheck")
    assert ended.exception is None or isinstance(ended.exception, SystemExit), ended.exception
    return ended.exit_code, ended.stdout, ended.stderr


@pytest.fixture
def slip(monkeypatch):
    """The reference period counts a thousandth too much."""
    periods = importlib.import_module("calibrate.actions.periods")
    real = periods.log_hazard
    monkeypatch.setattr(periods, "log_hazard", lambda u: 1.001 * real(u))


@pytest.fixture
def breakdown(monkeypatch):
    def refused(*arguments, **options):
        raise TypeError("unsupported version")

    monkeypatch.setattr("calibrate.study.ladder.periods.over_period", refused)


def test_all_pass():
    code, out, err = call()
    assert (code, err) == (0, "")
    assert "linear margin, normal" in out
    assert "606.5276" in out
    assert out.splitlines()[-1].split(" ", 1)[1] == f"of {out.split()[-3]} checks passed."
    assert " NO " not in out


def test_json():
    code, out, err = call("--json")
    assert (code, err) == (0, "")
    content = json.loads(out)
    assert set(content) == {"format", "cases", "passed"}
    assert content["format"] == "calibrate-selfcheck/1"
    assert content["passed"] is True
    first = content["cases"][0]
    assert first["name"] == "linear margin, normal"
    assert first["expected"] == pytest.approx(2.822163, abs=5e-7)
    assert first["passed"] is True
    assert {"what", "source", "computed", "difference", "measure", "tolerance", "reason"} <= set(first)


def test_a_failed_check_is_named_and_ends_with_3(slip):
    code, out, err = call()
    assert code == 3
    (line,) = err.splitlines()
    assert line.startswith("reference period: expected 3.826314, computed 3.8")
    assert "allowed 1·10⁻⁹ absolute" in line
    (row,) = (text for text in out.splitlines() if text.startswith("reference period"))
    assert " NO " in row


def test_a_failed_check_in_json(slip):
    code, out, err = call("--json")
    content = json.loads(out)
    assert (code, content["passed"]) == (3, False)
    assert [c["name"] for c in content["cases"] if not c["passed"]] == ["reference period"]
    assert err.startswith("reference period: ")


def test_what_breaks_down_is_told_and_the_rest_is_checked(breakdown):
    code, out, err = call("--json")
    content = json.loads(out)
    assert code == 3
    (failed,) = (c for c in content["cases"] if not c["passed"])
    assert (failed["computed"], failed["error"]) == (None, "TypeError: unsupported version")
    assert err == "maximum of 50 years, Gumbel: not computed; TypeError: unsupported version\n"


def test_help_loads_no_heavy_library():
    program = "import sys, calibrate.cli.selfcheck; print(*sorted({n.split('.')[0] for n in sys.modules}))"
    ended = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    loaded = set(ended.stdout.split())
    assert "typer" in loaded
    assert loaded.isdisjoint({"numpy", "scipy", "pandas", "matplotlib", "pydantic"})
