"""``fit`` ranks distributions for one column and writes only when asked."""

import csv
import json
import math

import pytest

KEYS = {"format", "column", "unit", "n", "candidates", "recommended"}
CANDIDATE_KEYS = {
    "family", "parameters", "standard_errors", "log_likelihood", "aicc", "anderson_darling", "status", "reason"
}  # fmt: skip
TWO = ("--family", "normal", "--family", "lognormal")


@pytest.fixture
def column(study):
    return [study.with_name("strength.csv"), "--column", "f"]


def test_it_prints_sample_ranking_and_advice(column, calibrate):
    ended = calibrate("fit", *column, "--unit", "MPa", *TWO)
    assert (ended.code, ended.err) == (0, "")
    shown = " ".join(ended.out.split())
    # The sample of conftest.py by hand: sum 5554, squares of deviations 3013.67.
    for text in ("n = 12, mean 462.83 MPa, sd 16.55 MPa", "from 433 to 490 MPa", "Candidates, by AICc"):
        assert text in shown
    assert "Supported about as well" in shown


def test_json_has_the_keys_of_the_format(column, calibrate):
    ended = calibrate("fit", *column, "--unit", "MPa", "--json")
    content = json.loads(ended.out)
    assert (ended.code, ended.err) == (0, "")
    assert set(content) >= KEYS
    assert (content["format"], content["column"], content["unit"], content["n"]) == (
        "calibrate-fit/1", "f", "MPa", 12
    )  # fmt: skip
    assert all(set(c) >= CANDIDATE_KEYS for c in content["candidates"])
    converged = [c for c in content["candidates"] if c["status"] == "converged"]
    assert converged[0]["family"] == content["recommended"]
    aicc = [c["aicc"] for c in converged]
    assert aicc == sorted(aicc)
    assert len(content["candidates"]) > 8


def test_a_failed_candidate_has_null_and_a_reason(study, calibrate):
    file = study.with_name("signed.csv")
    file.write_text("v\n" + "".join(f"{x}\n" for x in (-2.0, -0.5, 0.3, 1.1, 2.4, 0.2)), encoding="utf-8")
    content = json.loads(calibrate("fit", file, "--column", "v", "--json", *TWO).out)
    failed = content["candidates"][-1]
    assert content["recommended"] == "normal"
    assert (failed["family"], failed["log_likelihood"], failed["aicc"]) == ("lognormal", None, None)
    assert failed["status"] != "converged"
    assert failed["reason"]


def test_out_gets_tables_and_a_figure_of_each_candidate(column, calibrate, tmp_path):
    out = tmp_path / "fits"
    ended = calibrate("fit", *column, "--unit", "MPa", *TWO, "--out", out)
    assert ended.code == 0
    figures = {f"probability_{f}.{ending}" for f in ("normal", "lognormal") for ending in ("svg", "png")}
    assert {p.name for p in (out / "figures").iterdir()} == figures
    content = json.loads((out / "fit.json").read_text(encoding="utf-8"))
    with (out / "candidates.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert {(r["family"], r["parameter"]) for r in rows} == {
        (c["family"], name) for c in content["candidates"] for name in c["parameters"]
    }
    best = content["candidates"][0]
    name, value = next(iter(best["parameters"].items()))
    row = next(r for r in rows if (r["family"], r["parameter"]) == (best["family"], name))
    assert math.isclose(float(row["estimate"]), value, rel_tol=0.0)


def test_its_own_folder_is_replaced_and_another_refused(column, calibrate, tmp_path):
    out = tmp_path / "fits"
    out.mkdir()
    (out / "mine.txt").write_text("mine")
    arguments = ["fit", *column, "--family", "normal", "--out", out, "--quiet"]
    assert calibrate(*arguments).code == 2
    assert [p.name for p in out.iterdir()] == ["mine.txt"]
    assert calibrate(*arguments, "--force").code == 0
    (out / "old.txt").write_text("old")
    assert calibrate(*arguments).code == 0
    assert sorted(p.name for p in out.iterdir()) == ["candidates.csv", "figures", "fit.json"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--column", "g"], "strength.csv:1: There is no column 'g'. Known: f."),
        (["--column", "f", "--unit", "MPx"], "--unit: unknown unit 'MPx'."),
        (["--column", "f", "--family", "normall"], "There is no family 'normall'. Did you mean 'normal'?"),
        (["--column", "f", "--method", "magic"], "There is no method 'magic'. Known: likelihood, moments"),
    ],
)
def test_wrong_input_is_told_and_nothing_written(study, calibrate, tmp_path, arguments, message):
    file = study.with_name("strength.csv")
    ended = calibrate("fit", file, *arguments, "--out", tmp_path / "fits")
    assert (ended.code, ended.out) == (2, "")
    assert message in ended.err
    assert not (tmp_path / "fits").exists()
