"""The files of a result: the same bytes each time, the columns of the format, nothing where there is no figure."""

import csv
import io
import json
import math

import pytest

from calibrate.report import result_files

FIGURES = {
    "beta_by_chi", "beta_distribution", "required_factors", "size_change", "sensitivity", "probability_f_y"
}  # fmt: skip


@pytest.fixture(scope="module")
def rows(grid):
    return list(csv.DictReader(io.StringIO(grid.files["situations.csv"].decode("utf-8"))))


@pytest.fixture(scope="module")
def content(grid):
    return json.loads(grid.files["result.json"])


def test_two_runs_leave_the_same_bytes_except_for_provenance(grid, grid_result):
    again = result_files(grid_result())
    assert list(again) == list(grid.files)
    assert [n for n in again if again[n] != grid.files[n] and n != "result.json"] == []
    first, second = (json.loads(files["result.json"]) for files in (grid.files, again))
    assert first.pop("provenance").keys() == second.pop("provenance").keys()
    assert json.dumps(first) == json.dumps(second)


def test_the_files_are_those_of_the_format(grid):
    names = set(grid.files)
    assert names >= {"result.json", "situations.csv", "factors.csv", "units.json", "report.html"}
    figures = {n for n in names if n.startswith("figures/")}
    drawn = {n.removesuffix(".svg") for n in figures if n.endswith(".svg")}
    assert drawn >= {f"figures/{name}" for name in FIGURES}
    assert figures == {f"{n}.{ending}" for n in drawn for ending in ("svg", "png")}
    assert all(grid.files[f"{n}.png"].startswith(b"\x89PNG\r\n") for n in drawn)
    assert all(b"<svg" in grid.files[f"{n}.svg"][:600] for n in drawn)


def test_situations_have_their_columns_in_order(rows):
    assert list(rows[0]) == [
        "rule", "situation", "chi", "weight", "size_present", "size_optimal", "size_proposed", "beta_present",
        "beta_optimal", "beta_proposed", "pf", "alpha_f_y", "alpha_Q", "x_f_y", "x_Q", "status",
    ]  # fmt: skip
    assert [(r["rule"], r["situation"], r["chi"]) for r in rows] == [
        (rule, str(i), str(chi)) for rule in ("tension", "anchor") for i, chi in enumerate((0.3, 0.6, 0.9), 1)
    ]
    assert math.isclose(sum(float(r["weight"]) for r in rows), 1.0, rel_tol=1e-12)


def test_units_name_every_column(grid, rows):
    units = json.loads(grid.files["units.json"])
    assert list(units) == list(rows[0])
    assert units["chi"] == units["weight"] == units["beta_proposed"] == units["alpha_Q"] == ""
    assert (units["x_f_y"], units["x_Q"]) == ("MPa", "kN")
    assert units["size_proposed"] == {"tension": "mm^2", "anchor": "cm^2"}


def test_one_size_unit_is_a_text(hostile):
    assert json.loads(hostile.files["units.json"])["size_proposed"] == "mm^2"


def test_what_does_not_exist_is_empty_in_csv_and_null_in_json(rows, content):
    missing = [r for r in rows if r["status"] != "converged"]
    assert [(r["rule"], r["situation"]) for r in missing] == [("anchor", "3")]
    nothing = ("beta_present", "beta_optimal", "beta_proposed", "pf", "alpha_f_y", "alpha_Q", "x_f_y", "x_Q")
    assert {missing[0][name] for name in nothing} == {""}
    assert missing[0]["status"] == "no failure region within reach"
    assert float(missing[0]["size_proposed"]) > 0
    assert content["unconverged"] == 1
    assert content["variables"]["Q"]["n"] is None
    assert content["variables"]["f_y"]["n"] == 12


def test_no_file_holds_nan_or_infinity(grid):
    for name in ("situations.csv", "factors.csv"):
        cells = {c.lower() for row in csv.reader(io.StringIO(grid.files[name].decode())) for c in row}
        assert not cells & {"nan", "inf", "-inf", "none"}
    json.loads(grid.files["result.json"], parse_constant=lambda text: pytest.fail(f"{text} is not JSON"))


def test_the_folder_agrees_with_the_result(grid, rows, content):
    frame = grid.result.situations
    for name in ("weight", "size_proposed", "beta_proposed", "x_Q"):
        read = [float(r[name]) if r[name] else math.nan for r in rows]
        assert read == pytest.approx(list(frame[name]), rel=0, abs=0, nan_ok=True)
    weight = [float(r["weight"]) for r in rows if r["beta_proposed"]]
    beta = [float(r["beta_proposed"]) for r in rows if r["beta_proposed"]]
    mean = math.fsum(w * b for w, b in zip(weight, beta, strict=True)) / math.fsum(weight)
    assert content["beta"]["proposed"]["mean"] == pytest.approx(mean, rel=1e-12)
    assert content["beta"]["proposed"]["min"] == min(beta)


def test_factors_have_their_columns(grid, content):
    found = list(csv.DictReader(io.StringIO(grid.files["factors.csv"].decode("utf-8"))))
    columns = ["name", "present", "optimal", "proposed", "held", "lower", "upper", "step"]
    assert list(found[0]) == columns
    by_name = {r["name"]: r for r in found}
    assert [by_name["gamma_M"][c] for c in columns[1:]] == ["1.2", "1.2", "1.2", "True", "", "", ""]
    free = [by_name["gamma_Q"][c] for c in ("held", "lower", "upper", "step")]
    assert free == ["False", "1.5", "2.0", "0.25"]
    for name, factor in content["factors"].items():
        assert float(by_name[name]["proposed"]) == factor["proposed"]


def test_result_has_the_keys_of_the_format(content):
    assert set(content) >= {
        "format", "study", "target_beta", "reference_period", "seed", "provenance", "variables", "factors", "beta",
        "objective", "situations", "unconverged", "doubts",
    }  # fmt: skip
    assert content["format"] == "calibrate-result/1"
    assert set(content["study"]) >= {"title", "file", "sha256"}
    assert set(content["provenance"]) >= {"versions", "started", "seconds", "command"}
    assert set(content["beta"]) == set(content["objective"]) == {"present", "optimal", "proposed"}
    assert set(content["beta"]["proposed"]) >= {"mean", "sd", "min", "max", "rms_from_target", "worst"}
    assert set(content["beta"]["proposed"]["worst"]) == {"rule", "situation"}
    assert set(content["variables"]["Q"]) >= {"family", "unit", "parameters", "mean", "sd", "cov", "n"}
    assert content["variables"]["Q"]["varies"] is True
    # The maximum of 50 years of a Gumbel variable: its mean of one year and ln 50 of its scale, sd √6 / π.
    means = [m + math.log(50.0) * 0.30 * m * math.sqrt(6.0) / math.pi for m in (0.6 * 30.0, 0.6 * 90.0)]
    assert content["variables"]["Q"]["mean"] == pytest.approx(means, rel=1e-9)
    assert all(set(d) == {"code", "message", "where"} for d in content["doubts"])
