"""Block maxima in a study: return levels with intervals, and what is doubted about the record.

Source of the numbers: annual maximum sea levels at Port Pirie, S. Coles, An Introduction to Statistical Modeling of
Extreme Values, Springer 2001, section 3.4.1: 10-year level 4.30 m, 100-year level 4.69 m; profile-likelihood intervals
(4.21, 4.45) and (4.50, 5.27). Recalled from memory; levels recomputed as 4.29621 and 4.68840.
"""

import json

import pytest

import calibrate
from calibrate.errors import InputError
from calibrate.study.export import table_files

SEA = """
4.03 3.83 3.65 3.88 4.01 4.08 4.18 3.80 4.36 3.96 3.98 4.69 3.85 3.96 3.85 3.93 3.75 3.63 3.57 4.25
3.97 4.05 4.24 4.22 3.73 4.37 4.06 3.71 3.96 4.06 4.55 3.79 3.89 4.11 3.85 3.86 3.86 4.21 4.01 4.11
4.24 3.96 4.21 3.74 3.85 3.88 3.66 4.11 3.71 4.18 3.90 3.78 3.91 3.72 4.00 3.66 3.62 4.33 4.55 3.75
4.08 3.90 3.88 3.94 4.33
"""

STUDY = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Sea wall"
reference_period = 50
[target]
beta = 2.0
[records.sea]
file = "sea.csv"
column = "level"
unit = "m"
{records}
[variables.S]
records = "sea"
family = "{family}"
period = 1
role = "action"
[variables.R]
family = "normal"
mean = "6 m"
cov = 0.05
[rules.wall]
limit_state = "R >= S"
[factors]
gamma = 1.0
"""


@pytest.fixture
def study(tmp_path):
    def write(family="gev", records="", values=SEA):
        (tmp_path / "sea.csv").write_text("level\n" + "\n".join(values.split()) + "\n", encoding="utf-8")
        path = tmp_path / "study.toml"
        path.write_text(STUDY.format(family=family, records=records), encoding="utf-8")
        return calibrate.read_study(path)

    return write


def test_return_levels_and_their_intervals_are_those_published(study):
    result = calibrate.run(study())
    found = json.loads(table_files(result)["result.json"])["return_levels"]["S"]
    assert (found["unit"], found["method"], found["confidence"]) == ("m", "profile likelihood", 0.95)
    rows = {
        t: (level, low, high)
        for t, level, low, high in zip(
            found["years"], found["level"], found["lower"], found["upper"], strict=True
        )
    }
    assert rows[10.0] == (
        pytest.approx(4.29621, abs=1e-4),
        pytest.approx(4.21, abs=0.01),
        pytest.approx(4.45, abs=0.01),
    )
    assert rows[100.0] == (
        pytest.approx(4.68840, abs=1e-4),
        pytest.approx(4.50, abs=0.01),
        pytest.approx(5.27, abs=0.01),
    )
    assert "S" in {n for n, f in result.fitted.items() if f.maxima is not None}
    # The published interval of the shape, (-0.21, 0.17), holds both kinds of tail.
    assert "shape-sign" in {d.code for d in result.doubts} or any(
        "finite upper end" in d.message for d in result.doubts
    )


def test_missing_and_few_blocks_are_doubted(study):
    result = calibrate.run(study("gumbel", "blocks = 70"))
    assert any("5 of 70 blocks" in d.message for d in result.doubts)
    few = calibrate.run(study("gumbel", values=" ".join(SEA.split()[:15])))
    assert any("15" in d.message and "blocks" in d.message for d in few.doubts)
    with pytest.raises(InputError, match="60"):
        calibrate.run(study("gumbel", "blocks = 60"))


def test_the_report_shows_the_levels(study, tmp_path):
    from calibrate.report import write_result

    write_result(calibrate.run(study("gumbel")), tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "Return levels with 95 % intervals, in m" in page
    assert (tmp_path / "out" / "figures" / "return_levels_S.svg").exists()


def covered(tmp_path, shares, records='coverage = "part"', period="period = 1"):
    values = SEA.split()
    rows = "".join(f"{v},{p}\n" for v, p in zip(values, shares, strict=True))
    (tmp_path / "sea.csv").write_text("level,part\n" + rows, encoding="utf-8")
    path = tmp_path / "study.toml"
    text = STUDY.format(family="gumbel", records=records).replace("period = 1\nrole", f"{period}\nrole")
    path.write_text(text, encoding="utf-8")
    return calibrate.read_study(path)


def test_blocks_that_were_observed_too_little_are_left_out_and_told(study, tmp_path):
    """Five years at half of their length and ten at 0.9 of it: 60 of 65 count, as if those five were not there."""
    shares = [0.5] * 5 + [0.9] * 10 + [1.0] * 50
    result = calibrate.run(covered(tmp_path, shares))
    without = calibrate.run(study("gumbel", values=" ".join(SEA.split()[5:])))
    assert result.fitted["S"].fit.parameters == without.fitted["S"].fit.parameters
    found = {d.code: d.message for d in result.doubts}
    assert "5 of 65 blocks (7.69 %) have no maximum" in found["missing-blocks"]
    assert "10 blocks were observed in part (90 % on average)" in found["incomplete-blocks"]


def test_coverage_needs_the_length_of_a_block(tmp_path):
    with pytest.raises(InputError, match=r"observed part of blocks, but variables\.S has no period"):
        covered(tmp_path, [1.0] * 65, period="")


def test_values_below_a_detection_limit_are_bounds(study):
    plain, limited = study("gumbel"), study("gumbel", 'detection_limit = "3.7 m"')
    below = sum(float(v) < 3.7 for v in SEA.split())
    assert plain.records["sea"].observations.complete
    assert limited.records["sea"].observations.n_exact == len(SEA.split()) - below
