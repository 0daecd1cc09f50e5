"""A whole calibration against the exact partial factors of a lognormal resistance and effect.

Source: closed form, worked for this project. V_R = 0.1, V_E = 0.3, β = 3.8: the required ratio of means is
exp(β s) √((1 + V_R²) / (1 + V_E²)) with s² = ln(1 + V_R²) + ln(1 + V_E²), and the design values are
γ_R = R_5% / R* and γ_E = E* / E_98%.
"""

import numpy as np
import pytest

import calibrate

RATIO_OF_MEANS = 3.12694998
ALPHA_R, ALPHA_E = 0.32173162, -0.94683091
R_STAR, E_STAR = 0.88079605, 2.75420519

STUDY = """
format = 1
[study]
title = "Lognormal resistance and effect"
reference_period = 50
[target]
beta = 3.8
[variables]
R = { family = "lognormal", mean = "z", cov = 0.1 }
E = { family = "lognormal", mean = 1.0, cov = 0.3 }
[rules.only]
design_check = "z >= gamma * 1.0"
sizes = "z"
limit_state = "R >= E"
[factors]
gamma = { present = 2.0, lower = 1.0, upper = 6.0, step = 0.01 }
"""


@pytest.fixture
def result(tmp_path):
    path = tmp_path / "study.toml"
    path.write_text(STUDY)
    return calibrate.run(calibrate.read_study(path))


def test_optimal_factor_is_the_exact_ratio_of_means(result):
    assert result.calibration.optimal.factors["gamma"] == pytest.approx(RATIO_OF_MEANS, rel=1e-7)
    assert result.situations["beta_optimal"][0] == pytest.approx(3.8, abs=1e-8)


def test_proposed_factor_is_the_nearest_step(result):
    assert result.calibration.proposed.factors["gamma"] == 3.13


def test_design_point_and_sensitivity_factors_at_the_step(result):
    row = result.situations.iloc[0]
    # α does not depend on the ratio of means; the design point scales a little with the rounded factor.
    assert row["alpha_R"] == pytest.approx(ALPHA_R, abs=1e-7)
    assert row["alpha_E"] == pytest.approx(ALPHA_E, abs=1e-7)
    s_r = np.sqrt(np.log1p(0.01))
    beta = row["beta_proposed"]
    expected = 3.13 / np.sqrt(1.01) * np.exp(-ALPHA_R * beta * s_r)
    assert row["x_R"] == pytest.approx(expected, rel=1e-7)
    assert expected / 3.13 == pytest.approx(R_STAR, rel=1e-3)
    assert row["x_E"] == pytest.approx(E_STAR, rel=2e-3)
