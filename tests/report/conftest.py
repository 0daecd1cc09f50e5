"""Two finished runs: a grid with two rules and a situation without β, and a table full of hostile text."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest

from calibrate.report import result_files
from calibrate.study import Result, read_study, run

# Text that would do something if it reached a page as code, a template or a formula.
HOSTILE = (
    "<script>alert(1)</script>",
    '"><img src=x onerror=alert(1)>',
    "{{7*7}}",
    "${7*7}$ $\\frac{$",
    "--><b onclick='x'>",
    "]]></style><svg onload=alert(1)>",
)
STRENGTH = [
    "461",
    "448",
    "477",
    "490",
    "433",
    "469",
    "452",
    "481",
    "474",
    "445",
    "466",
    "458",
]  # self-made, in MPa

COMMON = """
format = 1
[target]
beta = 3.8
[records.strength]
file = '{file}'
column = 'f'
unit = "MPa"
[quantities]
f_k = "400 MPa"
P = "100 kN"
[variables.f_y]
records = "strength"
family = ["lognormal", "normal"]
description = '{text}'
[variables.Q]
family = "gumbel"
mean = "0.6 * Q_k"
cov = 0.30
unit = "kN"
period = 1
source = '{text}'
grade = "judgement"
[factors]
gamma_Q = {{ present = 1.50, lower = 1.5, upper = 2.0, step = 0.25, description = '{text}' }}
gamma_M = 1.2
[rules.tension]
design_check = "A * f_k / gamma_M >= gamma_Q * Q_k"
sizes = "A"
size_unit = "mm^2"
limit_state = "A * f_y >= Q"
description = '{text}'
"""
GRID = """
[study]
title = "Tie rods and their anchors"
summary = '''
The first paragraph,
in two lines.

The second paragraph.
'''
reference_period = 50
[situations.axes]
chi = { values = [0.3, 0.6, 0.9], description = 'variable $share$ \\frac{' }
[situations.derived]
Q_k = "chi * P"
[rules.anchor]
design_check = "B * f_k / gamma_M >= gamma_Q * Q_k"
sizes = "B"
size_unit = "cm^2"
limit_state = "B * f_y >= where(chi >= 0.8, 0, 1) * Q"
"""
TABLE = """
[study]
title = '<script>alert(1)</script>'
summary = '"><img src=x onerror=alert(1)> {{7*7}}'
reference_period = 50
[situations]
table = "table.csv"
weight = "share"
[situations.units]
Q_k = "kN"
"""


@dataclass(frozen=True)
class Run:
    """A result with the files that it leaves."""

    result: Result
    files: dict[str, bytes]

    @property
    def page(self) -> str:
        return self.files["report.html"].decode("utf-8")


def start(folder: Path, own: str, *, file: str, text: str) -> Result:
    """Write a project whose descriptions all are ``text`` and run its study."""
    (folder / "studies").mkdir()
    (folder / file).write_text("f\n" + "\n".join(STRENGTH), encoding="utf-8")
    labels = "".join(
        f'"{t.replace(chr(34), chr(34) * 2)}",{30 + 10 * i},{1 + i}\n' for i, t in enumerate(HOSTILE)
    )
    (folder / "table.csv").write_text("kind,Q_k,share\n" + labels, encoding="utf-8")
    study = folder / "study.toml"
    study.write_text(COMMON.format(file=file, text=text) + own, encoding="utf-8")
    return run(read_study(study))


@pytest.fixture(scope="session", autouse=True)
def coarse_pictures() -> Iterator[None]:
    """Draw small pictures: their content is the same, and they take less time."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("calibrate.report.style.RESOLUTION", 40)
        yield


@pytest.fixture(scope="session")
def grid_result(tmp_path_factory: pytest.TempPathFactory) -> Callable[[], Result]:
    """Run the study on a grid afresh at each call."""
    return lambda: start(tmp_path_factory.mktemp("grid"), GRID, file="strength.csv", text="words")


@pytest.fixture(scope="session")
def grid(grid_result: Callable[[], Result]) -> Run:
    result = grid_result()
    return Run(result, result_files(result))


@pytest.fixture(scope="session")
def hostile(tmp_path_factory: pytest.TempPathFactory) -> Run:
    folder = tmp_path_factory.mktemp("hostile")
    text = " ".join(t for t in HOSTILE if "'" not in t)
    result = start(folder, TABLE, file='"><img src=x onerror=alert(1)> {{7*7}}.csv', text=text)
    return Run(result, result_files(result))


@pytest.fixture(scope="session")
def texts() -> tuple[str, ...]:
    return HOSTILE
