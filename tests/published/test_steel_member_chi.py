"""A whole study against a steel member whose β along χ was computed by two other routes.

Source: self-made for this project, model types as commonly used for EN 1990 background studies. FORM by SLSQP in
standard normal space from several starts and exact probability by two-dimensional Gauss-Legendre quadrature agree
as the columns show. Statistics: R = θ_R f_y; f_y lognormal, mean f_k / (1 − 2·0.08), V 0.08; θ_R lognormal 1, V 0.05;
θ_E lognormal 1, V 0.10; G normal, mean G_k, V 0.10; Q over 50 years Gumbel, mean 0.6 Q_k, V 0.35.
"""

import numpy as np
import pytest

import calibrate

CHI = [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8]
FORM_610 = [3.2412, 3.5562, 3.6924, 3.6504, 3.5509, 3.4442, 3.3444, 3.2548]
FORM_610AB = [3.0326, 3.1452, 3.1367, 3.2306, 3.2504, 3.2323, 3.2018, 3.1683]
ALPHA_AT_03 = {"f_y": 0.430, "theta_R": 0.269, "theta_E": -0.537, "G": -0.329, "Q": -0.589}

STUDY = """
format = 1
[study]
title = "Steel member"
reference_period = 50
[target]
beta = 3.8
[quantities]
f_k = "235 MPa"
P = "100 kN"
[variables]
f_y = {{ family = "lognormal", mean = "f_k / 0.84", cov = 0.08 }}
theta_R = {{ family = "lognormal", mean = 1.0, cov = 0.05 }}
theta_E = {{ family = "lognormal", mean = 1.0, cov = 0.10 }}
G = {{ family = "normal", mean = "G_k", cov = 0.10 }}
Q = {{ family = "gumbel", mean = "0.6 * Q_k", cov = 0.35 }}
[situations.axes]
chi = {{ from = 0.1, to = 0.8, count = 8 }}
[situations.derived]
G_k = "(1 - chi) * P"
Q_k = "chi * P"
[rules.member]
design_check = "A * f_k / gamma_M >= {effect}"
sizes = "A"
size_unit = "mm^2"
limit_state = "theta_R * A * f_y >= theta_E * (G + Q)"
[factors]
gamma_M = 1.0
gamma_G = 1.35
gamma_Q = 1.5
"""

EFFECT_610 = "gamma_G * G_k + gamma_Q * Q_k"
EFFECT_610AB = "max(gamma_G * G_k + 0.7 * gamma_Q * Q_k, 0.85 * gamma_G * G_k + gamma_Q * Q_k)"


def assess(tmp_path, effect):
    path = tmp_path / "study.toml"
    path.write_text(STUDY.format(effect=effect))
    return calibrate.run(calibrate.read_study(path))


@pytest.mark.parametrize(("effect", "printed"), [(EFFECT_610, FORM_610), (EFFECT_610AB, FORM_610AB)])
def test_beta_along_chi(tmp_path, effect, printed):
    result = assess(tmp_path, effect)
    # The table has four decimals; tolerance stated with it: 1e-3.
    np.testing.assert_allclose(result.situations["beta_proposed"], printed, atol=1e-3)
    np.testing.assert_allclose(result.situations["chi"], CHI)
    assert (result.situations["status"] == "converged").all()


def test_sizes_meet_the_check_exactly(tmp_path):
    table = assess(tmp_path, EFFECT_610).situations
    chi = np.array(CHI)
    expected_mm2 = (1.35 * (1 - chi) + 1.5 * chi) * 100e3 / 235.0
    np.testing.assert_allclose(table["size_proposed"], expected_mm2, rtol=1e-13)


def test_sensitivity_factors(tmp_path):
    row = assess(tmp_path, EFFECT_610).situations.iloc[2]
    for name, value in ALPHA_AT_03.items():
        assert row[f"alpha_{name}"] == pytest.approx(value, abs=1.5e-3)
    assert sum(row[f"alpha_{n}"] ** 2 for n in ALPHA_AT_03) == pytest.approx(1.0, abs=1e-12)


def test_optimal_factor_brings_each_situation_to_the_target_when_alone(tmp_path):
    """One situation and one free factor: the optimum reaches the target exactly (closed statement)."""
    text = STUDY.format(effect=EFFECT_610)
    text = text.replace("chi = { from = 0.1, to = 0.8, count = 8 }", "chi = [0.3]")
    text = text.replace("gamma_M = 1.0", "gamma_M = { present = 1.0, lower = 0.8, upper = 2.0 }")
    path = tmp_path / "study.toml"
    path.write_text(text)
    result = calibrate.run(calibrate.read_study(path))
    assert result.situations["beta_optimal"][0] == pytest.approx(3.8, abs=1e-6)
