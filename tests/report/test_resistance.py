"""Component tests in report, figures, result.json and tables: invented tests with subgroups and hostile labels."""

import csv
import io
import json
import re

import numpy as np
import pytest

from calibrate.report import result_files
from calibrate.report.resistance_figures import covariate_figures
from calibrate.report.symbols import running
from calibrate.study import check_summary, read_study, run
from calibrate.study.uncertainty_ledger import uncertainty_ledger

HOSTILE = "<b>&"
STUDY = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Brackets"
reference_period = 50
seed = 5
[target]
beta = 3.8
[resistance.brackets]
file = "tests.csv"
measured = "R_kN"
unit = "kN"
prediction = "f_MPa * A_mm2"
units = { f_MPa = "MPa", A_mm2 = "mm^2" }
inputs = ["A_mm2", "odd/../name"]
SURVIVED
subgroup = "type"
cluster = "laboratory"
covs = { f = 0.06, A = 0.02 }
nominal_ratio = 0.9
known_scatter = { load_cell = 0.02 }
[resistance.brackets.north_american]
format = "LSD members"
material = { mean = 1.1, cov = 0.08 }
fabrication = { mean = 1.0, cov = 0.05 }
[resistance.brackets.mean_value]
target = 3.0
[resistance.brackets.mean_value.loads]
dead_factor = 1.25
live_factor = 1.5
dead_to_live = [0.5, 2.0]
dead_bias = 1.05
live_bias = 1.0
dead_cov = 0.10
live_cov = 0.20
[variables.theta]
resistance = "brackets"
family = "lognormal"
role = "resistance"
[variables.Q]
family = "gumbel"
mean = "0.6 * Q_k"
cov = 0.30
unit = "kN"
[quantities]
Q_k = "50 kN"
[factors]
gamma_Q = { present = 1.5, lower = 1.0, upper = 3.0, step = 0.05 }
[rules.pull]
design_check = "R_n >= gamma_Q * Q_k"
sizes = "R_n"
size_unit = "kN"
limit_state = "theta * R_n >= Q"
"""
N = 24
AREA = np.linspace(60.0, 240.0, N)
STRENGTH = 300.0 + 20.0 * np.cos(np.arange(N))
# The error falls with the area, so that a trend is found.
ERROR = 1.1 * (AREA / 130.0) ** -0.25 * np.exp(0.05 * np.sin(7.0 * np.arange(N)))
MEASURED = np.round(ERROR * STRENGTH * AREA / 1000.0, 3)


def project(folder, survived=()):
    (folder / "pyproject.toml").write_text("")
    labels = [HOSTILE, "north", "south"]
    lines = ["R_kN,f_MPa,A_mm2,odd/../name,type,laboratory,end"]
    for i in range(N):
        end = "stopped" if i in survived else "failed"
        lines.append(
            f"{MEASURED[i]},{STRENGTH[i]:.6f},{AREA[i]:.6f},{1 + i % 5},{'plate' if i % 2 else 'angle'},"
            f"{labels[i % 3]},{end}"
        )
    (folder / "tests.csv").write_text("\n".join(lines) + "\n")
    path = folder / "study.toml"
    path.write_text(STUDY.replace("SURVIVED", 'survived = "end"' if survived else ""))
    return path


@pytest.fixture(scope="module")
def complete(tmp_path_factory):
    return run(read_study(project(tmp_path_factory.mktemp("complete"))))


@pytest.fixture(scope="module")
def stopped(tmp_path_factory):
    return run(read_study(project(tmp_path_factory.mktemp("stopped"), survived=(3, 4, 11))))


@pytest.fixture(scope="module")
def files(complete):
    return result_files(complete)


@pytest.fixture(scope="module")
def section(files):
    page = files["report.html"].decode()
    return re.search(r'<section id="resistance">.*?</section>', page, re.DOTALL)[0]


def plain(html):
    return " ".join(re.sub(r"<svg.*?</svg>|<[^>]*>", " ", html, flags=re.DOTALL).split())


def test_the_section_stands_after_the_fits_and_is_in_the_contents(files, grid):
    page = files["report.html"].decode()
    assert re.findall(r'<section id="(\w+)">', page)[3:6] == ["fits", "resistance", "rules"]
    assert '<a href="#resistance">Resistance from tests</a>' in page
    assert "Resistance from tests" not in grid.page


def test_every_part_has_its_table(section):
    captions = [plain(c) for c in re.findall(r"<caption>(.*?)</caption>", section)]
    assert captions == [
        "Step by step", "Subgroups with a mean correction of their own", "Trends of δ",
        "What can be done about the trend with prediction", "What can be done about the trend with A mm2",
        "Tests as independent and in clusters",
        "Without the tests of one cluster", "Observed scatter, known parts, and what is left", "LSD members",
        "Closed forms beside FORM",
    ]  # fmt: skip
    headings = [plain(h) for h in re.findall(r"<h4>(.*?)</h4>", section)]
    assert headings[-2:] == ["All routes side by side", "Where the number of tests is allowed for"]
    assert section.count("<table>") == len(captions) + 2


def test_the_steps_of_d8_are_those_worked_out_by_hand(section):
    predicted = STRENGTH.round(6) * AREA.round(6) / 1000.0
    b = np.sum(MEASURED * predicted) / np.sum(predicted**2)
    log_delta = np.log(MEASURED / (b * predicted))
    v_delta = np.sqrt(np.expm1(np.var(log_delta, ddof=1)))
    v_rt = np.hypot(0.06, 0.02)
    v_r = np.sqrt((1 + v_delta**2) * (1 + 0.06**2) * (1 + 0.02**2) - 1)
    q = np.sqrt(np.log1p(v_r**2))
    steps = plain(section[section.index("Step by step") : section.index("Subgroups with")])
    for value in (b, np.mean(log_delta), np.std(log_delta, ddof=1), v_delta, v_rt, v_r, q):
        assert f" {value:.4f} ".replace("-", "−") in steps
    # 24 tests: Student's t for 23 degrees of freedom at 5 %, 1.7139, times sqrt(1 + 1/24).
    assert f" {1.7139 * np.sqrt(1 + 1 / 24):.3f}" in steps
    assert "nominal over mean prediction 0.9" in steps


def test_labels_of_users_stay_text(section):
    assert HOSTILE not in section
    assert "<td>&lt;b&gt;&amp;</td>" in section
    assert "(without &lt;b&gt;&amp;)" in section


def test_figures_are_drawn_and_are_the_same_in_a_second_run(complete, files, tmp_path):
    again = result_files(run(read_study(project(tmp_path))))
    names = {re.fullmatch(r"figures/(\w+)\.png", f)[1] for f in files if f.endswith(".png")}
    wanted = {
        "tests_brackets", "errors_brackets", "error_brackets_prediction", "error_brackets_A_mm2",
        "error_brackets_odd_name", "clusters_brackets",
    }  # fmt: skip
    assert wanted <= names
    for name in wanted:
        for kind in ("svg", "png"):
            assert again[f"figures/{name}.{kind}"] == files[f"figures/{name}.{kind}"]
    assert again["report.html"] == files["report.html"]
    assert again["tests_brackets.csv"] == files["tests_brackets.csv"]


def test_two_columns_never_share_a_figure(complete):
    named = list(covariate_figures({"a": complete.resistances["brackets"]}).values())
    assert len(set(named)) == len(named) == 3
    assert all(re.fullmatch(r"\w+", name, re.ASCII) for name in named)


def test_result_json_has_the_numbers_of_steps_and_routes(complete, files):
    found = complete.resistances["brackets"]
    content = json.loads(files["result.json"])["resistance"]["brackets"]
    annex = content["annex_d8"]
    for key in (
        "b",
        "v_delta",
        "v_rt",
        "v_r",
        "q_rt",
        "q_delta",
        "q",
        "alpha_rt",
        "alpha_delta",
        "r_k",
        "r_d",
    ):
        assert annex[key] == getattr(found.annex, key)
    assert annex["gamma_m_star"] == [float(found.annex.gamma_m_star)]
    assert [r["factor"] for r in content["routes"]] == [r.factor for r in found.routes]
    assert content["routes"][4]["r_d"] is None
    assert content["trends"]["covariates"]["A_mm2"]["flagged"] is True
    assert list(content["subsets"]["subsets"]) == ["angle", "plate"]
    assert content["clusters"]["effective_n"] == found.clusters.effective_n
    assert content["clusters"]["without"][HOSTILE]["r_d"] == found.clusters.left_out_design[0]
    assert content["separation"]["known"] == {"load_cell": 0.02}
    assert content["mean_value"]["form"] == found.mean_value.form.phi.tolist()
    assert content["north_american"]["phi"] == found.north_american.phi


def test_the_table_of_tests_has_one_row_for_each(stopped):
    found = stopped.resistances["brackets"]
    text = result_files(stopped)["tests_brackets.csv"].decode()
    rows = list(csv.DictReader(io.StringIO(text)))
    tests = found.records.tests
    assert [int(r["row"]) for r in rows] == tests.rows.tolist()
    assert [float(r["measured"]) for r in rows] == MEASURED.tolist()
    np.testing.assert_allclose([float(r["predicted"]) for r in rows], STRENGTH * AREA / 1000.0, rtol=1e-7)
    np.testing.assert_allclose(
        [float(r["delta"]) * found.annex.b for r in rows], MEASURED / (STRENGTH * AREA / 1000.0), rtol=1e-7
    )
    assert [i for i, r in enumerate(rows) if r["survived"] == "true"] == [3, 4, 11]
    assert rows[0]["cluster"] == HOSTILE
    assert [r["subgroup"] for r in rows[:2]] == ["angle", "plate"]
    assert [float(r["odd/../name"]) for r in rows[:6]] == [1, 2, 3, 4, 5, 1]


def test_stopped_tests_are_counted_and_named_in_the_report(stopped):
    page = result_files(stopped)["report.html"].decode()
    text = plain(page)
    assert (
        "24 tests from tests.csv: 21 ended in failure, 3 were stopped before and count as lower bounds"
        in text
    )
    assert "of largest likelihood" in text
    assert "no test of normality is made here" in text


def test_plain_estimates_from_few_tests_are_doubted_and_ticked(complete, section):
    entries = uncertainty_ledger(complete.study, complete.resistances["brackets"]).entries
    assert [e.mechanism for e in entries] == ["k_n", "k_n", "k_n", "C_P", "none", "none"]
    doubted = [d.where for d in complete.doubts if d.code == "few-tests-not-allowed-for"]
    assert doubted == ["resistance.brackets", "variables.theta"]
    assert section[section.index("Where the number of tests") :].count("✓") == len(entries)


def test_a_bare_table_of_many_tests_has_no_more_than_its_own_parts(tmp_path):
    path = project(tmp_path)
    table = tmp_path / "tests.csv"
    head, *lines = table.read_text().splitlines()
    table.write_text("\n".join([head, *lines * 6]) + "\n")
    text = re.sub(
        r"\[resistance.brackets.north.*?(?=\[variables.theta)", "", path.read_text(), flags=re.DOTALL
    )
    text = re.sub(r"(?m)^(subgroup|cluster|covs|nominal_ratio|known_scatter) = .*\n", "", text)
    path.write_text(text.replace('inputs = ["A_mm2", "odd/../name"]', 'inputs = ["odd/../name"]'))
    result = run(read_study(path))
    files = result_files(result)
    section = re.search(r'<section id="resistance">.*?</section>', files["report.html"].decode(), re.DOTALL)[
        0
    ]
    shown = plain(section)
    assert "144 tests from tests.csv: all ended in failure. No subgroups or clusters are named." in shown
    assert "more than 100 tests" in shown
    assert "no basic variable with scatter was given" in shown
    for absent in ("Clusters", "North American", "bias statistics", "Subgroups with", "Scatter of the model"):
        assert absent not in shown
    assert "figures/clusters_brackets.png" not in files
    assert result.resistances["brackets"].annex.many


def test_known_scatter_above_the_observed_is_said_and_not_clipped(tmp_path):
    path = project(tmp_path)
    path.write_text(path.read_text().replace("load_cell = 0.02", "load_cell = 0.3"))
    result = run(read_study(path))
    shown = plain(result_files(result)["report.html"].decode())
    assert "does not exist" in shown
    assert result.to_dict()["resistance"]["brackets"]["separation"]["cov"] is None
    assert result.to_dict()["resistance"]["brackets"]["separation"]["cov_squared"] < 0.0


def test_check_names_tests_survivors_and_clusters(stopped):
    found = check_summary(stopped.study)["resistances"]["brackets"]
    kept = {key: found[key] for key in ("file", "n", "survived", "subgroups", "clusters")}
    assert kept == {"file": "tests.csv", "n": 24, "survived": 3, "subgroups": 2, "clusters": 3}


def test_running_text_has_typeset_symbols_and_is_escaped():
    assert running("k_d,n < Q_rt²") == "<i>k</i><sub>d,n</sub> &lt; <i>Q</i><sub>rt</sub>²"
    assert running("gamma_M of <b>") == "gamma_M of &lt;b&gt;"
