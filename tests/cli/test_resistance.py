"""``calibrate resistance``: what it prints, and its JSON, against calculation by hand and a study."""

import json
from pathlib import Path

import numpy as np
import pytest

import calibrate as package
from calibrate.study.component_tests import evaluate_resistances
from calibrate.study.resistance_export import resistance_content

ROOT = Path(__file__).resolve().parents[2]
# Self-made: eight invented tests of anchors, predicted as area times strength; R in kN, A in mm^2, f in MPa.
A = (50.0, 60.0, 80.0, 100.0, 120.0, 150.0, 180.0, 200.0)
F = (410.0, 395.0, 420.0, 405.0, 400.0, 415.0, 390.0, 400.0)
R = (22.0, 21.9, 36.8, 39.1, 52.9, 60.6, 76.8, 78.4)


@pytest.fixture
def table(tmp_path):
    file = tmp_path / "anchors.csv"
    rows = [f"{a},{f},{r},{'xy'[i % 2]}" for i, (a, f, r) in enumerate(zip(A, F, R, strict=True))]
    file.write_text("\n".join(["A,f,R,site", *rows]) + "\n", encoding="utf-8")
    return file


@pytest.fixture
def asked(table):
    return [
        table, "--measured", "R", "--unit", "kN", "--prediction", "A * f", "--units", "A=mm^2, f=MPa"
    ]  # fmt: skip


def test_json_is_one_object_with_the_numbers_of_d8(asked, calibrate):
    ended = calibrate("resistance", *asked, "--cov", "f=0.05", "--cov", "A=0.03", "--target", "3.3", "--json")
    content = json.loads(ended.out)
    assert (ended.code, ended.err) == (0, "")
    assert (content["format"], content["target_beta"], content["seed"]) == ("calibrate-resistance/1", 3.3, 0)
    assert (content["n"], content["failed"], content["unit"]) == (8, 8, "kN")
    # D.8 by hand: b by least squares through the origin, V_delta from the log errors about it.
    measured, predicted = np.array(R), np.array(A) * np.array(F) / 1e3
    b = (measured @ predicted) / (predicted @ predicted)
    log = np.log(measured / (b * predicted))
    v_delta = np.sqrt(np.expm1(log.var(ddof=1)))
    v_rt = np.hypot(0.05, 0.03)
    assert content["annex_d8"]["b"] == pytest.approx(b, rel=1e-12)
    assert content["annex_d8"]["v_delta"] == pytest.approx(v_delta, rel=1e-10)
    assert content["annex_d8"]["v_rt"] == pytest.approx(v_rt, rel=1e-12)
    v_r = np.sqrt((1 + v_delta**2) * (1 + 0.05**2) * (1 + 0.03**2) - 1)
    assert content["annex_d8"]["v_r"] == pytest.approx(v_r, rel=1e-10)
    routes = {r["name"]: r for r in content["routes"]}
    assert routes["EN 1990 D.8"]["factor"] == content["annex_d8"]["gamma_m"]
    assert content["annex_d8"]["gamma_m_star"] is None
    assert all(set(d) == {"code", "message", "where"} for d in content["doubts"])


def test_printed_factors_are_those_of_the_tables(asked, calibrate):
    ended = calibrate("resistance", *asked, "--table-factors", "--json")
    annex = json.loads(ended.out)["annex_d8"]
    # EN 1990:2002, Tables D1 and D2, V unknown, n = 8: 2.00 and 5.07 (from memory).
    assert (annex["factors_from"], annex["k_n"], annex["k_d_n"]) == ("table", 2.00, 5.07)


def test_units_may_be_given_one_by_one(asked, calibrate):
    one_by_one = [*asked[:-2], "--column-unit", "A=mm^2", "--column-unit", "f=MPa"]
    assert calibrate("resistance", *one_by_one, "--json").out == calibrate("resistance", *asked, "--json").out


def test_it_prints_steps_trends_clusters_routes_doubts_and_the_caution(asked, calibrate):
    ended = calibrate(
        "resistance", *asked, "--cluster", "site", "--nominal-ratio", "0.9", "--known", "m=0.01"
    )
    assert (ended.code, ended.err) == (0, "")
    shown = " ".join(ended.out.split())
    for text in (
        "R in kN against A * f",
        "n = 8, b = ",
        "EN 1990, D.8, step by step",
        "gamma_M* = r_n / r_d",
        "Trends of measured over predicted",
        "2 clusters",
        "Scatter of the model itself",
        "Routes side by side",
        "few-tests",
        "licensed practice prevail",
    ):
        assert text in shown
    assert calibrate("resistance", *asked, "--quiet").out == ""


def test_it_says_what_a_study_says_of_the_same_tests(calibrate, tmp_path):
    study = package.read_study(ROOT / "studies" / "ground_screws" / "study.toml")
    of_study = resistance_content(evaluate_resistances(study)["screws"])
    whole = (ROOT / "datasets" / "ground_screws" / "load-tests.csv").read_text(encoding="utf-8")
    table = tmp_path / "screws.csv"  # without the tests that the study leaves out
    table.write_text("".join(x for x in whole.splitlines(True) if ",cap," not in x), encoding="utf-8")
    ended = calibrate(
        "resistance", table, "--measured", "R_test_kN", "--unit", "kN",
        "--prediction", study.resistances["screws"].prediction,
        "--units", "c_u_kPa=kPa,D_mm=mm,L_m=m,A_h_m2=m^2", "--survived", "end", "--cluster", "site",
        "--input", "slenderness", "--input", "c_u_kPa", "--known", "measurement=0.03",
        "--cov", "c_u_kPa=0.12", "--cov", "L_m=0.01",
        "--target", study.target_beta, "--seed", study.seed, "--json",
    )  # fmt: skip
    found = json.loads(ended.out)
    assert (found["n"], len(of_study["excluded"])) == (68, 6)
    same = set(of_study) - {"file", "sha256", "excluded", "routes", "doubts", "north_american", "mean_value"}
    assert {k: found[k] for k in same} == json.loads(json.dumps({k: of_study[k] for k in same}))
    # The study asks for further routes.
    assert found["routes"] == of_study["routes"][:4]
