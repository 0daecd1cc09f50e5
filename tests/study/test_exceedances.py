"""Threshold exceedances in a study: agreement with block maxima of the same record and with scipy, doubts, files.

The record is simulated: storms come as a Poisson process with generalised Pareto peaks above 15 m/s, each followed by
lesser values on the next days. The distribution of the annual maximum is then known exactly.
"""

import json
import math

import numpy as np
import pytest
from scipy import optimize, stats

import calibrate
from calibrate.report import result_files
from calibrate.study import check_summary
from calibrate.study.exceedances import exceedance_model

DAY = 1.0 / 365.25
YEARS, RATE, BASE, SCALE, SHAPE = 60, 10.0, 15.0, 3.0, -0.1
THRESHOLD, RUN = 19.0, 3.0 * DAY

STUDY = """\
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Screen"
reference_period = 50
[target]
beta = 3.0
[records.gusts]
file = "gusts.csv"
column = "v"
unit = "m/s"
time = "t"
[records.yearly]
file = "yearly.csv"
column = "w"
unit = "m/s"
[variables.v]
records = "gusts"
family = "gev"
role = "action"
[variables.v.exceedances]
threshold = "19 m/s"
years = 60
run_length = "3 day"
[variables.w]
records = "yearly"
family = "gev"
role = "action"
period = 1
[variables.R]
family = "lognormal"
mean = "42 m/s"
cov = 0.05
[rules.screen]
limit_state = "R >= v"
[rules.twin]
limit_state = "R >= w"
[factors]
gamma = 1.0
"""


def storms(seed=11):
    rng = np.random.default_rng(seed)
    times = np.sort(rng.uniform(0.0, YEARS, rng.poisson(RATE * YEARS)))
    return times, BASE + stats.genpareto(SHAPE, 0.0, SCALE).rvs(times.size, random_state=rng)


def daily(times, peaks):
    """Every storm with the lesser values of the two days after it; in no order."""
    t = np.concatenate([times, times + DAY, times + 2.0 * DAY])
    return t, np.concatenate([peaks, 0.93 * peaks, 0.86 * peaks])


def write(folder, *changes, record=None, text=STUDY):
    times, peaks = storms()
    t, v = daily(times, peaks) if record is None else record
    rows = "".join(f"{a},{b}\n" for a, b in zip(t, v, strict=True))
    (folder / "gusts.csv").write_text("t,v\n" + rows, encoding="utf-8")
    yearly = [peaks[np.floor(times) == y].max() for y in range(YEARS)]
    (folder / "yearly.csv").write_text("w\n" + "".join(f"{x}\n" for x in yearly), encoding="utf-8")
    for old, new in changes:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return path


def model(folder, *changes, record=None):
    study = calibrate.read_study(write(folder, *changes, record=record))
    return exceedance_model(study, study.variables["v"])


def codes(found):
    return {doubt.code for doubt in found.doubts}


def events_by_hand(t, v, threshold, run):
    """Return the largest value of each run of exceedances, by a plain loop."""
    peaks, last = [], -math.inf
    for when, value in sorted(zip(t, v, strict=True)):
        if value <= threshold:
            continue
        if when - last > run:
            peaks.append(value)
        else:
            peaks[-1] = max(peaks[-1], value)
        last = when
    return np.array(peaks)


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    return calibrate.run(calibrate.read_study(write(tmp_path_factory.mktemp("screen"))))


# Against the truth, block maxima and scipy ------------------------------


def true_level(years):
    """Return the level that the annual maximum exceeds with probability 1/T, from the Poisson process itself."""
    sf = stats.genpareto(SHAPE, BASE, SCALE).sf
    return optimize.brentq(lambda x: math.exp(-RATE * sf(x)) - 1.0 + 1.0 / years, BASE, 44.9)


def test_exceedances_and_block_maxima_of_one_record_agree(result):
    levels = json.loads(result_files(result)["result.json"])["return_levels"]
    assert list(levels) == ["v", "w"]
    for k, years in enumerate(levels["v"]["years"]):
        if not 10.0 <= years <= 200.0:
            continue
        v, w = ({key: levels[name][key][k] for key in ("level", "lower", "upper")} for name in "vw")
        assert w["lower"] < v["level"] < w["upper"]
        assert v["lower"] < w["level"] < v["upper"]
        for found in (v, w):
            assert found["lower"] < true_level(years) < found["upper"]


def test_the_distribution_is_the_closed_form_with_scipys_fit(result):
    t, v = daily(*storms())
    peaks = events_by_hand(t, v, THRESHOLD, RUN)
    # scipy's shape of genpareto has our sign, that of genextreme the other one.
    shape, _, scale = stats.genpareto.fit(peaks - THRESHOLD, floc=0.0)
    rate = peaks.size / YEARS
    found = result.exceedances["v"]
    assert (found.n, found.fit.rate) == (peaks.size, rate)
    assert (found.fit.shape, found.fit.scale) == (
        pytest.approx(shape, abs=1e-3),
        pytest.approx(scale, rel=1e-3),
    )
    location = THRESHOLD + scale * (rate**shape - 1.0) / shape
    annual = stats.genextreme(-shape, location, scale * rate**shape)
    x = np.linspace(THRESHOLD, 34.0, 9)
    np.testing.assert_allclose(found.distribution.cdf(x), annual.cdf(x), atol=2e-3)
    # As used: the maximum of the 50 years of the reference period.
    used = result.variables["v"].parameters
    fifty = stats.genextreme(-used["shape"][0], used["location"][0], used["scale"][0])
    x = np.linspace(28.0, 38.0, 9)
    np.testing.assert_allclose(fifty.logcdf(x), 50.0 * found.distribution.logcdf(x), rtol=1e-9)


def test_exponential_excesses_give_gumbel(tmp_path):
    t, v = daily(*storms())
    excess = events_by_hand(t, v, THRESHOLD, RUN) - THRESHOLD
    found = model(tmp_path, ('"gusts"\nfamily = "gev"', '"gusts"\nfamily = "gumbel"'))
    rate, scale = excess.size / YEARS, excess.mean()
    assert found.family == "gumbel"
    assert found.fit.standard_errors["scale"] == pytest.approx(scale / math.sqrt(excess.size))
    annual = stats.gumbel_r(THRESHOLD + scale * math.log(rate), scale)
    x = np.linspace(19.0, 40.0, 9)
    np.testing.assert_allclose(found.distribution.cdf(x), annual.cdf(x), rtol=1e-9)
    # The likelihood of the scale alone: 2 n (ln s + 1/s - 1) with s over its estimate; the level is linear in s.
    ratio = [
        optimize.brentq(
            lambda s: 2.0 * excess.size * (math.log(s) + 1.0 / s - 1.0) - stats.chi2(1).ppf(0.95), *bracket
        )
        for bracket in ((0.3, 1.0), (1.0, 3.0))
    ]
    k = found.levels.years.tolist().index(100.0)
    level = annual.isf(0.01)
    assert found.levels.levels[k] == pytest.approx(level, rel=1e-9)
    ends = [THRESHOLD + s * (level - THRESHOLD) for s in ratio]
    assert [found.levels.lower[k], found.levels.upper[k]] == pytest.approx(ends, rel=1e-6)


def test_another_period_is_the_maximum_of_that_many_years(tmp_path):
    one = model(tmp_path)
    ten = model(
        tmp_path,
        ('family = "gev"\nrole = "action"\n[var', 'family = "gev"\nrole = "action"\nperiod = 10\n[var'),
    )
    x = np.linspace(24.0, 36.0, 7)
    np.testing.assert_allclose(ten.distribution.logcdf(x), 10.0 * one.distribution.logcdf(x), rtol=1e-9)


def test_threshold_of_another_unit_and_times_as_days_or_dates(tmp_path):
    times, peaks = storms()
    t, v = daily(times, peaks)
    years = model(tmp_path)
    days = model(
        tmp_path,
        ('time = "t"', 'time = "t"\ntime_unit = "day"'),
        ('"19 m/s"', '"68.4 km/h"'),
        ('"3 day"', '"72 h"'),
        record=((t / DAY).tolist(), v),
    )
    start = np.datetime64("1950-01-01T00:00:00")
    moments = start + np.round(t / DAY * 86400).astype("timedelta64[s]")
    dates = model(tmp_path, record=(moments, v))
    for other in (days, dates):
        np.testing.assert_allclose(np.sort(other.events.peaks), np.sort(years.events.peaks), rtol=1e-12)
        assert other.fit.shape == pytest.approx(years.fit.shape, abs=1e-9)
        assert other.events.span == pytest.approx(years.events.span, abs=1e-6)


def test_diagnostics_take_events_of_each_threshold(tmp_path):
    found = model(tmp_path)
    t, v = daily(*storms())
    life, stable = found.mean_residual_life, found.stability
    assert THRESHOLD in life.thresholds
    assert life.thresholds[0] < 17.0
    for k in (0, 10, -1):
        peaks = events_by_hand(t, v, life.thresholds[k], RUN)
        assert life.count[k] == stable.count[k] == peaks.size
        assert life.mean[k] == pytest.approx(np.mean(peaks - life.thresholds[k]))
    at = int(np.flatnonzero(stable.thresholds == THRESHOLD)[0])
    assert stable.shape[at] == pytest.approx(found.fit.shape, abs=1e-9)


def test_yearly_counts_and_their_dispersion(tmp_path):
    found = model(tmp_path)
    t, v = daily(*storms())
    over = np.sort(t[v > THRESHOLD])
    begins = over[np.concatenate(([True], np.diff(over) > RUN))] - t.min()
    # A storm begins with its peak here, so that events and their first exceedances fall on one time.
    counts = np.histogram(begins, bins=np.arange(YEARS + 1.0))[0]
    counts = counts[: math.floor(found.events.span + 0.05)]
    assert found.dispersion[0] == pytest.approx(counts.var(ddof=1) / counts.mean(), rel=0.05)
    assert not {"not-poisson", "record-length"} & codes(found)


# Doubts ------------------------------

ALONE = ('\nrun_length = "3 day"', "")
GUMBEL = ('"gusts"\nfamily = "gev"', '"gusts"\nfamily = "gumbel"')
UNTIMED = ('time = "t"\n', "")


@pytest.mark.parametrize(
    ("changes", "code", "piece"),
    [
        ([("years = 60", "years = 40")], "record-length", "19.8 years are taken as gaps"),
        ([("years = 60", "years = 80")], "record-length", "begin and end without any value"),
        ([ALONE], "clustered-exceedances", "State a run_length"),
        ([ALONE], "not-poisson", "scatter more"),
        ([ALONE, UNTIMED], "times-not-known", "could not be looked at"),
        ([('"19 m/s"', '"26 m/s"'), GUMBEL], "few-excesses", "exceedances, fewer than 20"),
        (
            [('"19 m/s"', '"24 m/s"'), ("reference_period = 50", "reference_period = 1")],
            "seldom-exceeded",
            "of 1 year stays",
        ),
        (
            [('"19 m/s"', '"16 m/s"'), ('"gusts"\nfamily = "gev"', '"gusts"\nfamily = "gumbel"')],
            "shape-not-zero",
            "gev",
        ),
        ([('"19 m/s"', '"23 m/s"')], "shape-sign", "finite upper end as well as heavy tails"),
    ],
    ids=lambda value: value if isinstance(value, str) and "-" in value else None,
)
def test_doubts_by_name(tmp_path, changes, code, piece):
    found = model(tmp_path, *changes)
    (doubt,) = [d for d in found.doubts if d.code == code]
    assert piece in doubt.message
    assert doubt.where == "variables.v"


def test_nothing_is_doubted_of_a_good_record(tmp_path):
    """Only what any record of sixty years leaves open."""
    assert codes(model(tmp_path)) <= {"shape-sign"}


def test_a_record_that_begins_above_the_threshold_is_doubted(tmp_path):
    times, peaks = storms()
    higher = peaks > 21.0
    found = model(tmp_path, record=(times[higher].tolist(), peaks[higher]))
    assert "threshold-below-record" in codes(found)
    just_below = model(tmp_path, ('"19 m/s"', '"21 m/s"'), record=(times[higher].tolist(), peaks[higher]))
    assert "threshold-below-record" not in codes(just_below)


def test_times_that_are_years_only_are_doubted(tmp_path):
    times, peaks = storms()
    found = model(tmp_path, record=(np.floor(times).tolist(), peaks))
    assert "coarse-times" in codes(found)


def test_seasonal_events_are_not_taken_for_clusters(tmp_path):
    rng = np.random.default_rng(4)
    times = np.sort(rng.integers(0, YEARS, 200) + rng.uniform(0.0, 0.25, 200))
    peaks = 19.0 + rng.exponential(2.0, 200)
    assert "clustered-exceedances" not in codes(model(tmp_path, ALONE, record=(times.tolist(), peaks)))


def test_a_lower_period_of_the_study_decides_what_is_seldom(tmp_path):
    higher = ('"19 m/s"', '"24 m/s"')
    assert "seldom-exceeded" not in codes(model(tmp_path, higher))
    asked = ("reference_period = 50", "reference_period = 50\nother_periods = [1]")
    assert "seldom-exceeded" in codes(model(tmp_path, higher, asked))


def test_a_design_point_far_beyond_the_record_is_doubted(result):
    (doubt,) = [d for d in result.doubts if (d.code, d.where) == ("extrapolation", "variables.v")]
    assert "the record is 60 years long" in doubt.message
    years = float(doubt.message.split("about once in ")[1].split()[0])
    point = result.situations.loc[0, "x_v"]
    annual = result.exceedances["v"].maximum.distribution
    assert years == pytest.approx(-1.0 / float(annual.logcdf(point)), rel=0.05)


# Ways out ------------------------------


def test_result_file(result):
    found = json.loads(result_files(result)["result.json"])["variables"]["v"]
    events = result.exceedances["v"]
    assert (found["family"], found["n"], found["period"]) == ("gev", events.n, 1.0)
    part = found["exceedances"]
    assert (part["threshold"], part["events"], part["years"]) == (19.0, events.n, 60.0)
    assert part["rate"] == pytest.approx(events.n / 60.0)
    assert part["extremal_index"] == pytest.approx(events.n / part["exceedances"])
    assert part["upper_end"] == pytest.approx(19.0 - part["scale"] / part["shape"])


def test_report(result):
    files = result_files(result)
    page = files["report.html"].decode("utf-8")
    assert {"figures/threshold_v.svg", "figures/return_levels_v.svg"} <= set(files)
    assert "figures/probability_v.svg" not in files
    part = page[page.index('id="fits"') : page.index('id="rules"')]
    events = result.exceedances["v"]
    for piece in (
        "Maximum of 1 year from exceedances of a threshold in records gusts",
        f"which leaves {events.n} events (extremal index 0.",
        "those at most 3 days apart",
        "Variance over mean of the yearly numbers of events",
        "Excesses over the threshold",
        "upper end",
        "Choice of the threshold: mean excess",
        "ordered events (marks)",
    ):
        assert piece in part
    assert "generalised Pareto distribution" in page
    assert f"own records, {events.n} events above the threshold" in page


def test_check_counts_and_fits_nothing(tmp_path, monkeypatch):
    def refuse(*_, **__):
        raise AssertionError

    monkeypatch.setattr("calibrate.actions.thresholds.excesses._top", refuse)
    summary = check_summary(calibrate.read_study(write(tmp_path)))
    found = summary["variables"]["v"]
    t, v = daily(*storms())
    peaks = events_by_hand(t, v, THRESHOLD, RUN)
    assert found["period"] == 1.0
    assert found["exceedances"] == {
        "threshold": 19.0,
        "unit": "m/s",
        "years": 60.0,
        "run_length_years": pytest.approx(RUN),
        "exceedances": int(np.sum(v > THRESHOLD)),
        "events": peaks.size,
    }
    assert summary["variables"]["w"]["exceedances"] is None


def test_the_maximum_of_a_year_is_combined_with_another_action(tmp_path):
    """Fifty years of v beside five pulses of s: the alternative led by v is FORM with its maximum of 50 years."""
    combination = (
        "[combination]\nv = {}\ns = { repetitions = 5 }\n"
        '[variables.s]\nfamily = "gumbel"\nmean = "2 m/s"\ncov = 0.3\n[rules.screen]'
    )
    path = write(tmp_path, ("[rules.screen]", combination), ("R >= v", "R >= v + s"))
    result = calibrate.run(calibrate.read_study(path))
    row = result.combinations.iloc[0]
    once = calibrate.form(
        "R - v - s",
        {
            "R": calibrate.distribution("lognormal", mean=42.0, cov=0.05),
            "v": calibrate.distribution(
                "gev", **{k: float(v[0]) for k, v in result.variables["v"].parameters.items()}
            ),
            "s": calibrate.distribution("gumbel", mean=2.0, cov=0.3),
        },
    )
    assert result.variables["v"].parameters_period == 50
    assert row["beta_v"] == pytest.approx(float(once.beta), abs=1e-6)
    assert row["beta_fbc"] <= row["beta_series_upper"] + 1e-9
