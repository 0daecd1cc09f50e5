"""An action over classes of sites in a study: beta by class, on average, and of the worst; all numbers are invented."""

import json
import re

import numpy as np
import pytest
from scipy import stats

import calibrate
from calibrate.actions.territories import over_sites
from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.study.export import table_files

CLASSES = """class,weight,q_mean,q_cov,note
inland,5,0.30,0.20,flat
coast,3,0.38,0.22,rough
ridge,1,0.47,0.25,steep
"""
WEIGHTS = np.array([5.0, 3.0, 1.0]) / 9.0
MEANS, COVS = np.array([300.0, 380.0, 470.0]), np.array([0.20, 0.22, 0.25])

TABLE = """
[sites.climate]
table = "sites.csv"
label = "class"
weight = "weight"
units = { q_mean = "kPa" }
"""
INLINE = """
[sites.climate]
label = "class"
weight = "weight"
[sites.climate.columns]
class = ["inland", "coast", "ridge"]
weight = [5, 3, 1]
q_mean = ["300 Pa", "0.38 kPa", "0.47 kPa"]
q_cov = [0.20, 0.22, 0.25]
"""
OVER_SITES = """
mean = "q_mean"
cov = "q_cov"
sites = "climate"
"""
FREE = """
gamma_M = { present = 1.1, lower = 1.0, upper = 1.5, step = 0.05 }
gamma_Q = { present = 1.5, lower = 1.0, upper = 2.5, step = 0.05 }
"""
STUDY = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Fence over a territory"
reference_period = 50
other_periods = [10]
[target]
beta = 3.0
[quantities]
q_k = "0.7 kPa"
G_k = "0.5 kPa"
f_k = "300 MPa"
{sites}
[variables.q]
family = "gumbel"
period = 1
role = "action"
{q}
[variables.f]
family = "lognormal"
mean = "1.2 * f_k"
cov = 0.1
[variables.G]
family = "normal"
mean = "G_k"
cov = 0.1
[situations.axes]
chi = [0.2, 0.5, 0.8]
[rules.bending]
design_check = "w * f_k / gamma_M >= 1.35 * G_k * (1 - chi) + gamma_Q * q_k * chi"
sizes = "w"
limit_state = "w * f >= G * (1 - chi) + q * chi"
[rules.dead_load]
design_check = "w * f_k / gamma_M >= 1.35 * G_k"
sizes = "w"
limit_state = "w * f >= G"
[factors]
{factors}
"""


def text_of(sites=TABLE, q=OVER_SITES, factors=FREE):
    return STUDY.format(sites=sites, q=q, factors=factors)


@pytest.fixture
def read(tmp_path):
    def written(text=None, table=CLASSES, **parts):
        folder = tmp_path / "house" / "studies" / "fence"
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "sites.csv").write_text(table, encoding="utf-8")
        path = folder / "study.toml"
        path.write_text(text_of(**parts) if text is None else text, encoding="utf-8")
        return calibrate.read_study(path)

    return written


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    folder = tmp_path_factory.mktemp("sites")
    (folder / "sites.csv").write_text(CLASSES, encoding="utf-8")
    (folder / "study.toml").write_text(text_of(), encoding="utf-8")
    return calibrate.run(calibrate.read_study(folder / "study.toml"))


def problems(call):
    with pytest.raises(InputError) as caught:
        call()
    return list(caught.value.problems)


# What is computed ------------------------------


@pytest.mark.parametrize(
    ("site", "mean", "cov"), [("inland", 0.30, 0.20), ("coast", 0.38, 0.22), ("ridge", 0.47, 0.25)]
)
def test_beta_of_a_class_is_that_of_a_study_of_this_class_alone(result, read, site, mean, cov):
    held = "\n".join(f"{k} = {v!r}" for k, v in result.calibration.proposed.factors.items())
    alone = calibrate.run(read(sites="", q=f'mean = "{mean} kPa"\ncov = {cov}', factors=held))
    np.testing.assert_allclose(result.sites[f"beta_{site}"], alone.situations["beta_proposed"], atol=1e-7)
    np.testing.assert_allclose(
        result.situations["size_proposed"], alone.situations["size_proposed"], rtol=1e-12
    )


def test_the_average_is_the_total_probability_and_the_worst_the_smallest(result):
    by_site = result.sites[["beta_inland", "beta_coast", "beta_ridge"]].to_numpy()
    expected = -stats.norm.ppf(stats.norm.cdf(-by_site) @ WEIGHTS)
    np.testing.assert_allclose(result.sites["average_beta"], expected, rtol=1e-10)
    np.testing.assert_allclose(result.sites["worst_beta"], by_site.min(axis=1), rtol=1e-15)
    assert result.sites["worst_site"].tolist() == ["ridge"] * 3 + [""] * 3
    assert list(result.sites["rule"]) == list(result.situations["rule"])
    assert list(result.sites["situation"]) == list(result.situations["situation"])
    np.testing.assert_array_equal(result.sites["mixture_beta"], result.situations["beta_proposed"])


def test_the_mixture_is_converted_class_by_class(result):
    """The maximum of 50 years in each class (Gumbel moves by scale ln 50), mixed afterwards."""
    scale = MEANS * COVS * np.sqrt(6.0) / np.pi
    location = MEANS - np.euler_gamma * scale + scale * np.log(50.0)
    mean = WEIGHTS @ (location + np.euler_gamma * scale)
    second = WEIGHTS @ ((location + np.euler_gamma * scale) ** 2 + (np.pi * scale) ** 2 / 6.0)
    found = result.variables["q"]
    assert found.mean == pytest.approx([mean / 1000.0], rel=1e-12)
    assert found.sd == pytest.approx([np.sqrt(second - mean**2) / 1000.0], rel=1e-10)
    assert found.parameters["location"] == pytest.approx(location / 1000.0, rel=1e-12)
    assert (found.unit.text, found.parameters_period) == ("kPa", 50.0)


STIFF = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Stiff wall"
reference_period = 50
other_periods = [10]
[target]
beta = 2.0
{sites}
[variables.q]
family = "{family}"
period = 1
mean = "q_mean"
cov = "q_cov"
sites = "climate"
[rules.wall]
limit_state = "gamma * r_0 >= q"
[quantities]
r_0 = "0.9 kPa"
[factors]
gamma = 1.0
"""


@pytest.mark.parametrize("family", ["gumbel", "lognormal", "normal"])
def test_one_random_action_against_the_closed_form(read, family):
    """With the action alone FORM is exact, also on the mixture: P_f = sum of w (1 - F(r)^years)."""
    found = calibrate.run(read(STIFF.format(sites=INLINE, family=family)))
    law = {
        "gumbel": lambda m, s: stats.gumbel_r(m - np.euler_gamma * s * np.sqrt(6) / np.pi, s * np.sqrt(6) / np.pi),
        "normal": stats.norm,
        "lognormal": lambda m, s: stats.lognorm(
            np.sqrt(np.log1p((s / m) ** 2)), scale=m / np.sqrt(1.0 + (s / m) ** 2)
        ),
    }[family](MEANS, MEANS * COVS)  # fmt: skip

    def beta(years):
        fails = -np.expm1(years * law.logcdf(900.0))
        return -stats.norm.ppf(fails), -stats.norm.ppf(WEIGHTS @ fails)

    by_site, average = beta(50.0)
    row = found.sites.iloc[0]
    assert [row["beta_inland"], row["beta_coast"], row["beta_ridge"]] == pytest.approx(by_site, abs=1e-6)
    assert row["average_beta"] == pytest.approx(average, abs=1e-6)
    assert row["mixture_beta"] == pytest.approx(average, abs=1e-6)
    assert found.other_periods[0].direct[0] == pytest.approx(beta(10.0)[1], abs=1e-6)
    assert "sites-mixed-approximately" not in {d.code for d in found.doubts}


def test_one_class_is_a_plain_variable(read):
    one = CLASSES.splitlines()
    over = calibrate.run(read(table="\n".join([one[0], one[3]]) + "\n"))
    plain = calibrate.run(read(sites="", q='mean = "0.47 kPa"\ncov = 0.25'))
    assert over.calibration.proposed.factors == plain.calibration.proposed.factors
    np.testing.assert_allclose(over.situations["beta_optimal"], plain.situations["beta_optimal"], atol=1e-6)
    for name in ("beta_ridge", "average_beta", "worst_beta", "mixture_beta"):
        np.testing.assert_allclose(over.sites[name], plain.situations["beta_proposed"], atol=1e-7)
    assert plain.sites is None
    assert plain.to_dict()["sites"] == {}
    assert "sites.csv" not in table_files(plain)


def test_columns_written_out_are_the_same_table(read, result):
    inline = calibrate.run(read(sites=INLINE))
    np.testing.assert_allclose(
        inline.sites.drop(columns=["rule", "worst_site"]).to_numpy(float),
        result.sites.drop(columns=["rule", "worst_site"]).to_numpy(float),
        atol=1e-8,
    )
    assert inline.to_dict()["sites"]["climate"]["file"] is None


def test_without_label_and_weight_rows_are_numbered_and_alike(read):
    sites = read(sites='[sites.climate]\ntable = "sites.csv"\nunits = { q_mean = "kPa" }').sites["climate"]
    assert sites.labels == ("1", "2", "3")
    assert sites.weights == pytest.approx([1 / 3] * 3)


def test_a_class_without_weight_is_shown_but_does_not_count(read):
    found = calibrate.run(read(table=CLASSES.replace("ridge,1,", "ridge,0,")))
    assert (found.sites["beta_ridge"][:3] < found.sites["worst_beta"][:3]).all()
    assert set(found.sites["worst_site"][:3]) == {"coast"}
    assert not [d for d in found.doubts if d.code == "site-below-target" and "'ridge'" in d.message]


def test_quantities_and_expressions_of_columns(read):
    found = calibrate.run(read(q='mean = "0.5 * q_mean + 0.5 * q_k"\ncov = 0.2\nsites = "climate"'))
    annual = 0.5 * MEANS + 350.0
    scale = 0.2 * annual * np.sqrt(6.0) / np.pi
    mean = WEIGHTS @ (annual + scale * np.log(50.0))
    assert found.variables["q"].mean == pytest.approx([mean / 1000.0], rel=1e-12)


def test_results_do_not_depend_on_the_number_of_workers(read, result):
    again = calibrate.run(read(), workers=2)
    assert table_files(again)["sites.csv"] == table_files(result)["sites.csv"]


# Doubts, files, report ------------------------------


def test_a_class_far_below_the_target_is_named(result):
    doubts = [d for d in result.doubts if d.code == "site-below-target"]
    assert [d.where for d in doubts] == ["variables.q"]
    assert "In class 'ridge', 11.1 % of the sites" in doubts[0].message
    assert f"β falls to {result.sites['beta_ridge'].min():.2f}" in doubts[0].message


@pytest.fixture(scope="module")
def unlike(tmp_path_factory):
    """A study with a rare class far above the others, and its true beta by integration over the loads."""
    folder = tmp_path_factory.mktemp("unlike")
    table = "class,weight,q_mean,q_cov\nplain,95,0.30,0.10\nrare,5,0.60,0.10\n"
    (folder / "sites.csv").write_text(table, encoding="utf-8")
    (folder / "study.toml").write_text(text_of(), encoding="utf-8")
    found = calibrate.run(calibrate.read_study(folder / "study.toml"))
    f = distribution("lognormal", mean=360e6, cov=0.1)
    load = distribution("normal", mean=500.0, cov=0.1)
    q = distribution("gumbel", mean=np.array([300.0, 600.0])[:, None, None], cov=0.1)
    u = np.linspace(-7.0, 7.0, 401)
    phi = np.exp(-0.5 * u * u) / np.sqrt(2 * np.pi) * (u[1] - u[0])
    true = []
    for chi, w in zip((0.2, 0.5, 0.8), found.situations["size_proposed"], strict=False):
        room = (w * f.x(u)[:, None] - (1 - chi) * load.x(u)[None, :]) / chi
        fails = -np.expm1(50.0 * q.logcdf(room[None]))
        true.append(-stats.norm.ppf(np.array([0.95, 0.05]) @ np.einsum("kij,i,j->k", fails, phi, phi)))
    return found, np.array(true)


def test_a_mixture_that_form_sees_wrongly_is_doubted(unlike):
    found, true = unlike
    doubts = [d for d in found.doubts if d.code == "sites-mixed-approximately"]
    assert len(doubts) == 1
    apart = np.abs(found.sites["mixture_beta"] - found.sites["average_beta"])
    assert f"by up to {apart.max():.2f} in β" in doubts[0].message
    off = np.abs(found.sites["average_beta"][:3] - true)
    assert (off < np.abs(found.sites["mixture_beta"][:3] - true)).all()
    assert (off < 0.05).all()


def test_the_nearest_design_point_of_all_classes_counts(unlike):
    """With little of the load, a search from the medians stays with the common class, 0.4 above the truth."""
    found, true = unlike
    off = found.sites["mixture_beta"][:3] - true
    assert (off < 0.0).all()  # here FORM errs to the safe side
    assert (off > -0.25).all()


def test_classes_that_are_looked_at_are_spread():
    from calibrate.factors.classes import MOST, _looked_at

    means = np.linspace(10.0, 1.0, 40)
    law = over_sites(distribution("gumbel", mean=means, cov=0.2), np.ones(40))
    chosen = list(_looked_at(law))
    assert len(chosen) == MOST
    assert {0, 39} <= set(chosen)


def test_files_and_report(result, tmp_path):
    from calibrate.report import write_result

    write_result(result, tmp_path / "out")
    content = json.loads((tmp_path / "out" / "result.json").read_text(encoding="utf-8"))["sites"]["climate"]
    assert content["variable"] == "q"
    assert [c["name"] for c in content["classes"]] == ["inland", "coast", "ridge"]
    assert [c["weight"] for c in content["classes"]] == pytest.approx(WEIGHTS)
    assert content["worst"]["class"] == "ridge"
    weight = result.situations["weight"]
    assert content["average"]["mean"] == pytest.approx(
        np.average(result.sites["average_beta"], weights=weight)
    )
    assert content["classes"][2]["beta"]["min"] == pytest.approx(result.sites["beta_ridge"].min())
    lines = (tmp_path / "out" / "sites.csv").read_text(encoding="utf-8").splitlines()
    assert lines[0] == (
        "rule,situation,beta_inland,beta_coast,beta_ridge,average_beta,worst_beta,worst_site,mixture_beta"
    )
    assert len(lines) == 7
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "By class of site, with proposed factors" in page
    assert "by class of sites.climate" in page
    rows = re.findall(r"<tr[^>]*><td[^>]*>ridge</td>.*?</tr>", page)
    assert len(rows) == 2
    assert f"{result.sites['beta_ridge'].min():.2f}" in rows[1]


def test_the_site_table_is_not_overwritten(read):
    from calibrate.report.folder import input_files

    study = read()
    assert study.path.parent / "sites.csv" in input_files(study)


# Wrong input ------------------------------


@pytest.mark.parametrize(
    ("changes", "message", "hint"),
    [
        (('label = "class"', 'label = "clas"'), "sites.climate.label names the column 'clas'", "'class'"),
        (('weight = "weight"', 'weight = "share"'), "the table 'sites.csv' has no such column", "Known:"),
        (('weight = "weight"', 'weight = "note"'), "names the column 'note', which holds text", None),
        (('q_mean = "kPa"', 'q_maen = "kPa"'), "sites.climate.units.q_maen names 'q_maen'", "'q_mean'"),
        (('table = "sites.csv"', 'table = "site.csv"'), "sites.climate.table", None),
        (('table = "sites.csv"', 'table = "../../../sites.csv"'), "outside", None),
        (('label = "class"', 'table_name = "x"'), "unknown key 'table_name'", None),
        (('table = "sites.csv"', ""), "sites.climate needs either 'table' or 'columns'", "Write table"),
        (('sites = "climate"', 'sites = "climat"'), "names the site table 'climat'", "'climate'"),
        (('mean = "q_mean"', 'mean = "q_maen"'), "the name 'q_maen' is not defined", "'q_mean'"),
        (('mean = "q_mean"', 'mean = "note"'), "'note' is a column of text of a site table", "labels"),
        (('mean = "q_mean"', 'mean = "q_mean * chi"'), "'chi' is an axis", "into the limit state"),
        (('mean = "q_mean"', 'mean = "q_mean * w"'), "'w' is the size of a rule", "into the limit state"),
        (('q_mean = "kPa"', 'q_mean = "kN"'), "rules.bending.limit_state", None),
        (('cov = "q_cov"', 'cov = "q_mean"'), "variables.q.cov must be dimensionless", None),
        (('family = "gumbel"', 'family = "constant"'), "needs a family with scatter", None),
        (('period = 1\nrole = "action"', "size_ratio = 2"), "has a size_ratio", None),
        (('mean = "G_k"', 'mean = "q_mean"'), "'q_mean' is a column of sites.climate, which only", None),
        (('q_k = "0.7 kPa"', 'q_k = "0.7 kPa"\nq_cov = 0.2'), "'q_cov', which stands for two things", "Rename"),
        (("cov = 0.1\n[var", 'cov = 0.1\nsites = "climate"\n[var'), "second variable over sites, beside 'q'", "both"),
    ],
)  # fmt: skip
def test_slips_in_the_study(read, changes, message, hint):
    text = text_of()
    assert text.count(changes[0]) == 1
    found = problems(lambda: read(text.replace(*changes)))
    assert any(message in p.message for p in found), [p.message for p in found]
    problem = next(p for p in found if message in p.message)
    assert problem.line is not None
    assert hint is None or hint in (problem.suggestion or "")


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("ridge,1,", "ridge,-1,", "sites.climate.weight names the column 'weight', in which row 3 is -1"),
        ("ridge,1,0.47", "ridge,1,high", "'high'"),
        ("ridge,1,0.47", "coast,1,0.47", "in which 'coast' stands twice"),
        ("0.25,steep", "-0.25,steep", "got -0.25 in class 'ridge'"),
        ("0.25,steep", ",steep", "the cell is empty"),
        ("0.47,", "1e400,", "sites.csv"),
    ],
)
def test_slips_in_the_table(read, old, new, message):
    assert CLASSES.count(old) == 1
    found = problems(lambda: read(table=CLASSES.replace(old, new)))
    assert any(message in str(p) for p in found), [str(p) for p in found]


def test_weights_that_are_all_zero(read):
    table = re.sub(r",[531],", ",0,", CLASSES)
    assert any("every weight is zero" in p.message for p in problems(lambda: read(table=table)))


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("weight = [5, 3, 1]", "weight = [5, 3]", "columns of different lengths: class 3, weight 2"),
        ('"300 Pa"', "300", "has no unit, but others of the column"),
        ('"300 Pa"', '"300 N"', "is a stress or pressure (kg/m/s²), the column is a force"),
        ('"300 Pa"', "true", "must be a text or a number; got true"),
        ('"300 Pa"', '"low"', "must be a number or a number with a unit"),
        ("[5, 3, 1]", "[]", "holds no class of sites"),
    ],
)
def test_slips_in_columns_written_out(read, old, new, message):
    assert INLINE.count(old) == 1
    found = problems(lambda: read(sites=INLINE.replace(old, new)))
    assert any(message in p.message for p in found), [p.message for p in found]


def test_records_and_combination_are_refused(read):
    records = '[records.r]\nfile = "sites.csv"\ncolumn = "q_mean"\nunit = "kPa"\n'
    found = problems(lambda: read(sites=TABLE + records, q=OVER_SITES + 'records = "r"'))
    assert any("takes the model of each class from its site table" in p.message for p in found)
    combined = text_of(q=OVER_SITES).replace("period = 1\n", "")
    combined += "\n[combination]\nq = { repetitions = 50 }\nG = { repetitions = 50 }\n"
    found = problems(lambda: read(combined))
    assert any("a site keeps its class in all repetitions" in p.message for p in found)


def test_a_table_that_no_variable_uses_is_doubted(read):
    study = read(q='mean = "0.4 kPa"\ncov = 0.2')
    assert "unused-sites" in {d.code for d in study.doubts}
    assert calibrate.run(study).site_beta is None


def test_check_lists_the_classes(read):
    from calibrate.study import check_summary

    found = check_summary(read())
    assert found["sites"]["climate"]["classes"] == pytest.approx(
        dict(zip(("inland", "coast", "ridge"), WEIGHTS, strict=True))
    )
    assert found["variables"]["q"]["sites"] == "climate"
