"""The library of actions: every piece runs in a study, and no number stands without its source."""

import tomllib

import numpy as np
import pytest

import calibrate
from calibrate.distributions import distribution
from calibrate.study.snippets import snippets

PIECES = {s.name: s for s in snippets()}

# Mean of the other side of the limit state.
OTHER = {
    "permanent": "180 kN",
    "permanent_favourable": "60 kN",
    "imposed_sustained": "250 kN",
    "imposed_intermittent": "150 kN",
    "ground_snow": "5 kPa",
    "wind": "25 kN",
    "thermal": "120 kN",
}
STUDY = """
format = 1
[study]
title = "A piece"
reference_period = 50
[target]
beta = 3.8
[quantities]
{quantities}
[factors]
gamma = 1.0
[variables.other]
family = "lognormal"
mean = "{other}"
cov = 0.05
{pieces}
{combination}
[rules.rule]
limit_state = "{limit_state}"
"""


def entry(piece, key):
    start = f"# {key}: "
    return next(line.removeprefix(start) for line in piece.text.splitlines() if line.startswith(start))


def run(tmp_path, pieces, other, limit_state, combination=""):
    quantities = dict(part.split(" = ") for p in pieces for part in p.needs.split(", "))
    text = STUDY.format(
        quantities="\n".join(f"{k} = {v}" for k, v in quantities.items()),
        other=other,
        pieces="\n".join(p.text for p in pieces),
        combination=combination,
        limit_state=limit_state,
    )
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    return calibrate.run(calibrate.read_study(path))


@pytest.mark.parametrize("name", PIECES)
def test_every_piece_runs_as_it_stands(tmp_path, name):
    piece = PIECES[name]
    effect, _, side = piece.use.partition(" on the side of the ")
    limit_state = f"other >= {effect}" if side == "effects" else f"{effect} >= other"
    result = run(tmp_path, [piece], OTHER[name], limit_state)
    row = result.situations.iloc[0]
    assert row["status"] == "converged"
    assert 0.0 < row["beta_proposed"] < 10.0
    for variable in tomllib.loads(piece.text)["variables"]:
        expected = -1.0 if side == "effects" else 1.0
        assert np.sign(row[f"alpha_{variable}"]) == expected


@pytest.mark.parametrize("name", PIECES)
def test_no_number_stands_without_its_source(name):
    for variable in tomllib.loads(PIECES[name].text)["variables"].values():
        assert "common practice, no source" in variable["source"] or "from memory" in variable["source"]
        assert variable["grade"] in ("published data", "judgement")
        assert variable["description"]


def test_sustained_and_intermittent_loads_combine(tmp_path):
    pieces = [PIECES["imposed_sustained"], PIECES["imposed_intermittent"]]
    combination = "[combination]\n" + "\n".join(entry(p, "combination") for p in pieces)
    result = run(tmp_path, pieces, "400 kN", "other >= (q_sus + q_int) * A_inf", combination)
    row = result.combinations.iloc[0]
    assert row["beta_fbc"] <= min(row["beta_q_sus"], row["beta_q_int"]) + 1e-6


def test_means_follow_from_the_characteristic_values():
    """1 + 2.592 V is the 98 % value of a Gumbel variable over its mean: (ln(-ln 0.98) and Euler's constant)."""
    factor = -np.sqrt(6.0) / np.pi * (np.log(-np.log(0.98)) + np.euler_gamma)
    assert factor == pytest.approx(2.592, abs=5e-4)
    thermal = distribution("gev", mean=1.0, cov=0.10, shape=-0.15)
    assert float(thermal.ppf(0.98)) == pytest.approx(1.23, abs=5e-3)
    assert "dT_k / 1.23" in PIECES["thermal"].text
