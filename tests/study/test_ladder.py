"""The ladder: what it expects is right by further routes, it passes, and it notices what is wrong."""

import dataclasses
import importlib
import json
import math
import subprocess
import sys

import numpy as np
import pytest
from scipy import integrate, stats

from calibrate.report.ladder_table import complaint, ladder_table
from calibrate.study.ladder import CHECKS, Check, Figures, ladder_content, run_ladder
from calibrate.study.ladder.evidence import FAILURES
from calibrate.study.ladder.quadrature import bisected, normal_mean


@pytest.fixture(scope="module")
def rows():
    return {row.name: row for row in run_ladder()}


def test_every_check_passes(rows):
    assert [name for name, row in rows.items() if not row.passed] == []


def test_every_check_says_what_it_is(rows):
    assert len(rows) == len(CHECKS)
    for row in rows.values():
        assert row.what.endswith(".")
        assert row.source
        assert row.reason
        assert row.error == ""
        assert row.tolerance > 0.0
        assert row.difference == pytest.approx(abs(row.computed - row.expected) / _unit(row), rel=1e-12)


def _unit(row):
    # The half interval is not in the row: the difference is what remains to compare.
    if row.measure == "half intervals":
        return abs(row.computed - row.expected) / row.difference
    return abs(row.expected) if row.measure == "relative" else 1.0


def test_the_same_figures_each_time(rows):
    assert {row.name: row for row in run_ladder()} == rows


# What each check expects, from elsewhere: worked by hand, printed, or by scipy's distributions and adaptive quadrature.
def lognormal_gumbel():
    scale = 0.3 * math.sqrt(6.0) / math.pi
    load = stats.gumbel_r(1.0 - np.euler_gamma * scale, scale)
    s = math.sqrt(math.log1p(0.01))
    resistance = stats.lognorm(s, scale=3.0 / math.sqrt(1.01))
    found = integrate.quad(
        lambda r: load.sf(r) * resistance.pdf(r), 0.5, 6.0, epsabs=1e-16, epsrel=1e-10, limit=200
    )
    return -stats.norm.ppf(found[0])


def paraboloid():
    # Of the sum of the curved parts only one is left to integrate when the other is taken inside.
    def outer(w):
        inner = integrate.quad(
            lambda v: stats.norm.pdf(v) * stats.norm.sf(3.0 + 0.15 * v * v - 0.05 * w * w),
            -9,
            9,
            epsrel=1e-10,
        )
        return stats.norm.pdf(w) * inner[0]

    return -stats.norm.ppf(integrate.quad(outer, -9, 9, epsrel=1e-9)[0])


def series_of_two():
    # P(any) = 1 - P(both margins positive), by the bivariate normal distribution.
    cov = np.array([[35.0**2 + 1600.0, 1600.0], [1600.0, 30.0**2 + 1600.0]])
    return 1.0 - stats.multivariate_normal([0.0, 0.0], cov).cdf([150.0, 160.0])


EXPECTED = {
    "linear margin, normal": (2.822163, 5e-7),
    # ln(3 sqrt(1.09/1.01))/sqrt(ln 1.01 + ln 1.09)
    "lognormal R and S": (3.666323378, 1e-9),
    "design value of a load": (
        lambda: stats.lognorm(math.sqrt(math.log(1.09)), scale=1.09**-0.5).ppf(
            stats.norm.cdf(3.666323378 * math.sqrt(math.log(1.09) / (math.log(1.09) + math.log(1.01))))
        ),
        1e-7,
    ),
    "lognormal R, Gumbel S": (lognormal_gumbel, 1e-8),
    "correlated normal variables": (150.0 / math.sqrt(1425.0), 1e-12),
    "Nataf coefficient, lognormal pair": (math.log(1.05) / math.sqrt(math.log(1.04) * math.log(1.25)), 1e-12),
    "short column, correlated": (2.46602, 5e-6),
    "quadratic limit state": (paraboloid, 1e-8),
    "lognormal R, Gumbel S, second order": (lognormal_gumbel, 1e-8),
    "two design points": (0.002699796063, 1e-12),
    "series system of two members": (series_of_two, 1e-7),
    "importance sampling": (paraboloid, 1e-8),
    "reference period": (3.82631, 5e-6),
    "maximum of 50 years, Gumbel": (1.0 + 0.3 * 0.7796968 * 3.9120230, 1e-6),
    "size effect, weakest link": (
        lambda: stats.weibull_min(12.0, scale=50.0 * 20.0 ** (-1.0 / 12.0)).mean(),
        1e-9,
    ),
    "censored Weibull fit, scale": (606.52756, 5e-6),
    "censored Weibull fit, shape": (1.720797, 5e-7),
    "tolerance factor k": (lambda: stats.nct(9, 1.6448536269514722 * 10**0.5).ppf(0.75) / 10**0.5, 1e-8),
    "calibration of one factor": (3.12694998, 5e-9),
}


@pytest.mark.parametrize("name", [check.name for check in CHECKS])
def test_the_expected_figure_by_a_further_route(rows, name):
    value, tolerance = EXPECTED[name]
    assert rows[name].expected == pytest.approx(value() if callable(value) else value, rel=0, abs=tolerance)


def test_form_alone_would_not_pass_for_what_goes_beyond_it(rows):
    # FORM says 3 for the paraboloid: eight half intervals, and far more than the tolerance of second order.
    row = rows["importance sampling"]
    half = abs(row.computed - row.expected) / row.difference
    assert abs(3.0 - row.expected) / half > 4 * row.tolerance
    assert abs(3.0 - rows["quadratic limit state"].expected) > 1e6 * rows["quadratic limit state"].tolerance
    curved, plane = rows["lognormal R, Gumbel S, second order"], rows["lognormal R, Gumbel S"]
    assert abs(plane.computed - curved.expected) > 10 * curved.tolerance


# Slips of one part in a thousand, or a step left out, in the function behind each check.
def larger(attribute):
    def wrong(real):
        def slip(*arguments, **options):
            found = real(*arguments, **options)
            return dataclasses.replace(found, **{attribute: 1.001 * getattr(found, attribute)})

        return slip

    return wrong


def first_larger(real):
    def slip(*arguments, **options):
        first, *others = real(*arguments, **options)
        return 1.001 * first, *others

    return slip


def all_larger(real):
    return lambda *arguments, **options: 1.001 * real(*arguments, **options)


def more_repetitions(real):
    return lambda self, p, ratio: real(self, p, 1.001 * ratio)


def more_scatter(real):
    return lambda self, m: real(self, m._replace(sd=1.001 * m.sd, cov=1.001 * m.cov))


def nearest_only(real):
    return lambda problem, found, **options: real(problem, found, most=1)


def no_samples(real):
    def plane(problem, method, *, reliability, **options):
        found = real(problem, method, reliability=reliability, **options)
        return dataclasses.replace(found, beta=reliability.beta)

    return plane


SLIPS = {
    "calibrate.reliability.public:form": (
        larger("beta"),
        {
            "linear margin, normal",
            "lognormal R and S",
            "correlated normal variables",
            "short column, correlated",
        },
    ),
    "calibrate.distributions.families.lognormal:Lognormal.from_moments": (
        more_scatter,
        {"lognormal R and S", "design value of a load", "calibration of one factor"},
    ),
    "calibrate.distributions.families.gumbel:Gumbel.from_moments": (
        more_scatter,
        {"lognormal R, Gumbel S", "lognormal R, Gumbel S, second order", "maximum of 50 years, Gumbel"},
    ),
    "calibrate.reliability.dependence.nataf:_solved": (
        first_larger,
        {"Nataf coefficient, lognormal pair", "short column, correlated"},
    ),
    "calibrate.reliability.second_order.sorm:paraboloid": (
        all_larger,
        {"quadratic limit state", "lognormal R, Gumbel S, second order"},
    ),
    "calibrate.study.ladder.beyond_form:further_points": (nearest_only, {"two design points"}),
    "calibrate.study.ladder.beyond_form:simulate": (no_samples, {"importance sampling"}),
    "calibrate.reliability.systems.planes:dot": (all_larger, {"series system of two members"}),
    "calibrate.actions.periods:log_hazard": (all_larger, {"reference period"}),
    "calibrate.distributions.families.gumbel:Gumbel.maximum_parameters": (
        more_repetitions,
        {"maximum of 50 years, Gumbel"},
    ),
    "calibrate.distributions.families.weibull:Weibull.minimum_parameters": (
        more_repetitions,
        {"size effect, weakest link"},
    ),
    # What did not fail is left out, as if it had never been tested.
    "calibrate.study.ladder.evidence:fit_family": (
        lambda real: lambda seen, family: real(list(FAILURES), family),
        {"censored Weibull fit, scale", "censored Weibull fit, shape"},
    ),
    "calibrate.fitting.characteristic.factors:_distance": (all_larger, {"tolerance factor k"}),
}


def slip(monkeypatch, place):
    module, path = place.split(":")
    *owners, name = path.split(".")
    owner = importlib.import_module(module)
    for part in owners:
        owner = getattr(owner, part)
    monkeypatch.setattr(owner, name, SLIPS[place][0](getattr(owner, name)))


def test_every_check_is_seen_to_fail():
    assert set.union(*(names for _, names in SLIPS.values())) == {check.name for check in CHECKS}


@pytest.mark.parametrize("place", SLIPS)
def test_a_slip_is_noticed(monkeypatch, place):
    slip(monkeypatch, place)
    wrong = {check.name: check.row() for check in CHECKS if check.name in SLIPS[place][1]}
    assert {name for name, row in wrong.items() if not row.passed} == SLIPS[place][1]
    assert not any(row.error for row in wrong.values())
    assert all(row.difference > row.tolerance for row in wrong.values())


def made(figures, measure="absolute", tolerance=0.5):
    return Check("name", "What.", "source", figures, measure, tolerance, "reason").row()


@pytest.mark.parametrize(
    ("figures", "measure", "difference", "passed"),
    [
        (Figures(4.0, 4.5), "absolute", 0.5, True),
        (Figures(4.0, 3.4), "absolute", 0.6, False),
        (Figures(-4.0, -5.0), "relative", 0.25, True),
        (Figures(4.0, 5.0, 4.0), "half intervals", 0.25, True),
        (Figures(4.0, 5.0, 1.0), "half intervals", 1.0, False),
        (Figures(4.0, math.nan), "absolute", math.nan, False),
        (Figures(0.0, 0.0), "relative", math.nan, False),
        (Figures(4.0, 4.0, 0.0), "half intervals", math.nan, False),
        (Figures(4.0, math.inf), "relative", math.inf, False),
    ],
)
def test_measures(figures, measure, difference, passed):
    row = made(lambda: figures, measure)
    assert row.difference == pytest.approx(difference, nan_ok=True)
    assert row.passed is passed


def broken():
    raise ZeroDivisionError("no such number")


def test_an_error_is_a_check_that_failed():
    row = made(broken)
    assert (row.passed, row.error) == (False, "ZeroDivisionError: no such number")
    assert complaint(row) == "name: not computed; ZeroDivisionError: no such number"
    content = ladder_content([row])
    assert content["cases"][0]["computed"] is None
    json.dumps(content, allow_nan=False)


def test_content(rows):
    content = ladder_content(list(rows.values()))
    assert (content["format"], content["passed"]) == ("calibrate-selfcheck/1", True)
    assert set(content["cases"][0]) == {f.name for f in dataclasses.fields(next(iter(rows.values())))}
    assert ladder_content([*rows.values(), made(broken)])["passed"] is False


def test_table(rows):
    table = ladder_table([*rows.values(), made(lambda: Figures(2.0, 3.0))])
    heads = ["check", "expected", "computed", "difference", "tolerance", "passed", "source"]
    assert [c.head for c in table.columns] == heads
    assert table.strong == {len(rows)}
    shown = table.plain_rows()
    source = rows["linear margin, normal"].source
    assert shown[0] == (
        "linear margin, normal", "2.822163", "2.822163", shown[0][3], "1·10⁻¹² absolute", "yes", source,
    )  # fmt: skip
    assert shown[-1] == ("name", "2", "3", "1", "0.5 absolute", "NO", "source")


def test_plain_quadrature():
    # The mean of cosh is the root of e; a grid of step 0.1 sums it to rounding.
    assert normal_mean(np.cosh) == pytest.approx(math.exp(0.5), rel=1e-14)
    assert bisected(lambda x: x**3 - 2.0, 0.0, 2.0) == pytest.approx(2.0 ** (1.0 / 3.0), rel=1e-15)


def test_no_heavy_library_is_needed():
    program = (
        "import sys; from calibrate.study.ladder import run_ladder; from calibrate.report.ladder_table import "
        "ladder_table; ladder_table(run_ladder()).rows(); print(*sorted(sys.modules))"
    )
    ended = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    loaded = set(ended.stdout.split())
    assert "calibrate.study.ladder" in loaded
    assert loaded.isdisjoint({"scipy.stats", "pandas", "statsmodels", "matplotlib", "pint"})
