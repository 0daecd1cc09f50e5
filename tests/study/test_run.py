"""The run of a study: result files as the format promises, reservations, refusals that need the whole chain."""

import json
import math

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtr

import calibrate
from calibrate.study.export import result_dict, table_files

STUDY = """
format = 1
[study]
title = "Two rules"
reference_period = 50
seed = 3
[target]
beta = 3.8
[records.strength]
file = "strength.csv"
column = "f"
unit = "MPa"
[quantities]
f_k = "400 MPa"
P = "100 kN"
[variables.f]
records = "strength"
family = "lognormal"
[variables.theta]
family = "lognormal"
mean = 1.0
cov = 0.08
[variables.G]
family = "normal"
mean = "G_k"
cov = 0.10
unit = "kN"
[variables.Q]
family = "gumbel"
mean = "0.5 * Q_k"
cov = 0.30
period = 1
[situations.axes]
chi = [0.2, 0.5, 0.8]
L = { values = [2, 4], unit = "m" }
[situations.derived]
G_k = "(1 - chi) * P"
Q_k = "chi * P"
[rules.tension]
design_check = "A * f_k / gamma_M >= gamma_G * G_k + gamma_Q * Q_k"
sizes = "A"
size_unit = "mm^2"
limit_state = "theta * A * f >= G + Q"
weight = 3
[rules.bending]
design_check = "W * f_k / gamma_M >= (gamma_G * G_k + gamma_Q * Q_k) * L / 8"
sizes = "W"
size_unit = "cm^3"
limit_state = "theta * W * f >= (G + Q) * L / 8"
[factors]
gamma_M = { present = 1.25, lower = 1.0, upper = 2.0, step = 0.05 }
gamma_Q = { present = 1.50, lower = 1.2, upper = 2.5, step = 0.05 }
gamma_G = 1.35
"""

STRENGTH = [438, 452, 427, 461, 444, 450, 433, 470, 441, 429, 455, 447]


@pytest.fixture
def study_at(tmp_path):
    def write(text=STUDY):
        rows = "\n".join(map(str, STRENGTH))
        (tmp_path / "strength.csv").write_text(f"f\n{rows}\n")
        path = tmp_path / "study.toml"
        path.write_text(text)
        return calibrate.read_study(path)

    return write


@pytest.fixture
def result(study_at):
    return calibrate.run(study_at())


def test_columns_of_the_situations_table(result):
    head = ["rule", "situation", "chi", "L", "weight"]
    sizes = [f"size_{k}" for k in ("present", "optimal", "proposed")]
    betas = [f"beta_{k}" for k in ("present", "optimal", "proposed")]
    names = ["f", "theta", "G", "Q"]
    expected = [
        *head,
        *sizes,
        *betas,
        "pf",
        *(f"alpha_{n}" for n in names),
        *(f"x_{n}" for n in names),
        "status",
    ]
    assert list(result.situations.columns) == expected
    assert set(result.units) == set(expected)


def test_situations_count_from_one_within_each_rule_and_the_last_axis_varies_fastest(result):
    table = result.situations
    assert list(table["rule"]) == ["tension"] * 6 + ["bending"] * 6
    assert list(table["situation"]) == [1, 2, 3, 4, 5, 6] * 2
    assert list(table["chi"][:6]) == [0.2, 0.2, 0.5, 0.5, 0.8, 0.8]
    assert list(table["L"][:6]) == [2, 4, 2, 4, 2, 4]


def test_weights_are_normalised_within_and_over_rules(result):
    by_rule = result.situations.groupby("rule")["weight"].sum()
    assert by_rule["tension"] == pytest.approx(0.75, abs=1e-15)
    assert by_rule["bending"] == pytest.approx(0.25, abs=1e-15)


def test_units_are_those_of_the_user(result):
    assert result.units["L"] == "m"
    assert result.units["size_proposed"] == {"tension": "mm^2", "bending": "cm^3"}
    assert result.units["x_f"] == "MPa"
    assert result.units["x_G"] == "kN"
    assert result.units["chi"] == ""


def test_sizes_meet_the_design_check(result):
    row = result.situations.iloc[3]
    g = result.calibration.present.factors
    effect = (g["gamma_G"] * (1 - row["chi"]) + g["gamma_Q"] * row["chi"]) * 100e3
    assert row["size_present"] == pytest.approx(effect * g["gamma_M"] / 400e6 * 1e6, rel=1e-12)


def test_failure_probability_and_design_point_belong_to_beta(result):
    table = result.situations
    np.testing.assert_allclose(table["pf"], ndtr(-table["beta_proposed"]), rtol=1e-12)
    squares = sum(table[f"alpha_{n}"] ** 2 for n in ("f", "theta", "G", "Q"))
    np.testing.assert_allclose(squares, 1.0, atol=1e-12)
    assert (table[["alpha_f", "alpha_theta"]] > 0).all().all()
    assert (table[["alpha_G", "alpha_Q"]] < 0).all().all()
    tension = table[table["rule"] == "tension"]
    margin = tension["x_theta"] * tension["size_proposed"] * tension["x_f"] - (
        tension["x_G"] * 1e3 + tension["x_Q"]
    )
    np.testing.assert_allclose(margin / 100e3, 0.0, atol=1e-8)


def test_summaries_are_the_weighted_ones_of_the_table(result):
    table, content = result.situations, result.to_dict()
    for kind in ("present", "optimal", "proposed"):
        beta, w = table[f"beta_{kind}"], table["weight"]
        figures = content["beta"][kind]
        mean = float((w * beta).sum())
        assert figures["mean"] == pytest.approx(mean, rel=1e-12)
        assert figures["sd"] == pytest.approx(math.sqrt((w * (beta - mean) ** 2).sum()), rel=1e-9)
        assert figures["rms_from_target"] == pytest.approx(
            math.sqrt((w * (beta - 3.8) ** 2).sum()), rel=1e-10
        )
        assert content["objective"][kind] == pytest.approx((w * (beta - 3.8) ** 2).sum(), rel=1e-10)
        worst = table.iloc[beta.idxmin()]
        assert figures["worst"] == {"rule": worst["rule"], "situation": worst["situation"]}
        assert (figures["min"], figures["max"]) == (beta.min(), beta.max())


def test_proposed_factors_lie_on_their_steps_and_held_ones_stay(result):
    content = result.to_dict()["factors"]
    for name in ("gamma_M", "gamma_Q"):
        steps = content[name]["proposed"] / 0.05
        assert steps == pytest.approx(round(steps), abs=1e-9)
    assert content["gamma_G"] == {"present": 1.35, "optimal": 1.35, "proposed": 1.35, "held": True}


def test_optimal_is_not_worse_than_proposed_nor_proposed_than_present(result):
    objective = result.to_dict()["objective"]
    assert objective["optimal"] <= objective["proposed"] <= objective["present"]


def test_variables_in_the_result(result):
    variables = result.to_dict()["variables"]
    fitted = variables["f"]
    logs = np.log(STRENGTH)
    assert fitted["n"] == 12
    assert fitted["unit"] == "MPa"
    # Maximum likelihood of a lognormal in closed form.
    assert fitted["parameters"]["median"] == pytest.approx(np.exp(logs.mean()), rel=1e-9)
    assert fitted["parameters"]["log_sd"] == pytest.approx(logs.std(), rel=1e-9)
    assert "varies" not in fitted
    assert variables["G"]["varies"] is True
    assert variables["G"]["mean"] == pytest.approx([20.0, 80.0])
    assert variables["theta"]["n"] is None
    # Gumbel maximum of 50 years: the mean moves by sqrt(6)/pi * sd * ln 50, the sd stays (closed form).
    q = variables["Q"]
    assert q["sd"] == pytest.approx([0.3 * 10e3, 0.3 * 40e3], rel=1e-9)
    shift = math.sqrt(6) / math.pi * 0.3 * math.log(50)
    assert q["mean"] == pytest.approx([10e3 * (1 + shift), 40e3 * (1 + shift)], rel=1e-9)


def test_files_are_the_same_twice_but_for_provenance(study_at):
    study = study_at()
    first, second = calibrate.run(study), calibrate.run(study, workers=2)
    one, two = table_files(first), table_files(second)
    for name in ("situations.csv", "factors.csv", "units.json"):
        assert one[name] == two[name]
    a, b = result_dict(first), result_dict(second)
    assert a.pop("provenance")["started"] <= b.pop("provenance")["started"]
    assert a == b


def test_json_and_csv_hold_full_precision(result):
    files = table_files(result)
    content = json.loads(files["result.json"])
    assert content["format"] == "calibrate-result/1"
    assert content["situations"] == 12
    assert content["unconverged"] == 0
    assert content["study"]["file"] == "study.toml"
    assert content["seed"] == 3
    assert set(content["provenance"]) == {"versions", "started", "seconds", "command"}
    import io

    table = pd.read_csv(io.BytesIO(files["situations.csv"]))
    np.testing.assert_array_equal(table["beta_proposed"], result.situations["beta_proposed"])
    assert list(pd.read_csv(io.BytesIO(files["factors.csv"])).columns) == [
        "name", "present", "optimal", "proposed", "held", "lower", "upper", "step",
    ]  # fmt: skip


def test_a_seed_replaces_that_of_the_study(study_at):
    assert calibrate.run(study_at(), seed=11).to_dict()["seed"] == 11


def test_a_situation_that_cannot_be_sized_is_left_out_and_counted(study_at):
    text = STUDY.replace(
        '"A * f_k / gamma_M >= gamma_G', '"A * f_k / gamma_M * where(chi >= 0.7, 0, 1) >= gamma_G'
    )
    result = calibrate.run(study_at(text))
    table, content = result.situations, result.to_dict()
    lost = (table["rule"] == "tension") & (table["chi"] == 0.8)
    assert content["unconverged"] == 2
    assert table.loc[lost, "beta_proposed"].isna().all()
    assert table.loc[lost, "x_f"].isna().all()
    assert table.loc[lost, "status"].eq("not converged: no size meets the design check").all()
    kept = table[~lost]
    weight = kept["weight"] / kept["weight"].sum()
    assert content["beta"]["proposed"]["mean"] == pytest.approx(
        (weight * kept["beta_proposed"]).sum(), rel=1e-10
    )
    assert "" in table_files(result)["situations.csv"].decode().splitlines()[5].split(",")


def test_mass_below_zero_that_matters_is_refused_with_the_line_of_the_variable(study_at):
    text = STUDY.replace(
        '[variables.theta]\nfamily = "lognormal"\nmean = 1.0\ncov = 0.08',
        '[variables.theta]\nfamily = "normal"\nmean = 1.0\ncov = 0.27',
    )
    line = text.splitlines().index("[variables.theta]") + 1
    with pytest.raises(
        calibrate.InputError, match=rf":{line}: Variable 'theta' .* below zero.*lognormal or weibull"
    ):
        calibrate.run(study_at(text))


def test_mass_below_zero_can_be_declared_real(study_at):
    text = STUDY.replace(
        '[variables.theta]\nfamily = "lognormal"\nmean = 1.0\ncov = 0.08',
        '[variables.theta]\nfamily = "normal"\nmean = 1.0\ncov = 0.27\nmay_be_negative = true',
    )
    result = calibrate.run(study_at(text))
    assert "negative-mass" not in {d.code for d in result.doubts}


def test_small_mass_below_zero_is_a_doubt(study_at):
    text = STUDY.replace(
        '[variables.theta]\nfamily = "lognormal"\nmean = 1.0\ncov = 0.08',
        '[variables.theta]\nfamily = "normal"\nmean = 1.0\ncov = 0.22',
    )
    codes = {(d.code, d.where) for d in calibrate.run(study_at(text)).doubts}
    assert ("negative-mass", "variables.theta") in codes


def test_a_converted_period_is_said(study_at):
    doubts = {d.where: d for d in calibrate.run(study_at()).doubts if d.code == "period-converted"}
    assert "F^50" in doubts["variables.Q"].message


def test_a_sample_too_short_for_its_family_is_refused_with_its_line(tmp_path, study_at):
    study_at()
    (tmp_path / "strength.csv").write_text("f\n440\n450\n")
    study = calibrate.read_study(tmp_path / "study.toml")
    line = STUDY.splitlines().index("[variables.f]") + 1
    with pytest.raises(calibrate.InputError, match=rf":{line}: .*variables\.f.*at least 3 values.*has 2"):
        calibrate.run(study)


def test_fewer_situations_than_free_factors_is_refused(study_at):
    text = STUDY.replace("chi = [0.2, 0.5, 0.8]", "chi = [0.5]").replace("values = [2, 4]", "values = [2]")
    text = text.split("[rules.bending]")[0] + "[factors]" + text.split("[factors]")[1]
    with pytest.raises(calibrate.InputError, match=r"2 factors are free .*only 1 design situation"):
        calibrate.run(study_at(text))


def test_a_floor_that_cannot_be_met_is_named(study_at):
    text = STUDY + "\n[objective]\nfloor = 9.0\n"
    result = calibrate.run(study_at(text))
    assert any("floor of 9" in sentence for sentence in result.constraint_failures)
