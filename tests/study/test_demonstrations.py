"""The studies that come with the project run as they stand and even out the reliability."""

from pathlib import Path

import pytest

import calibrate

STUDIES = sorted((Path(__file__).resolve().parents[2] / "studies").glob("*/study.toml"))


@pytest.mark.parametrize("path", STUDIES, ids=[p.parent.name for p in STUDIES])
def test_a_demonstration_runs_and_evens_beta(path):
    study = calibrate.read_study(path)
    assert "invented" in study.summary
    result = calibrate.run(study)
    assert result.unconverged == 0
    assert result.constraint_failures == ()
    sets = result.calibration
    assert sets.proposed.rms_from_target < sets.present.rms_from_target
    assert sets.proposed.sd < sets.present.sd
