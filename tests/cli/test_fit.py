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
    names = ("probability_normal", "probability_lognormal", "sample", "density", "tail_lower", "tail_upper")
    figures = {f"{name}.{ending}" for name in names for ending in ("svg", "png")}
    assert {p.name for p in (out / "figures").iterdir()} == figures
    page = (out / "fit.html").read_text(encoding="utf-8")
    assert page.count("<svg ") == len(names)
    assert "licensed practice prevail" in page
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
    assert sorted(p.name for p in out.iterdir()) == ["candidates.csv", "figures", "fit.html", "fit.json"]


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


LIFE = (
    "t,state\n"
    + "".join(f"{x},failed\n" for x in (54, 187, 216, 240, 244, 335, 361, 373, 375, 386))
    + "500,survived\n" * 10
)


def test_survivors_tests_lots_and_a_characteristic_value(study, calibrate):
    # NIST/SEMATECH e-Handbook, section 8.4.1.3: ten of twenty units failed by 500 hours; printed scale 606.5280,
    # shape 1.7208 (recalled from memory, recomputed).
    file = study.with_name("life.csv")
    file.write_text(LIFE, encoding="utf-8")
    arguments = ["fit", file, "--column", "t", "--unit", "hour", "--censored", "state", "--family", "weibull"]
    content = json.loads(calibrate(*arguments, "--json").out)
    (found,) = content["candidates"]
    assert math.isclose(found["parameters"]["scale"], 606.528, rel_tol=1e-5)
    assert math.isclose(found["parameters"]["shape"], 1.7208, rel_tol=1e-4)
    assert found["anderson_darling"] is None
    assert (content["n"], content["n_exact"], content["tests_of_fit"]) == (20, 10, {})
    low, high = content["intervals"]["parameters"]["shape"]
    assert low < 1.7208 < high
    shown = calibrate(*arguments).out
    assert "10 survived" in shown
    ignored = calibrate(*arguments, "--method", "moments")
    assert ignored.code == 2
    assert "right-censored" in ignored.err
    assert "would misread" in ignored.err


def test_a_characteristic_value_is_that_of_the_table(column, calibrate):
    content = json.loads(
        calibrate(
            "fit", *column, "--family", "normal", "--fractile", 0.05, "--confidence", 0.75, "--json"
        ).out
    )
    value = content["characteristic"]
    # k for n = 12 from the non-central t: between 2.1037 (n = 10) and 1.9908 (n = 15), EN 14358 and ISO 16269-6.
    assert 1.9908 < value["factor"] < 2.1037
    assert value["value"] < value["point_estimate"]
    assert "5 % fractile at 75 % confidence" in value["statement"]
    assert calibrate("fit", *column, "--confidence", 0.75).code == 2


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--method", "lower_tail"], "needs fraction"),
        (["--method", "lower_tail", "--option", "fraction"], "is no option of a method"),
        (["--method", "lower_tail", "--option", "fraction=2"], "must lie above 0 and not above 1"),
        (["--option", "cov=0.1"], "has no option cov"),
        (["--lot", "batch"], "no column 'batch'"),
        (["--above", "1000"], "is 461, but only"),
    ],
)
def test_wrong_options_are_refused_in_words(column, calibrate, arguments, words):
    ended = calibrate("fit", *column, "--family", "normal", *arguments)
    assert ended.code == 2
    assert words in " ".join(ended.err.split())
    assert "Traceback" not in ended.err
