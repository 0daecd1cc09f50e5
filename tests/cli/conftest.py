"""A small project and a command line that runs in this process."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest
from typer.testing import CliRunner

from calibrate.cli.app import app

STUDY = """\
format = 1
[study]
title = "Tie rods"
reference_period = 50
seed = 3
[target]
beta = 3.8
[records.strength]
file = "strength.csv"
column = "f"
unit = "MPa"
[quantities]
f_k = "400 MPa"
P = "100 kN"
[variables.f]
records = "strength"
family = "lognormal"
[variables.Q]
family = "gumbel"
mean = "0.6 * Q_k"
cov = 0.30
unit = "kN"
period = 1
[situations.axes]
chi = [0.3, 0.6, 0.9]
[situations.derived]
Q_k = "chi * P"
[rules.rupture]
design_check = "A * f_k / gamma_M >= gamma_Q * Q_k"
sizes = "A"
size_unit = "mm^2"
limit_state = "A * f >= Q"
[factors]
gamma_M = 1.2
gamma_Q = { present = 1.50, lower = 1.2, upper = 2.5, step = 0.05 }
"""
# Self-made: twelve invented strengths in MPa.
STRENGTH = (461.0, 448.0, 477.0, 490.0, 433.0, 469.0, 452.0, 481.0, 474.0, 445.0, 466.0, 458.0)


@dataclass(frozen=True)
class Ended:
    """What a command left: exit code and both streams."""

    code: int
    out: str
    err: str


Call = Callable[..., Ended]


def call(*arguments: object) -> Ended:
    ended = CliRunner().invoke(app, [str(a) for a in arguments], prog_name="calibrate")
    assert ended.exception is None or isinstance(ended.exception, SystemExit), ended.exception
    return Ended(ended.exit_code, ended.stdout, ended.stderr)


def write_project(folder: Path) -> Path:
    """Write the project into a folder and return the study file."""
    home = folder / "studies" / "rods"
    home.mkdir(parents=True)
    (home / "strength.csv").write_text("f\n" + "".join(f"{v}\n" for v in STRENGTH), encoding="utf-8")
    study = home / "study.toml"
    study.write_text(STUDY, encoding="utf-8")
    return study


@pytest.fixture
def calibrate() -> Call:
    return call


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A fresh project, whose study may be changed."""
    return write_project(tmp_path / "project")


@pytest.fixture
def change(study: Path) -> Callable[[str, str], None]:
    def replace(old: str, new: str) -> None:
        text = study.read_text(encoding="utf-8")
        assert text.count(old) == 1
        study.write_text(text.replace(old, new), encoding="utf-8")

    return replace


@pytest.fixture
def light(monkeypatch: pytest.MonkeyPatch) -> set[str]:
    """Results without figures and page, which take most of the time; returns the names of the files."""
    from calibrate.study.export import table_files

    def files(result: object) -> dict[str, bytes]:
        return {**table_files(result), "figures/a.svg": b"<svg/>"}

    monkeypatch.setattr("calibrate.report.folder.result_files", files)
    names = {"result.json", "situations.csv", "factors.csv", "required_factors.csv", "units.json"}
    return names | {"verification.csv", "elasticities.csv", "figures/a.svg"}


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path, Ended]:
    """A study that was run once: its file, its results, and what was printed; not to be changed."""
    file = write_project(tmp_path_factory.mktemp("finished"))
    out = file.parents[2] / "out"
    return file, out, call("run", file, "--out", out)
