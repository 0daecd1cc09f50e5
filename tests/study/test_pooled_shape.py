"""A shape pooled over stations, or given, in a study; the annual maxima are drawn for the tests."""

import json
import math

import numpy as np
import pytest
from scipy import optimize, stats

import calibrate
from calibrate.actions.pooling import fit_pooled_shape
from calibrate.errors import InputError
from calibrate.fitting import fit_family
from calibrate.study.export import table_files

NAMES = ("north", "mid", "south")
POOLED = 'pooled_shape = ["north", "mid", "south"]'

HEAD = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Wind on a fence"
reference_period = 50
[target]
beta = 2.0
[records.north]
file = "winds.csv"
column = "north"
unit = "m/s"
[records.mid]
file = "winds.csv"
column = "mid"
unit = "km/h"
[records.south]
file = "short.csv"
column = "south"
unit = "m/s"
"""
TAIL = """
[variables.R]
family = "normal"
mean = "60 m/s"
cov = 0.05
[rules.fence]
limit_state = "R >= v"
[factors]
gamma = 1.0
"""
OTHER = """
[records.weight]
file = "winds.csv"
column = "north"
unit = "kN"
"""


@pytest.fixture(scope="module")
def winds():
    rng = np.random.default_rng(12)
    laws = {"north": (22.0, 2.5, 40), "mid": (80.0, 8.0, 40), "south": (19.0, 3.0, 17)}
    return {
        name: np.round(stats.genextreme(0.08, location, scale).rvs(n, random_state=rng), 1)
        for name, (location, scale, n) in laws.items()
    }


@pytest.fixture
def read(tmp_path, winds):
    def written(variable, tail=TAIL, own="north", family='"gev"', more=""):
        rows = [f"{a},{b}" for a, b in zip(winds["north"], winds["mid"], strict=True)]
        (tmp_path / "winds.csv").write_text("north,mid\n" + "\n".join(rows) + "\n", encoding="utf-8")
        (tmp_path / "short.csv").write_text(
            "south\n" + "\n".join(map(str, winds["south"])) + "\n", encoding="utf-8"
        )
        path = tmp_path / "study.toml"
        text = (
            f'[variables.v]\nrecords = "{own}"\nfamily = {family}\nperiod = 1\nrole = "action"\n{variable}\n'
        )
        path.write_text(HEAD + more + text + tail, encoding="utf-8")
        return calibrate.read_study(path)

    return written


def messages(call):
    with pytest.raises(InputError) as caught:
        call()
    return [p.message for p in caught.value.problems]


def test_the_shape_is_that_of_pooling_by_hand(read, winds):
    result = calibrate.run(read(POOLED))
    by_hand = fit_pooled_shape(winds)
    found = json.loads(table_files(result)["result.json"])["variables"]["v"]
    assert found["pooled_shape"] == {
        "records": list(NAMES),
        "shape": pytest.approx(by_hand.shape, abs=1e-12),
        "standard_error": pytest.approx(by_hand.standard_error, rel=1e-9),
        "interval": pytest.approx(by_hand.interval, abs=1e-9),
        "p_value": pytest.approx(by_hand.p_value, rel=1e-9),
    }
    used = result.fitted["v"].fit
    expected = by_hand.fits["north"]
    assert used.parameters == pytest.approx(expected.parameters, rel=1e-9)
    assert used.standard_errors == pytest.approx(expected.standard_errors, rel=1e-9)
    assert "pooled_shape" not in json.loads(table_files(result)["result.json"])["variables"]["R"]


def test_against_the_joint_likelihood_by_scipy(read, winds):
    """Three locations, three scales and one shape; scipy's c is minus the shape."""

    def cost(p):
        parts = zip(winds.values(), p[:3], p[3:6], strict=True)
        return -sum(stats.genextreme.logpdf(x, -p[6], m, math.exp(s)).sum() for x, m, s in parts)

    start = [np.median(x) for x in winds.values()] + [math.log(np.std(x)) for x in winds.values()] + [0.0]
    best = optimize.minimize(
        cost,
        start,
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-11, "maxiter": 20000, "maxfev": 20000, "adaptive": True},
    )
    found = calibrate.run(read(POOLED)).fitted["v"]
    expected = {"location": best.x[0], "scale": math.exp(best.x[3]), "shape": best.x[6]}
    assert found.fit.parameters == pytest.approx(expected, rel=1e-4)
    assert found.stations.found.log_likelihood == pytest.approx(-best.fun, abs=1e-7)


def test_location_and_scale_by_l_moments(read, winds):
    result = calibrate.run(read(POOLED + '\nmethod = "l_moments"'))
    shape = fit_pooled_shape(winds).shape
    expected = fit_family(winds["north"], "gev", method="l_moments", fixed={"shape": shape})
    found = result.fitted["v"]
    assert found.fit.parameters == pytest.approx(expected.parameters, rel=1e-9)
    assert found.maxima.levels.method == "delta method"


def test_variables_that_name_the_same_stations_are_pooled_once(read, monkeypatch):
    from calibrate.study import pooled

    calls = []

    def counted(samples):
        calls.append(tuple(samples))
        return fit_pooled_shape(samples)

    monkeypatch.setattr(pooled, "fit_pooled_shape", counted)
    second = """
[variables.w]
records = "south"
family = "gev"
period = 1
pooled_shape = ["south", "north", "mid"]
"""
    tail = second + TAIL.replace("R >= v", "R >= max(v, w)")
    result = calibrate.run(read(POOLED, tail))
    assert calls == [NAMES]
    assert result.fitted["v"].fit.parameters["shape"] == result.fitted["w"].fit.parameters["shape"]
    short = [d for d in result.doubts if d.code == "few-blocks"]
    assert [d.where for d in short] == ["variables.w"]
    assert "Only 17 blocks at this station" in short[0].message


def test_doubts_of_pooling_stand_at_the_variable(read, winds):
    winds = dict(winds)
    rng = np.random.default_rng(3)
    law = stats.genextreme(-0.6, 20.0, 2.0)  # a tail as no other station has it
    heavy = np.round(law.rvs(40, random_state=rng), 2)
    study = read(POOLED)
    sample = study.records["mid"]
    file = study.path.parent / "winds.csv"
    rows = [f"{a},{b}" for a, b in zip(winds["north"], heavy, strict=True)]
    file.write_text("north,mid\n" + "\n".join(rows) + "\n", encoding="utf-8")
    result = calibrate.run(calibrate.read_study(study.path))
    assert sample.n == 40
    assert ("stations-differ", "variables.v") in {(d.code, d.where) for d in result.doubts}


def test_the_uncertainty_of_the_shape_is_not_carried_in_silence(read):
    result = calibrate.run(read(POOLED + "\npredictive = true"))
    assert ("pooled-shape-not-carried", "variables.v") in {(d.code, d.where) for d in result.doubts}


def test_the_report_shows_shape_test_and_stations(read, tmp_path):
    from calibrate.report import write_result

    result = calibrate.run(read(POOLED))
    write_result(result, tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "The shape is pooled over the block maxima of north, mid and south" in page
    found = result.fitted["v"].stations.found
    assert f"p = {found.p_value:.2g}" in page
    low, high = (f"{v:.3f}".replace("-", "−") for v in found.interval)
    assert f"interval {low} to {high} by profile likelihood" in page
    assert "Stations whose block maxima share one shape" in page
    own = f"{found.separate['south'].parameters['shape']:.3f}".replace("-", "−")
    assert own in page.split("Stations whose block maxima")[1].split("</table>")[0]
    assert not [d for d in result.doubts if d.code == "unused-records"]
    assert set(result.screenings) == set(NAMES)


@pytest.mark.parametrize("method", ["likelihood", "l_moments"])
def test_a_given_shape_is_kept_and_said_to_be_given(read, winds, tmp_path, method):
    from calibrate.report import write_result

    result = calibrate.run(
        read(f'shape = -0.1\nmethod = "{method}"', TAIL.replace('mean = "60 m/s"', 'mean = "40 m/s"'))
    )
    found = result.fitted["v"]
    expected = fit_family(winds["north"], "gev", method=method, fixed={"shape": -0.1})
    assert found.fit.parameters == pytest.approx(expected.parameters, rel=1e-12)
    assert found.fit.standard_errors["shape"] == 0.0
    write_result(result, tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8").replace("\N{NO-BREAK SPACE}", " ")
    assert "The shape, −0.1, was given and not estimated" in page
    assert "shape = −0.1 (fixed)" in page
    assert "fit to records north, shape = -0.1 given" in page


@pytest.mark.parametrize(
    ("variable", "more", "words"),
    [
        ('pooled_shape = ["north"]', {}, "names 1 station; a shape is pooled over at least two"),
        ('pooled_shape = ["north", "north"]', {}, "names 1 station"),
        ('pooled_shape = ["mid", "south"]', {}, "does not name the variable's own records 'north'"),
        ('pooled_shape = ["north", "suoth"]', {}, "names the records 'suoth', which are not defined"),
        ('pooled_shape = ["north", "weight"]', {"more": OTHER}, "names 'weight', which is "),
        (POOLED, {"family": '"gumbel"'}, "shares the shape of the family 'gev'"),
        (POOLED, {"family": '["gev", "gumbel"]'}, "the variable names 'gev', 'gumbel'"),
        (POOLED + "\nshape = 0.1", {}, "stands beside 'shape'"),
        (POOLED + '\nmethod = "moments"', {}, "the methods 'likelihood' and 'l_moments'; 'moments' is none"),
        ("pooled_shape = 3", {}, "must be a name or an array of names"),
    ],
)
def test_wrong_inputs(read, variable, more, words):
    found = messages(lambda: read(variable, **more))
    assert len(found) == 1
    assert "variables.v.pooled_shape" in found[0]
    assert words in found[0]


def test_an_unknown_station_is_answered_with_the_nearest(read):
    with pytest.raises(InputError) as caught:
        read('pooled_shape = ["north", "suoth"]')
    (problem,) = caught.value.problems
    assert "south" in problem.suggestion
    assert problem.line is not None


def test_without_records_there_is_nothing_to_pool(read):
    tail = TAIL.replace("cov = 0.05", 'cov = 0.05\npooled_shape = ["north", "mid"]')
    assert messages(lambda: read(POOLED, tail)) == [
        "variables.R.pooled_shape says how to fit, but the variable has no records."
    ]


@pytest.mark.parametrize("variable", [POOLED, "shape = -0.1"])
def test_a_characteristic_value_would_have_another_shape(read, variable):
    more = '[quantities]\nv_k = { characteristic_of = "v", fractile = 0.98 }\n'
    (message,) = messages(lambda: read(variable, more=more))
    assert (
        "quantities.v_k.characteristic_of names the variable 'v', whose shape is given or pooled" in message
    )


def test_a_station_that_is_too_short_is_named_with_the_line(read, winds, tmp_path):
    study = read(POOLED)
    (tmp_path / "short.csv").write_text("south\n20.1\n21.4\n19.9\n", encoding="utf-8")
    (message,) = messages(lambda: calibrate.run(calibrate.read_study(study.path)))
    assert message == "[variables.v] Station 'south' has 3 maxima; at least 4 are needed."
