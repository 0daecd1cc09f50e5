"""Systems in studies: what is calibrated, against simulation of the true system and against closed forms."""

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from calibrate.errors import InputError
from calibrate.study import read_study, run
from calibrate.study.export import table_files

# Two strengths of their own and a common effect, all normal: planes are exact.
TEXT = """\
format = 1
study = { title = "Two members", reference_period = 50, seed = 2 }
target = { beta = 3.8 }

[variables]
R1 = { family = "normal", mean = "1.2 * A", sd = 0.2 }
R2 = { family = "normal", mean = "1.3 * A", sd = 0.25 }
E = { family = "normal", mean = "0.7 * chi", sd = "0.14 * chi" }

[situations.axes]
chi = [1.0, 1.2]

[rules.left]
design_check = "A >= gamma * chi"
sizes = "A"
limit_state = "R1 >= E"
weight = 0

[rules.right]
design_check = "A >= gamma * chi"
sizes = "A"
limit_state = "R2 >= E"
weight = 0

[systems.pair]
fails_when = "left LOGIC right"
weight = 1

[factors]
gamma = { present = 1.5, lower = 1.0, upper = 3.0 }
"""


def read(tmp_path, text):
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    return read_study(path)


def exact(gamma, chi, either):
    """Quadrature over the common effect."""
    z, w = np.polynomial.legendre.leggauss(200)
    u, w = 9.0 * z, 9.0 * w * np.exp(-0.5 * (9.0 * z) ** 2) / np.sqrt(2.0 * np.pi)
    e = chi * (0.7 + 0.14 * u)
    p1, p2 = ndtr((e - 1.2 * gamma * chi) / 0.2), ndtr((e - 1.3 * gamma * chi) / 0.25)
    return -ndtri(np.sum(w * (p1 + p2 - p1 * p2 if either else p1 * p2)))


@pytest.mark.parametrize("logic", ["or", "and"])
def test_a_system_is_calibrated(tmp_path, logic):
    """The optimum on the exact indices of both situations, found by scipy."""
    from scipy.optimize import minimize_scalar

    result = run(read(tmp_path, TEXT.replace("LOGIC", logic)))
    found = result.factors["optimal"].iloc[0]

    def objective(gamma):
        return sum((exact(gamma, chi, logic == "or") - 3.8) ** 2 for chi in (1.0, 1.2))

    best = minimize_scalar(objective, bounds=(1.0, 3.0), method="bounded", options={"xatol": 1e-10}).x
    assert found == pytest.approx(best, abs=2e-6)
    rows = result.situations[result.situations["rule"] == "pair"]
    assert list(rows["situation"]) == [1, 2]
    by_quadrature = [exact(found, chi, logic == "or") for chi in (1.0, 1.2)]
    np.testing.assert_allclose(rows["beta_optimal"], by_quadrature, atol=1e-7)
    table = result.systems
    # Two components: Ditlevsen's bounds are the value.
    np.testing.assert_allclose(table["beta_lower"], table["beta"], atol=1e-6)
    np.testing.assert_allclose(table["beta_upper"], table["beta"], atol=1e-6)
    inside = (table["beta_simulated_lower"] <= table["beta"]) & (
        table["beta"] <= table["beta_simulated_upper"]
    )
    assert inside.sum() >= 1
    np.testing.assert_allclose(table["beta_simulated"], table["beta"], atol=0.02)
    assert "systems.csv" in table_files(result)
    assert result.to_dict()["systems"]["pair"]["fails_when"] == f"left {logic} right"
    assert result.to_dict()["beta"]["proposed"]["worst"]["rule"] == "pair"


def test_a_system_without_weight_is_reported_only(tmp_path):
    """The factors are those of the rules alone."""
    text = TEXT.replace("LOGIC", "or").replace("weight = 0", "weight = 1")
    reported = run(read(tmp_path, text.replace("weight = 1\n\n[factors]", "\n[factors]")))
    alone = run(read(tmp_path, text[: text.index("[systems")] + text[text.index("[factors]") :]))
    assert reported.factors["optimal"].iloc[0] == pytest.approx(alone.factors["optimal"].iloc[0], abs=1e-9)
    assert np.isfinite(reported.systems["beta_simulated"]).all()
    assert alone.systems is None
    assert (reported.situations["weight"][reported.situations["rule"] == "pair"] == 0.0).all()


def test_curved_modes_are_doubted_by_simulation(tmp_path):
    """Four branches (Waarts 2000): exact p_f 2.2227951e-3 by quadrature; the planes say 3.16e-3."""
    text = """\
format = 1
study = { title = "Four branches", reference_period = 1, seed = 4 }
target = { beta = 2.8 }
variables.x = { family = "normal", mean = 0.0, sd = 1.0, may_be_negative = true }
variables.y = { family = "normal", mean = 0.0, sd = 1.0, may_be_negative = true }
rules.a = { limit_state = "3 + 0.1 * (x - y)**2 - (x + y) / sqrt(2) >= 0" }
rules.b = { limit_state = "3 + 0.1 * (x - y)**2 + (x + y) / sqrt(2) >= 0" }
rules.c = { limit_state = "x - y + 7 / sqrt(2) >= 0" }
rules.d = { limit_state = "y - x + 7 / sqrt(2) >= 0" }
systems.all = { fails_when = "a or b or c or d" }
factors.gamma = 1.0
verification = { cov = 0.005, samples = 1000000 }
"""
    result = run(read(tmp_path, text))
    row = result.systems.iloc[0]
    assert ndtr(-row["beta_simulated"]) == pytest.approx(2.2227951e-3, rel=0.02)
    assert ndtr(-row["beta"]) == pytest.approx(3.1638e-3, rel=1e-3)
    assert "system-planes" in {d.code for d in result.doubts}


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("left LOGIC right", "left or rigt", "Did you mean 'right'"),
        ("left LOGIC right", "left | right", "column 6"),
        ("left LOGIC right", "left", "names one rule; a system needs at least two"),
        ("left LOGIC right", "left or not right", "not"),
        ("[systems.pair]", "[systems.left]", "stands for a rule and for a system"),
        ("weight = 1\n", "weight = -1\n", "systems.pair.weight"),
        ("weight = 1\n", "wieght = 1\n", "Did you mean 'weight'"),
        ("weight = 1\n", "", "every rule has weight 0"),
    ],
)
def test_wrong_input(tmp_path, old, new, told):
    text = TEXT.replace(old, new).replace("LOGIC", "or")
    with pytest.raises(InputError) as caught:
        read(tmp_path, text)
    assert told in str(caught.value)


def test_combined_actions_cannot_be_in_systems(tmp_path):
    text = (
        TEXT.replace("LOGIC", "or") + "\n[combination]\nE = { repetitions = 5 }\nR1 = { repetitions = 2 }\n"
    )
    with pytest.raises(InputError, match="another action may lead in each rule"):
        read(tmp_path, text)
