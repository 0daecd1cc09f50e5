"""Elasticities of a study, against differences of β between studies, and what the tables hold."""

import numpy as np
import pytest

from calibrate.report.elasticities import other_elasticities, variable_elasticities
from calibrate.study import read_study, run
from calibrate.study.export import table_files

TEXT = """\
format = 1
study = { title = "Moments", reference_period = 50 }
target = { beta = 3.8 }

[quantities]
k = 1.1

[variables]
R = { family = "lognormal", mean = MEAN_R, sd = SD_R }
E = { family = "gumbel", mean = MEAN_E, cov = 0.3 }

[situations.axes]
s = [1.0, 1.2]

[rules.member]
limit_state = "3.5 * k * R * gamma**0.5 >= E * s"

[correlations]
"R, E" = RHO

[factors]
gamma = { present = 1.0, lower = 0.2, upper = 3.0 }
"""
BASE = {"MEAN_R": 1.2, "SD_R": 0.15, "MEAN_E": 1.0, "RHO": 0.3}


def result(tmp_path, **changed):
    text = TEXT
    for key, value in {**BASE, **changed}.items():
        text = text.replace(key, repr(value))
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    return run(read_study(path))


def value(frame, kind, name, argument, column="elasticity"):
    found = frame[(frame["kind"] == kind) & (frame["name"] == name) & (frame["argument"] == argument)]
    assert len(found) == 1
    return float(found[column].iloc[0])


def test_elasticities_agree_with_differences_between_studies(tmp_path):
    """With proposed factors held: the same gamma is set as present factor and beta_present is compared."""
    base = result(tmp_path)
    frame = base.elasticities
    gamma = base.factors["proposed"].iloc[0]

    def beta(**changed):
        path = tmp_path / "changed"
        path.mkdir(exist_ok=True)
        text = TEXT.replace("present = 1.0", f"present = {float(gamma)!r}")
        for key, v in {**BASE, **changed}.items():
            text = text.replace(key, repr(v))
        (path / "study.toml").write_text(text, encoding="utf-8")
        return run(read_study(path / "study.toml")).situations["beta_present"].to_numpy()

    h = 1e-3
    for key, kind, name, argument in (
        ("MEAN_R", "moment", "R", "mean"),
        ("SD_R", "moment", "R", "sd"),
        ("RHO", "correlation", "R, E", "product-moment"),
    ):
        at = BASE[key]
        slope = (beta(**{key: at * (1 + h)}) - beta(**{key: at * (1 - h)})) / (2 * h)
        # The mean over both situations, each relative to its own index.
        assert value(frame, kind, name, argument) == pytest.approx(np.mean(slope / beta()), rel=2e-5)
    # g depends on k R sqrt(gamma): twice the elasticity of gamma is that of k.
    by_factor = value(frame, "factor", "gamma", "value")
    assert value(frame, "quantity", "k", "value") == pytest.approx(2.0 * by_factor, rel=1e-9)


def test_shares_of_importance_sum_to_one(tmp_path):
    frame = result(tmp_path).elasticities
    importance = [value(frame, "importance", name, "", "slope") for name in ("R", "E")]
    assert importance[0] > 0 > importance[1]
    assert sum(v * v for v in importance) == pytest.approx(1.0, abs=0.01)  # a mean over two situations


def test_tables_and_file(tmp_path):
    found = result(tmp_path)
    table = variable_elasticities(found)
    assert [c.head for c in table.columns] == ["variable", "of mean", "of sd", "omission", "importance"]
    other = other_elasticities(found)
    assert other.column("kind").values[0] == "factor"
    header = table_files(found)["elasticities.csv"].decode().splitlines()[0]
    assert header == "rule,kind,name,argument,slope,elasticity,elasticity_min,elasticity_max"
