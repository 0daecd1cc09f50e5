"""The traps planted in the records of the facade bracket, each found from the file as the laboratory sent it."""

from pathlib import Path

import pytest

from calibrate.records import ReadOptions, UnitBy, read_column, read_value
from calibrate.study.screening import screen_sample
from calibrate.units import ONE, parse_unit

ROOT = Path(__file__).resolve().parents[2]
FILE = ROOT / "datasets" / "facade_bracket" / "component-tests.csv"
KN = parse_unit("kN")
RATIO = "F_test / F_predicted"
UNITS = {"F_test": KN, "F_predicted": KN}
LOT_B = UnitBy("lot", {"B": parse_unit("kgf")})


def findings(sample):
    return {f.code: f for f in screen_sample(sample).findings if f.level == "doubt"}


def names(sample, finding):
    return [sample.labels["specimen"][i] for i in finding.specimens]


def ratio(**options):
    options = ReadOptions(lot="lot", specimen="specimen", units=UNITS, measured="F_test", **options)
    return read_value(FILE, RATIO, name="ratio", unit=ONE, options=options)


def test_the_lot_in_kilogram_force_is_found():
    found = findings(ratio())["unit-slip"]
    assert "kN or kgf" in found.message
    assert len(found.specimens) == 9


def test_the_survivors_of_the_proof_load_are_found():
    sample = read_column(
        FILE, "F_test", unit=KN, options=ReadOptions(lot="lot", specimen="specimen", unit_by=LOT_B)
    )
    found = findings(sample)["ties"]
    assert names(sample, found) == [f"C{i}" for i in range(10, 20)]
    assert "Treat as survivors?" in found.message


@pytest.mark.parametrize(
    "options", [{}, {"unit_by": LOT_B}, {"unit_by": LOT_B, "censoring": True, "censored": "result"}]
)
def test_the_cracked_specimen_is_found(options):
    sample = ratio(**options)
    found = findings(sample)["outlier"]
    assert names(sample, found) == ["D5"]
    assert "removal needs a physical cause" in found.message


def test_scatter_between_lots_is_found():
    import calibrate

    study = calibrate.read_study(ROOT / "studies" / "facade_bracket" / "study.toml")
    sample = study.records["pull_through"]
    assert sample.observations.n == 45
    assert int(sample.observations.right.sum()) == 10
    assert [e.reason for e in sample.excluded] == ["cracked at the sheared edge before the test"]
    from calibrate.study.component_tests import evaluate_resistances

    doubts = {d.code for d in evaluate_resistances(study)["pull_through"].doubts}
    assert {"clusters-matter", "survivors-censored", "one-cluster-sways"} <= doubts
