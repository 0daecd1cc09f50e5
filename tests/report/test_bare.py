"""Studies that lack what most have still leave a whole report."""

import json

import pytest

from calibrate.report import result_files
from calibrate.study import read_study, run

BARE = """
format = 1
[study]
title = "Bare"
reference_period = 1
[target]
beta = 2.0
[variables.R]
family = "normal"
mean = 30
cov = 0.1
[variables.S]
family = "gumbel"
mean = 10
cov = 0.2
[rules.only]
limit_state = "R >= S"
[factors]
gamma = 1.3
"""
SIZED = 'design_check = "z >= gamma"\nsizes = "z"\nlimit_state = "z * R >= S"'


def build(folder, *changes):
    """Return the files of the bare study after changes, its page and its result."""
    text = BARE
    for old, new in changes:
        assert text.count(old) == 1
        text = text.replace(old, new)
    (folder / "study.toml").write_text(text, encoding="utf-8")
    files = result_files(run(read_study(folder / "study.toml")))
    return files, files["report.html"].decode("utf-8"), json.loads(files["result.json"])


def figures(files):
    return {n.removeprefix("figures/").removesuffix(".svg") for n in files if n.endswith(".svg")}


def test_no_axis_no_size_no_record_no_free_factor(tmp_path):
    files, page, content = build(tmp_path)
    assert content["situations"] == 1
    assert figures(files) >= {"beta_by_rule", "beta_distribution", "sensitivity"}
    assert not figures(files) & {"size_change", "required_factors"}
    for text in (
        "No variable was fitted to records; all models were given.",
        "No rule solves for a size; the rules were assessed as they stand.",
        "no factor; the proposed factors are the present ones.",
    ):
        assert text in page


def test_no_situation_with_a_beta(tmp_path):
    change = ('limit_state = "R >= S"', 'limit_state = "R >= 0 * S - 1000"')
    files, page, content = build(tmp_path, change)
    assert content["unconverged"] == 1
    assert content["beta"]["proposed"] == {
        "mean": None, "sd": None, "min": None, "max": None, "rms_from_target": None, "worst": None,
    }  # fmt: skip
    assert figures(files) >= {"beta_by_rule", "beta_distribution"}
    assert "sensitivity" not in figures(files)
    assert "No situation with weight has a β." in page
    assert "1 situation without β" in page


@pytest.mark.parametrize("penalty", ["asymmetric", "minimax"])
def test_a_free_factor_without_step_and_other_penalties(tmp_path, penalty):
    _, page, content = build(
        tmp_path,
        ('limit_state = "R >= S"', SIZED),
        (
            "gamma = 1.3",
            f'gamma = {{ present = 0.5, lower = 0.1, upper = 2 }}\n[objective]\npenalty = "{penalty}"',
        ),
    )
    # One factor and one situation meet the target exactly; without a step nothing is rounded.
    assert content["beta"]["proposed"]["mean"] == pytest.approx(2.0, abs=1e-6)
    assert content["factors"]["gamma"]["proposed"] == content["factors"]["gamma"]["optimal"]
    assert "Rounded sets compared" not in page
