"""``check`` tells what was understood, and computes nothing."""

import json

import pytest


@pytest.fixture
def nothing_computed(monkeypatch):
    def refused(*arguments, **options):
        raise AssertionError("check must not compute")

    for name in ("calibrate.study.fits.compare", "calibrate.factors.Response.__init__"):
        monkeypatch.setattr(name, refused)


def test_it_prints_every_part_of_the_study(study, calibrate, nothing_computed):
    ended = calibrate("check", study)
    assert (ended.code, ended.err) == (0, "")
    shown = " ".join(ended.out.split())
    for text in (
        "Tie rods",
        "Target β = 3.8 for 50 years.",
        "strength strength.csv f MPa 12",
        "f_k 400 MPa",
        "Q gumbel mean = 0.6 * Q_k, cov = 0.3, for 1 year kN",
        "Design situations (3)",
        "chi 3 0.3 0.9",
        "Q_k (derived) 3 30000 90000 N",
        "A in mm²",
        "gamma_Q 1.5 1.2 … 2.5 0.05",
        "gamma_M 1.2 held",
        "Nothing was fitted, sized or computed.",
    ):
        assert text in shown


def test_a_run_would_be_noticed(study, calibrate, nothing_computed):
    with pytest.raises(AssertionError, match="check must not compute"):
        calibrate("run", study)


def test_json_is_alone_on_standard_output(study, calibrate, nothing_computed):
    ended = calibrate("check", study, "--json", "--seed", "12")
    content = json.loads(ended.out)
    assert (ended.code, ended.err) == (0, "")
    assert content["format"] == "calibrate-check/1"
    assert content["study"]["title"] == "Tie rods"
    assert content["seed"] == 12
    assert content["situations"]["count"] == 3


def test_quiet_prints_nothing_and_nothing_is_written(study, calibrate):
    before = sorted(study.parents[2].rglob("*"))
    ended = calibrate("check", study, "--quiet")
    assert (ended.code, ended.out, ended.err) == (0, "", "")
    assert sorted(study.parents[2].rglob("*")) == before
