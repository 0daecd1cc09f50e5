"""``index`` prints one situation, writes it when asked, and tells plainly what is wrong."""

import csv
import json
import math
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
FAST = ("--method", "none")


def ask(calibrate, study, *arguments):
    return calibrate("index", study, "--situation", 2, *FAST, *arguments)


def test_it_prints_situation_iteration_methods_and_answers(study, calibrate):
    ended = calibrate(
        "index", study, "--rule", "rupture", "--situation", 2, "--solver", "slsqp", "--against", "gamma_Q",
        "--count", 3, "--target", 3.8, "--factor", "gamma_M=1.3",
    )  # fmt: skip
    assert (ended.code, ended.err) == (0, "")
    shown = " ".join(ended.out.split())
    for text in (
        "Rule rupture, situation 2 of 3: chi = 0.6.",
        "Factors (present; given here: gamma_M): gamma_M = 1.3, gamma_Q = 1.5.",
        # A = gamma_M gamma_Q Q_k / f_k = 1.3 * 1.5 * 60 kN / 400 MPa
        "Size A by the design check: 292.5 mm².",
        "x f MPa x Q kN",
        "design point",
        "Hohenbichler–Rackwitz",
        "exact paraboloid",
        "importance sampling",
        "slsqp",
        "β against gamma_Q The size A is solved anew for each value.",
        "gives β = 3.8, in place of 292.5 mm²",
        "licensed practice prevail",
    ):
        assert text in shown
    assert ask(calibrate, study, "--quiet").out == ""


def test_json_is_the_file_and_nothing_else(study, calibrate, tmp_path):
    out = tmp_path / "lens"
    arguments = (
        "--against",
        "A",
        "--from",
        "250 mm^2",
        "--to",
        "400",
        "--count",
        "4",
        "--target",
        4.0,
        "--vary",
        "gamma_M",
    )
    ended = ask(calibrate, study, *arguments, "--json", "--out", out)
    assert (ended.code, ended.err) == (0, "")
    assert ended.out == (out / "index.json").read_text(encoding="utf-8")
    content = json.loads(ended.out)
    assert (content["format"], content["rule"], content["situation"]) == ("calibrate-index/1", "rupture", 2)
    assert content["place"] == {"chi": {"value": 0.6, "unit": ""}}
    assert content["trace"][-1]["beta"] == pytest.approx(content["beta"], abs=1e-12)
    point = content["form"]["design_point"]
    assert math.isclose(sum(p["alpha"] ** 2 for p in point.values()), 1.0, rel_tol=1e-12)
    size = content["size"]["value"]
    # On the limit state A f = Q, in the units of the study: mm^2 MPa = N.
    assert size * point["f"]["x"] == pytest.approx(1000.0 * point["Q"]["x"], rel=1e-9)
    assert [p["value"] for p in content["curve"]["points"]] == pytest.approx([250.0, 300.0, 350.0, 400.0])
    required = content["required"]
    assert required["met"]
    again = json.loads(ask(calibrate, study, "--factor", f"gamma_M={required['value']!r}", "--json").out)
    assert again["beta"] == pytest.approx(4.0, abs=1e-7)


def test_out_gets_tables_and_figures_of_two_variables(study, calibrate, tmp_path):
    out = tmp_path / "lens"
    assert ask(calibrate, study, "--against", "gamma_M", "--count", 5, "--out", out, "--quiet").code == 0
    figures = {f"{name}.{ending}" for name in ("limit_state", "family", "curve") for ending in ("svg", "png")}
    assert {p.name for p in (out / "figures").iterdir()} == figures
    assert {p.name for p in out.iterdir()} == {"index.json", "trace.csv", "curve.csv", "figures"}
    content = json.loads((out / "index.json").read_text(encoding="utf-8"))
    with (out / "trace.csv").open(encoding="utf-8") as stream:
        steps = list(csv.DictReader(stream))
    assert float(steps[-1]["x_Q"]) == pytest.approx(content["form"]["design_point"]["Q"]["x"], rel=1e-12)
    assert float(steps[-1]["beta"]) == content["trace"][-1]["beta"]
    with (out / "curve.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    assert [float(r["gamma_M"]) for r in rows] == pytest.approx([0.84, 1.02, 1.2, 1.38, 1.56])
    assert float(rows[2]["beta"]) == pytest.approx(content["beta"], abs=1e-12)
    assert float(rows[2]["size"]) == pytest.approx(content["size"]["value"], rel=1e-12)
    assert all(float(r["slope"]) > 0.0 for r in rows)


def test_its_own_folder_is_replaced_and_another_refused(study, calibrate, tmp_path):
    out = tmp_path / "lens"
    out.mkdir()
    (out / "mine.txt").write_text("mine")
    assert ask(calibrate, study, "--out", out, "--quiet").code == 2
    assert [p.name for p in out.iterdir()] == ["mine.txt"]
    assert ask(calibrate, study, "--out", out, "--quiet", "--force").code == 0
    (out / "old.txt").write_text("old")
    assert ask(calibrate, study, "--out", out, "--quiet").code == 0
    assert not (out / "old.txt").exists()
    ended = ask(calibrate, study, "--out", study.parent, "--quiet", "--force")
    assert ended.code == 2
    assert study.exists()


NAMES = "A, gamma_M, gamma_Q, f_k, P, chi, f.mean, f.cov, f.sd, Q.mean, Q.cov, Q.sd"
MESSAGES = [
    (["--rule", "ruptur"], "There is no rule 'ruptur'. Did you mean 'rupture'?"),
    (["--situation", "4"], "There is no situation 4; design situations run from 1 to 3."),
    (["--situation", "0"], "There is no situation 0; design situations run from 1 to 3."),
    (["--factor", "gama_M=1.2"], "There is no factor 'gama_M'. Did you mean 'gamma_M'?"),
    (
        ["--factor", "gamma_M=high"],
        "--factor: 'high' of 'gamma_M' is no number. Write NAME=NUMBER, such as gamma_M=1.25.",
    ),
    (
        ["--factor", "gamma_M"],
        "--factor: 'gamma_M' is no NAME=VALUE. Write NAME=NUMBER, such as gamma_M=1.25.",
    ),
    (["--factor", "gamma_M=1", "--factor", "gamma_M=2"], "--factor: 'gamma_M' is given twice."),
    (["--factor", "gamma_M=-1"], "Factor 'gamma_M' is -1; it must be above zero."),
    (["--on", "best"], "--on is 'best'; it must be one of present, optimal, proposed."),
    (
        ["--against", "gamma"],
        f"'gamma' is nothing that can be varied. Did you mean 'gamma_Q'? Known: {NAMES}.",
    ),
    (
        ["--target", "4", "--vary", "Q"],
        "'Q' is a basic variable; what varies is one of its moments. Write Q.mean, Q.cov or Q.sd.",
    ),
    (["--against", "A", "--from", "300 mm"], "--from: '300 mm' is a length (m); A is an area (m²)."),
    (["--against", "A", "--to", "300 mmm"], "--to: unknown unit 'mmm'. Did you mean 'mm'?"),
    (["--against", "A", "--to", "large"], "--to: 'large' is no number. Write a value of A, in mm^2."),
    (
        ["--against", "A", "--from", "300", "--to", "200 mm^2"],
        "The range of A runs from 300 mm^2 to 200 mm^2; it must rise.",
    ),
    (["--against", "A", "--count", "1"], "--count is 1; it must lie between 2 and 2001."),
    (["--from", "3"], "--from belongs to a curve. Add --against with a name."),
    (["--vary", "A"], "--vary belongs to an inverse question. Add --target, such as 3.8."),
    (["--target", "nan"], "--target is nan; it must be a finite number."),
    (["--cov", "0"], "--cov is 0; it must lie between 0 and 1."),
    (
        ["--solver", "newton"],
        "There is no solver 'newton'. Known: hasofer-lind-rackwitz-fiessler, gradient projection, slsqp.",
    ),
    (["--leading", "Q"], "Rule 'rupture' combines no actions, so that none of them leads."),
]


@pytest.mark.parametrize(("arguments", "message"), MESSAGES, ids=[" ".join(a) for a, _ in MESSAGES])
def test_wrong_input_is_told_in_one_message_and_nothing_written(
    study, calibrate, tmp_path, arguments, message
):
    given = [*(() if "--situation" in arguments else ("--situation", 2)), *arguments]
    ended = calibrate("index", study, *given, "--out", tmp_path / "lens")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err == f"{message}\n"
    assert not (tmp_path / "lens").exists()


def test_a_method_of_simulation_that_is_unknown(study, calibrate):
    ended = calibrate("index", study, "--situation", 1, "--method", "magic")
    assert ended.code == 2
    assert ended.err.startswith("There is no method of simulation 'magic'. Known: ")
    assert ended.err.endswith(", none.\n")


def test_what_must_be_named_where_there_are_several(study, calibrate, change):
    assert (
        calibrate("index", study).err
        == "The study has 3 design situations; name one with --situation, from 1 to 3.\n"
    )
    change(
        "[factors]",
        '[rules.second]\nlimit_state = "f * 400 >= Q / (1 mm**2)"\n[factors]'.replace("(1 mm**2)", "a_0"),
    )
    change('f_k = "400 MPa"', 'f_k = "400 MPa"\na_0 = "1 mm^2"')
    ended = calibrate("index", study, "--situation", 1)
    assert ended.err == "The study has several rules; name one with --rule. Known: rupture, second.\n"
    ended = calibrate("index", study, "--situation", 1, "--rule", "second", "--against", "gamma_M")
    assert ended.code == 2
    assert ended.err.startswith(
        "'gamma_M' does not enter rule 'second', so that β does not depend on it. What enters:"
    )


def test_a_situation_without_index_ends_with_3_and_its_status(study, calibrate, change):
    change('"A * f >= Q"', '"A * f + 1e6 * Q >= Q"')
    ended = ask(calibrate, study, "--against", "gamma_M", "--count", 2, "--json")
    assert ended.code == 3
    assert ended.err == "Rule rupture, situation 2 has no β: no failure region within reach.\n"
    content = json.loads(ended.out)
    assert (content["beta"], content["status"]) == (None, "no failure region within reach")
    assert [p["beta"] for p in content["curve"]["points"]] == [None, None]
    ended = ask(calibrate, study, "--target", 3.8)
    assert ended.code == 3
    assert "No value of A was found that gives β = 3.8" in " ".join(ended.out.split())


def test_a_situation_without_size_ends_with_3(study, calibrate, change, tmp_path):
    change("A * f_k / gamma_M >= gamma_Q * Q_k", "A * f_k / gamma_M >= A * f_k * gamma_Q")
    ended = ask(calibrate, study, "--out", tmp_path / "lens")
    assert ended.code == 3
    assert ended.err == "Rule rupture, situation 2 has no β: not converged: no size meets the design check.\n"
    assert "Size A by the design check: none." in ended.out
    assert [p.name for p in (tmp_path / "lens").iterdir()] == ["index.json"]
    ended = ask(calibrate, study, "--target", 3.8)
    assert (ended.code, ended.err) == (
        2, "A has no present value, so that there is nowhere to begin; vary something else.\n"
    )  # fmt: skip


def test_the_demonstration_runs(calibrate, tmp_path):
    study, out = ROOT / "studies" / "facade_bracket" / "study.toml", tmp_path / "lens"
    ended = calibrate(
        "index", study, "--rule", "pull_through", "--situation", 7, "--against", "C.cov", "--count", 5,
        "--target", 4.2, "--vary", "phi_P", "--cov", 0.1, "--out", out,
    )  # fmt: skip
    assert (ended.code, ended.err) == (0, "")
    assert "situation 7 of 48: chi = 0.3, t_nom = 1.5 mm, e = 60 mm." in " ".join(ended.out.split())
    assert "phi_P = " in ended.out
    assert {p.name for p in (out / "figures").glob("*.png")} == {"limit_state.png", "curve.png"}


def test_help_loads_no_heavy_library():
    program = (
        "import sys\nfrom calibrate.cli import main\n"
        "try:\n    main()\nfinally:\n    print('LOADED', *sys.modules)"
    )
    command = [sys.executable, "-c", program, "index", "-h"]
    ended = subprocess.run(command, capture_output=True, text=True, check=False)
    assert ended.returncode == 0
    loaded = {name.split(".")[0] for name in ended.stdout.split("LOADED", 1)[1].split()}
    assert not loaded & {"numpy", "scipy", "pandas", "matplotlib", "statsmodels"}
