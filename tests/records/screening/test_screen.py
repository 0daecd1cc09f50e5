"""The whole screening: planted slips are told in words, ordinary samples stay in peace, nothing is removed."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from calibrate.errors import Doubt, InputError
from calibrate.records.observations import Observations
from calibrate.records.screening import Screening, screen

INF = np.inf
KGF = 1000.0 / 9.80665


def brackets(seed=0):
    """Four lots of nine in two thicknesses, in kN, with ten specimens of lot c stopped at 11.0 kN."""
    rng = np.random.default_rng(seed)
    thickness = np.repeat([1.5, 2.0, 1.5, 2.0], 9)
    lot = np.repeat(rng.normal(0.0, 0.08, 4), 9)
    x = 14.0 * (thickness / 1.5) ** 1.3 * np.exp(lot + rng.normal(0.0, 0.10, 36))
    return np.append(x, [11.0] * 10).round(2), [*np.repeat(["a", "b", "c", "d"], 9).tolist(), *["c"] * 10]


def by_code(found: Screening, code):
    return [f for f in found.findings if f.code == code]


def one(found: Screening, code):
    (finding,) = by_code(found, code)
    return finding


def test_three_planted_slips_at_once():
    x, lots = brackets()
    x[30] = 0.5 * x[27:36].mean()
    b = np.array(lots) == "b"
    x[b] = (x[b] * KGF).round()
    found = screen(x, lots=lots, unit="kN")

    slip = one(found, "unit-slip")
    assert slip.specimens == tuple(np.flatnonzero(b))
    assert "The median of lot 'b'" in slip.message
    assert "kN or kgf: 102" in slip.message
    assert slip.level == "doubt"

    ties = one(found, "ties")
    assert ties.specimens == tuple(range(36, 46))
    assert ties.message.startswith(
        "10 results share 11 kN (proof load?). Treat as survivors? The mean would rise by "
    )
    rest = x[~b]
    censored = stats.norm.fit(stats.CensoredData(rest[rest != 11.0], right=[11.0] * 10))
    assert found.repeats.ties[0].mean_if_survivors == pytest.approx(censored[0], rel=1e-4)
    rise = 100.0 * (censored[0] / rest.mean() - 1.0)
    assert float(ties.message.split("rise by ")[1].split(" %")[0]) == pytest.approx(rise, abs=0.5)

    (outlier,) = [f for f in by_code(found, "outlier") if f.level == "doubt"]
    assert outlier.specimens == (30,)
    assert "within its lot" in outlier.message
    assert outlier.message.startswith("Specimen 31 (")
    assert outlier.message.endswith("removal needs a physical cause.")

    assert (found.n, found.moments.n) == (46, 46)  # nothing has been removed
    assert [d.code for d in found.doubts("variables.R")] == [
        f.code for f in found.findings if f.level == "doubt"
    ]
    assert found.doubts("variables.R")[0] == Doubt("unit-slip", slip.message, "variables.R")


def test_one_low_specimen_in_21():
    x = np.append(stats.norm(10.0, 1.0).ppf((np.arange(20) + 0.5) / 20), 4.2)
    found = screen(x, names=[f"A{i}" for i in range(21)])
    outlier = one(found, "outlier")
    assert outlier.level == "doubt"
    rest = x[:20]
    cut = 100.0 * (1.0 - np.exp(_log_fractile(x) - _log_fractile(rest)))
    assert outlier.message == (
        f"Specimen A20 (4.2) raises V from {stats.variation(rest, ddof=1):.3f} to {stats.variation(x, ddof=1):.3f} "
        f"and cuts the lognormal 5 % fractile by {cut:.0f} %. Suspected as an outlier. "
        "Show results with and without; removal needs a physical cause."
    )
    assert found.influences[0].specimen == 20


def _log_fractile(x):
    return np.log(x).mean() + stats.norm.ppf(0.05) * np.log(x).std(ddof=1)


def test_a_whole_sample_in_another_unit():
    x = np.random.default_rng(1).normal(15.0, 1.5, 12) * KGF
    found = screen(x, declared_range=(10.0, 25.0), nominal=13.0, resistance=True, unit="kN")
    slip = one(found, "unit-slip")
    assert "times the middle of the declared range (15.81 kN)" in slip.message
    assert slip.specimens == ()
    assert not by_code(found, "outside-range")
    assert not by_code(found, "nominal-above-mean")


def test_what_was_declared():
    x = [14.0, 15.5, 13.0, 16.0, 31.0]
    found = screen(x, declared_range=(10.0, 25.0), nominal=18.5, resistance=True, unit="kN")
    assert one(found, "outside-range").specimens == (4,)
    assert one(found, "outside-range").message == "Specimen 5 lies outside the declared range."
    nominal = one(found, "nominal-above-mean")
    assert nominal.message == (
        "The nominal value 18.5 kN exceeds the sample mean 17.9 kN. Is it a mean or a target strength?"
    )
    assert not by_code(screen(x, nominal=18.5), "nominal-above-mean")
    assert not by_code(screen(x, nominal=17.5, resistance=True), "nominal-above-mean")


def test_trend_runs_modes_and_tail_are_told():
    rng = np.random.default_rng(3)
    x = np.sort(98.0 * rng.weibull(6.2, 60))
    x[:9] *= 0.4
    found = screen(x, order=np.arange(60), modes=["plate", "bolt", None] * 20, unit="MPa")
    assert "rise in the order of testing" in one(found, "trend").message
    assert "come in clusters" in one(found, "runs").message
    assert "plate 20, bolt 20, not stated 20" in one(found, "failure-modes").message
    assert one(found, "mode-not-stated").specimens == tuple(range(2, 60, 3))
    assert "A second population" in one(found, "two-branches").message
    assert [m.name for m in found.modes] == ["plate", "bolt", "not stated"]


def test_bounds_are_counted_and_shown_with_and_without():
    x = np.array([14.0, 15.0, 16.0, 20.0, 20.0, 3.0, 15.5])
    sample = Observations(
        np.where(x == 3.0, -INF, np.where(x == 15.5, 15.0, x)),
        np.where(x == 20.0, INF, np.where(x == 15.5, 16.0, x)),
    )
    found = screen(sample)
    assert (found.n, found.n_exact, found.n_right, found.n_left, found.n_interval) == (7, 3, 2, 1, 1)
    censored = one(found, "censored")
    assert censored.specimens == (3, 4, 5)
    assert "2 right and 1 left-censored" in censored.message
    assert "The mean is 15 without them" in censored.message
    assert found.tail is None


def test_no_scatter_and_coarse_rounding():
    assert one(screen([3.0, 3.0, 3.0]), "no-scatter").level == "doubt"
    coarse = one(screen([10.0, 20.0, 30.0, 30.0]), "coarse-rounding")
    assert coarse.message.startswith(
        "All values are multiples of 10; rounding makes up about 9.1 % of the variance."
    )


@pytest.mark.parametrize(
    ("law", "limit"),
    [
        (stats.lognorm(0.12, 0.0, 20.0), 0.05),
        (stats.norm(20.0, 3.0), 0.05),
        (stats.weibull_min(8.0, 0.0, 20.0), 0.10),  # the outlier test bears them, but less well
        (stats.gumbel_r(20.0, 3.0), 0.10),
    ],
)
def test_each_check_alarms_rarely_in_ordinary_samples(law, limit):
    rng = np.random.default_rng(9)
    repeats = 120
    counts = dict.fromkeys(["ties", "unit-slip", "outlier", "trend", "two-branches"], 0)
    for _ in range(repeats):
        x = law.rvs(40, random_state=rng).round(2)
        found = screen(x, order=rng.permutation(40), declared_range=(5.0, 60.0), nominal=18.0)
        for code in {d.code for d in found.doubts("x")}:
            counts[code] += 1
    for code, count in counts.items():
        level = limit if code == "outlier" else 0.05
        assert count <= stats.binom.ppf(0.999, repeats, level), code


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5, 8, 11, 12, 13, 1001, 20_000])
def test_any_size(n):
    rng = np.random.default_rng(n)
    found = screen(
        np.exp(rng.normal(3.0, 0.12, n)).round(2),
        lots=[f"{i // 9}" for i in range(n)],
        order=rng.permutation(n),
        modes=list(rng.choice(["a", "b"], n)),
        declared_range=(10.0, 40.0),
        nominal=20.0,
    )
    assert found.n == found.n_exact == found.moments.n == n
    assert (found.trend is None) == (n < 4)
    assert (found.tail is None) == (n < 12)
    assert len(found.influences) >= (n >= 3)
    assert not by_code(found, "ties")
    assert not by_code(found, "unit-slip")


@settings(max_examples=15)
@given(st.integers(0, 200), st.sampled_from([1e-3, 1e3]), st.randoms(use_true_random=False))
def test_scale_and_order_do_not_matter(seed, factor, random):
    x, lots = brackets(seed)
    order = list(range(46))
    random.shuffle(order)
    a = screen(x, lots=lots)
    b = screen(np.round(x[order] * factor, 9), lots=[lots[i] for i in order])
    names = sorted((f.code, f.level, f.specimens) for f in a.findings)
    assert names == sorted(
        (f.code, f.level, tuple(sorted(order[i] for i in f.specimens))) for f in b.findings
    )


def test_the_same_twice():
    x, lots = brackets(4)
    assert screen(x, lots=lots).findings == screen(x, lots=lots).findings


@pytest.mark.parametrize(
    ("values", "options", "message"),
    [
        ([], {}, "no values to screen"),
        ([1.0, np.nan], {}, "finite numbers"),
        ([[1.0, 2.0]], {}, "list of finite numbers"),
        ([1.0, 2.0], {"lots": ["a"]}, "2 specimens but 1 lots"),
        ([1.0, 2.0], {"order": [1, 2, 3]}, "2 specimens but 3 orders"),
        ([1.0, 2.0], {"modes": []}, "2 specimens but 0 modes"),
        ([1.0, 2.0], {"names": ["a"]}, "2 specimens but 1 names"),
        ([1.0, 2.0], {"declared_range": (3.0, 2.0)}, "from 3 to 2 is in the wrong order"),
    ],
)
def test_what_cannot_be_screened(values, options, message):
    with pytest.raises(InputError, match=message):
        screen(values, **options)
