"""A small project around the invented example of a study: writes it, changes it, reads it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from calibrate.errors import InputError, Problem
from calibrate.study import Study, read_study

EXAMPLE = """\
format = 1

[study]
title = "Rupture of threaded bars in balcony connectors"      # invented example
summary = "One paragraph for the report."
reference_period = 50            # years; every action model and every beta refers to it
seed = 20261                     # for everything random in this study

[target]
beta = 3.8                       # for the reference period above

[records.bar_strength]           # evidence: one column of one file
file = "../../datasets/connectors/bar-strength.csv"
column = "f_u"
unit = "MPa"

[quantities]                     # deterministic values that rules and models may use
f_uk = "500 MPa"
P = "100 kN"

[variables.f_u]                  # basic variable fitted to records
records = "bar_strength"
family = "lognormal"             # a family, a list of candidates, or "best"

[variables.theta_R]              # basic variable given by its moments
family = "lognormal"
mean = 1.05
cov = 0.09

[variables.G]                    # moments may depend on the design situation
family = "normal"
mean = "1.0 * G_k"
cov = 0.10

[variables.Q]
family = "gumbel"
mean = "0.6 * Q_k"
cov = 0.35

[situations]
weight = "1"                     # expression, or a column's name when a table is given

[situations.axes]                # full factorial grid
chi = { from = 0.1, to = 0.8, count = 8 }    # or { from, to, step }, a list, or { values = [..], unit = ".." }

[situations.derived]             # further quantities of each situation, in any order
G_k = "(1 - chi) * P"
Q_k = "chi * P"

[rules.bar_rupture]
design_check = "A_d * f_uk / gamma_M >= gamma_G * G_k + gamma_Q * Q_k"
sizes = "A_d"                    # solved in each situation so that the check is just met
size_unit = "mm^2"               # optional where the check implies the dimension
limit_state = "theta_R * A_d * f_u >= G + Q"     # survival; g = left - right
weight = 1.0                     # relative to other rules

[correlations]                   # optional; product-moment coefficients of basic variables
# "f_u, theta_R" = 0.2

[factors]
gamma_M = { present = 1.25, lower = 1.0, upper = 2.0, step = 0.05 }   # free
gamma_Q = { present = 1.50, lower = 1.2, upper = 2.0, step = 0.05 }   # free
gamma_G = 1.35                                                        # held

[objective]
penalty = "squared"              # squared | asymmetric | minimax
floor = 3.3                      # optional: no situation's beta below this
"""

# Self-made: twelve invented strengths in MPa.
BAR_STRENGTH = (561.0, 548.0, 577.0, 590.0, 533.0, 569.0, 552.0, 581.0, 574.0, 545.0, 566.0, 558.0)


@dataclass(frozen=True)
class Project:
    """A project folder with one study; the text of the study can be changed before it is read."""

    folder: Path

    @property
    def study_file(self) -> Path:
        return self.folder / "studies" / "connectors" / "study.toml"

    def write(self, text: str) -> Path:
        self.study_file.write_text(text, encoding="utf-8")
        return self.study_file

    def write_beside(self, name: str, text: str) -> Path:
        path = self.study_file.parent / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
        return path

    def read(self, *changes: tuple[str, str], text: str = EXAMPLE) -> Study:
        """Read the example after replacing each first text by the second; it must occur exactly once."""
        return read_study(self.write(changed(text, *changes)))

    def problems(self, *changes: tuple[str, str], text: str = EXAMPLE) -> list[Problem]:
        """Return the problems of the example after the changes."""
        with pytest.raises(InputError) as caught:
            self.read(*changes, text=text)
        return list(caught.value.problems)


def changed(text: str, *changes: tuple[str, str]) -> str:
    for old, new in changes:
        assert text.count(old) == 1, f"{old!r} occurs {text.count(old)} times"
        text = text.replace(old, new)
    return text


@pytest.fixture
def project(tmp_path: Path) -> Project:
    folder = tmp_path / "house"
    data = folder / "datasets" / "connectors"
    data.mkdir(parents=True)
    (folder / "studies" / "connectors").mkdir(parents=True)
    rows = "\n".join(str(v) for v in BAR_STRENGTH)
    (data / "bar-strength.csv").write_text(f"f_u\n{rows}\n", encoding="utf-8")
    return Project(folder)


@pytest.fixture
def example() -> str:
    return EXAMPLE


@pytest.fixture
def change() -> Callable[..., str]:
    return changed
