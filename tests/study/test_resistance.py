"""``[resistance.NAME]`` in a study: what is read and refused, and what the evaluation says."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from scipy import stats

import calibrate
from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.resistance import (
    FractileFactor,
    Fractiles,
    annex_d8,
    annex_d8_tail,
    cluster_effects,
    layer,
    mean_value_factors,
    north_american_factor,
    plain_design_value,
    predictive_design_value,
    professional_part,
    separate_scatter,
    two_layers,
)
from calibrate.study.component_tests import evaluate, evaluate_resistances
from calibrate.study.fits import fit_variables

STUDY = """
format = 1
[study]
title = "Anchors"
reference_period = 50
seed = 7
[target]
beta = 3.0
[resistance.anchors]
file = "tests.csv"
measured = "R"
unit = "kN"
prediction = "0.25 * pi * D**2 * f"
units = {{ D = "mm", f = "MPa" }}
survived = "end"
cluster = "site"
{tests}
[variables.theta]
resistance = "anchors"
family = "lognormal"
{theta}
[variables.E]
family = "normal"
mean = "10 kN"
cov = 0.2
[quantities]
Q = "10 kN"
{quantities}
[situations.axes]
D = {{ values = [10, 20], unit = "mm" }}
{axes}
[rules.pull]
design_check = "R_n / gamma >= Q"
sizes = "R_n"
size_unit = "kN"
limit_state = "theta * R_n >= E"
{more}
[factors]
gamma = {{ present = 1.5, lower = 0.5, upper = 9.0 }}
"""


def invented_rows(n=40, survivors=0, slope=0.0, site_sd=0.0, seed=11):
    """Self-made tests: D in mm, f in MPa, capacity in kN with a lognormal error of log-sd 0.15."""
    rng = np.random.default_rng(seed)
    diameter, strength = rng.uniform(8.0, 24.0, n), rng.uniform(300.0, 500.0, n)
    site = np.arange(n) % 8
    log = 0.05 + 0.15 * rng.normal(size=n) + slope * np.log(diameter / 14.0)
    log += site_sd * np.random.default_rng(3).normal(size=8)[site]
    capacity = 0.25 * np.pi * diameter**2 * strength / 1e3 * np.exp(log)
    ends = np.where(np.arange(n) < survivors, "stopped", "failed")
    capacity = np.where(ends == "stopped", 0.9 * capacity, capacity)
    return [
        {"D": f"{d:.3f}", "f": f"{f:.2f}", "R": f"{r:.6g}", "end": e, "site": f"S{s}", "kind": "ab"[i % 2]}
        for i, (d, f, r, e, s) in enumerate(zip(diameter, strength, capacity, ends, site, strict=True))
    ]


@pytest.fixture
def study(tmp_path):
    """Write a study and its tests; ``change`` replaces parts of the study's text."""

    def write(rows=None, change=(), **parts):
        rows = invented_rows() if rows is None else rows
        lines = [",".join(rows[0]), *(",".join(r.values()) for r in rows)]
        (tmp_path / "tests.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
        given = {"tests": "", "theta": "", "quantities": "", "axes": "", "more": "", **parts}
        text = STUDY.format(**given)
        for old, new in change:
            assert text.count(old) == 1
            text = text.replace(old, new)
        (tmp_path / "study.toml").write_text(text, encoding="utf-8")
        return calibrate.read_study(tmp_path / "study.toml")

    return write


def edited(rows, at, **cells):
    """Return the rows with some cells of one replaced; ``at`` counts from 0."""
    return [{**r, **cells} if i == at else r for i, r in enumerate(rows)]


def ratios(rows):
    """Return measured over predicted by hand, and which did not fail."""
    number = {k: np.array([float(r[k]) for r in rows]) for k in ("D", "f", "R")}
    ratio = number["R"] * 1e3 / (0.25 * np.pi * number["D"] ** 2 * number["f"])
    return ratio, np.array([r["end"] == "stopped" for r in rows])


def problem_of(call, words):
    with pytest.raises(InputError) as caught:
        call()
    (found,) = [p for p in caught.value.problems if words in p.message]
    return found


# What is refused


@pytest.mark.parametrize("value", ["0", "-3.5"])
def test_a_capacity_that_is_not_positive_is_told_with_its_row(study, value):
    rows = edited(invented_rows(), 4, R=value)
    found = problem_of(lambda: study(rows), f"the measured capacity is {float(value):g} kN")
    assert (found.file, found.line) == ("tests.csv", 6)
    assert "exclude the row" in found.suggestion
    assert "resistance.anchors in line 9" in found.suggestion


def test_a_prediction_that_is_not_positive_is_told_with_its_row(study):
    found = problem_of(lambda: study(edited(invented_rows(), 0, f="-400")), "it must be above zero")
    assert found.message.startswith("The prediction '0.25 * pi * D**2 * f' is -")
    assert (found.file, found.line) == ("tests.csv", 2)


def test_many_wrong_rows_are_counted(study):
    rows = [{**r, "R": "0"} for r in invented_rows()]
    with pytest.raises(InputError) as caught:
        study(rows)
    assert len(caught.value.problems) == 6
    assert caught.value.problems[-1].message == "35 more rows have the same problem."


def test_a_prediction_that_misses_an_input_names_the_nearest_column(study):
    change = [("* D**2 * f", "* D**2 * fs"), ('f = "MPa"', 'fs = "MPa"')]
    found = problem_of(lambda: study(change=change), "There is no column 'fs'")
    assert (found.file, found.line) == ("tests.csv", 1)
    assert "Did you mean 'f'?" in found.suggestion


def test_a_prediction_of_another_dimension_tells_both(study):
    found = problem_of(lambda: study(change=[("* D**2 * f", "* D * f")]), "but the measured capacity 'R'")
    assert "in kN is a force" in found.message
    assert found.line == 13
    bare = problem_of(lambda: study(change=[(', f = "MPa"', "")]), "but the measured capacity 'R'")
    assert "is an area (m²)" in bare.message
    assert "No unit is stated for f." in bare.suggestion


@pytest.mark.parametrize(
    ("change", "words", "line"),
    [
        (("* D**2 * f", "* D**2 * f + R"), "uses 'R', the measured capacity itself", 13),
        (("* D**2 * f", "* D**2 * ("), "prediction", 13),
        (('f = "MPa"', 'f = "MPa", g = "mm"'), "states a unit for the column 'g'", 14),
        (
            ('survived = "end"', 'survived = "end"\nnominal = ["f"]'),
            "uses 'f', a column of nominal values",
            13,
        ),
        (('measured = "R"', 'measured = "R"\nknown_scatter = { m = -0.1 }'), "known_scatter.m", 12),
        (('measured = "R"', 'measured = "R"\ncovs = { f = -0.1 }'), "covs.f", 12),
        (('resistance = "anchors"', 'resistance = "anchor"'), "Did you mean", None),
        (('resistance = "anchors"', 'resistance = "anchors"\nrecords = "x"'), "name one", None),
    ],
)
def test_slips_of_the_section_are_told_with_their_line(study, change, words, line):
    with pytest.raises(InputError) as caught:
        study(change=[change])
    (found,) = [p for p in caught.value.problems if words in str(p)]
    assert found.line is not None
    assert line in (None, found.line)


def test_too_few_tests_are_refused(study):
    found = problem_of(
        lambda: study(invented_rows(3)), "There are 3 tests; a resistance model needs at least 4."
    )
    assert found.file is not None


def test_an_empty_subgroup_and_an_empty_covariate_are_told_with_their_row(study):
    rows = edited(invented_rows(), 2, kind="")
    found = problem_of(lambda: study(rows, tests='subgroup = "kind"'), "Column 'kind': the cell is empty")
    assert (found.file, found.line) == ("tests.csv", 4)
    rows = edited([{**r, "age": "28"} for r in invented_rows()], 2, age="")
    found = problem_of(lambda: study(rows, tests='inputs = ["age"]'), "Column 'age': ")
    assert (found.file, found.line) == ("tests.csv", 4)


def test_odd_entries_of_the_flags_are_told_with_what_is_allowed(study):
    found = problem_of(lambda: study(edited(invented_rows(), 2, end="perhaps")), "'perhaps'")
    assert (found.file, found.line) == ("tests.csv", 4)
    assert "'survived'" in found.suggestion
    found = problem_of(
        lambda: study(edited(invented_rows(), 2, end="left")), "the capacity is known to lie below"
    )
    assert found.line == 4


def test_one_name_for_records_and_tests_is_refused(study):
    more = '[records.anchors]\nfile = "tests.csv"\ncolumn = "R"\nunit = "kN"'
    found = problem_of(lambda: study(more=more), "has the name of records.anchors")
    assert found.line == 9


def test_an_unknown_north_american_form_names_those_that_there_are(study):
    part = "{ mean = 1.0, cov = 0.05 }"
    tests = f'north_american = {{ format = "LRFD member", material = {part}, fabrication = {part} }}'
    found = problem_of(lambda: study(tests=tests), "'LRFD member'")
    assert "Did you mean 'LRFD members'?" in found.suggestion
    assert found.line == 17


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ([('family = "lognormal"', 'family = "weibull"')], "variables.theta.family is 'weibull'"),
        ([('family = "lognormal"', 'family = "lognormal"\npredictive = true')], "variables.theta.predictive"),
    ],
)
def test_known_scatter_needs_a_plain_lognormal_model_factor(study, change, words):
    found = problem_of(lambda: study(tests="known_scatter = { measurement = 0.05 }", change=change), words)
    assert "known_scatter (measurement)" in found.message
    assert found.line is not None


def test_subgroups_are_no_failure_modes(study):
    made = study(tests='subgroup = "kind"')
    assert set(made.resistances["anchors"].tests.subgroups) == {"a", "b"}
    assert set(made.records["anchors"].labels) == {"lot"}


# What the evaluation says


def test_the_model_factor_is_the_lognormal_fit_of_the_ratios_with_survivors(study):
    rows = invented_rows(survivors=9)
    made = study(rows)
    ratio, stopped = ratios(rows)
    found = fit_variables(made)["theta"].distribution
    witness = stats.CensoredData(uncensored=ratio[~stopped], right=ratio[stopped])
    shape, _, scale = stats.lognorm.fit(witness, floc=0.0)
    assert float(found.parameters["median"]) == pytest.approx(scale, rel=1e-4)
    assert float(found.parameters["log_sd"]) == pytest.approx(shape, rel=1e-3)
    logs = np.log(ratio)

    def log_likelihood(median, log_sd):
        z = (logs - np.log(median)) / log_sd
        return np.sum(stats.norm.logpdf(z[~stopped]) - np.log(log_sd)) + np.sum(stats.norm.logsf(z[stopped]))

    ours = log_likelihood(float(found.parameters["median"]), float(found.parameters["log_sd"]))
    assert ours >= log_likelihood(scale, shape) - 1e-8


def test_known_scatter_is_taken_out_in_closed_form(study):
    rows = invented_rows()
    made = study(rows, tests="known_scatter = { measurement = 0.05, coupons = 0.04 }")
    found = evaluate_resistances(made)["anchors"]
    predicted, measured = (getattr(found.records.tests, k) for k in ("predicted", "experimental"))
    b = (measured @ predicted) / (predicted @ predicted)
    observed = np.log(measured / (b * predicted)).var(ddof=1)
    own = observed - np.log1p(0.05**2) - np.log1p(0.04**2)
    assert found.separation.log_variance == pytest.approx(own, rel=1e-10)
    theta = fit_variables(made)["theta"].distribution
    assert float(theta.parameters["log_sd"]) == pytest.approx(np.sqrt(own), rel=1e-10)


def test_known_scatter_larger_than_the_whole_is_doubted_in_the_result(study):
    made = study(tests="known_scatter = { material = 0.30 }")
    result = calibrate.run(made)
    (doubt,) = [d for d in result.doubts if d.code == "negative-model-scatter"]
    assert doubt.where == "resistance.anchors"
    plain = fit_variables(study())["theta"].distribution
    # No model factor without scatter is made up: it stays as the tests gave it.
    assert result.variables["theta"].parameters["log_sd"][0] == float(plain.parameters["log_sd"])


PART = "{ mean = 1.05, cov = 0.06 }"
MORE_ROUTES = (
    f'north_american = {{ format = "LRFD members", material = {PART}, fabrication = {PART} }}\n'
    "mean_value = { target = 2.5, loads = { dead_factor = 1.25, live_factor = 1.75, dead_to_live = [0.5, 2.0], "
    "dead_bias = 1.05, live_bias = 1.15, dead_cov = 0.1, live_cov = 0.2 } }\n"
    "covs = { D = 0.02, f = 0.06 }\nnominal_ratio = 0.9\nfactors = 'table'"
)


def test_the_routes_are_those_of_direct_calls(study):
    made = study(tests=MORE_ROUTES, change=[("beta = 3.0", "beta = 3.8")])
    found = evaluate_resistances(made)["anchors"]
    tests = found.records.tests
    fractiles = Fractiles(target_beta=3.8, alpha_r=0.8, fractile=0.05, source="table")
    # D enters the prediction squared, f as a factor.
    gradient = {"D": 2 * 0.02, "f": 0.06}
    assert dict(found.records.gradient) == pytest.approx(gradient, rel=1e-12)
    annex = annex_d8(tests, {"D": 0.02, "f": 0.06}, gradient=gradient, nominal=0.9, fractiles=fractiles)
    direct = predictive_design_value(tests.ratio, fractiles=fractiles)
    plain = plain_design_value(tests.ratio, fractiles=fractiles)
    k, d = FractileFactor.predictive(0.05), FractileFactor.predictive(stats.norm.sf(0.8 * 3.8))
    clusters = cluster_effects(
        tests.ratio, tests.cluster, characteristic=k, design=d, other_log_sd=annex.q_rt
    )
    question = found.records.north_american
    american = north_american_factor(
        professional_part(tests.ratio),
        tests.n,
        material=question.material,
        fabrication=question.fabrication,
        design_format=question.format,
        coefficients="printed",
    )
    bias = mean_value_factors(tests.ratio.mean(), annex.v_r, 2.5, found.records.mean_value.loads)
    expected = [
        annex.gamma_m,
        plain.gamma_m,
        direct.gamma_m,
        clusters.partial_factor,
        american.phi,
        bias.lognormal.min(),
        bias.form.phi.min(),
    ]
    assert [r.factor for r in found.routes] == pytest.approx(expected, rel=1e-12)
    assert found.annex.gamma_m_star == pytest.approx(0.9 / annex.r_d, rel=1e-12)


def test_null_data_raise_no_trend_and_no_cluster(study):
    found = evaluate_resistances(study(invented_rows(n=64)))["anchors"]
    assert found.options == ()
    assert {"trend", "clusters-matter", "beyond-tests"}.isdisjoint(d.code for d in found.doubts)


def test_planted_trend_and_sites_are_found(study):
    found = evaluate_resistances(study(invented_rows(n=64, slope=-0.4)))["anchors"]
    assert "D" in found.trends.with_trend
    j = found.trends.names.index("D")
    ratio, _ = ratios(invented_rows(n=64, slope=-0.4))
    line = stats.linregress(np.log(found.records.tests.inputs["D"]), np.log(ratio))
    assert found.trends.slope[j] == pytest.approx(line.slope, rel=1e-9)
    assert line.slope == pytest.approx(-0.4, abs=4 * line.stderr)
    assert "trend" in {d.code for d in found.doubts}
    found = evaluate_resistances(study(invented_rows(n=64, site_sd=0.25)))["anchors"]
    assert "clusters-matter" in {d.code for d in found.doubts}


def test_an_input_that_is_not_positive_may_have_a_trend(study):
    rows = invented_rows(n=64, slope=-0.8)
    rows = [{**r, "offset": f"{float(r['D']) - 14.0:.3f}"} for r in rows]
    found = evaluate_resistances(study(rows, tests='inputs = ["offset", "D"]'))["anchors"]
    assert set(found.trends.with_trend) == {"offset", "prediction", "D"}
    assert {o.covariate for o in found.options} == {"prediction", "D"}


def test_what_cannot_be_evaluated_is_told_with_the_section(study):
    rows = [{**r, "end": "stopped" if i > 2 else "failed"} for i, r in enumerate(invented_rows(8))]
    found = problem_of(lambda: evaluate_resistances(study(rows)), "[resistance.anchors]")
    assert found.line == 9


def test_the_target_of_the_evaluation_is_that_asked_for(study):
    records = study().resistances["anchors"]
    low, high = (evaluate(records, beta, 1).annex for beta in (2.0, 4.0))
    assert high.r_d < low.r_d
    assert high.r_k == low.r_k


def test_the_separation_depends_on_the_seed_alone(study):
    made = study(tests="known_scatter = { measurement = 0.05 }")
    found = evaluate_resistances(made)["anchors"].separation
    again = separate_scatter(
        evaluate_resistances(made)["anchors"].annex.v_delta,
        39,
        {"measurement": 0.05},
        stream(7, "resistance", "anchors"),
    )
    assert found.interval == again.interval
    other = evaluate_resistances(dataclasses.replace(made, seed=8))["anchors"].separation
    assert other.interval != found.interval


# Where the situations lie against the tests


def codes(result, code):
    return [d for d in result.doubts if d.code == code]


def test_situations_beyond_the_tests_are_doubted_with_their_share(study):
    # Tests from 8 to 24 mm; the grid in another unit of length, each level with a quarter of the weight.
    assert not codes(calibrate.run(study()), "beyond-tests")
    wide = study(change=[('values = [10, 20], unit = "mm"', 'values = [1, 2, 3, 4], unit = "cm"')])
    (doubt,) = codes(calibrate.run(wide), "beyond-tests")
    assert doubt.where == "resistance.anchors"
    assert "50 % of the weight of the design situations lies beyond the tested range of 'D'" in doubt.message
    assert "used from 10 to 40 mm" in doubt.message


def test_weights_count_and_quantities_too(study):
    wide = [('values = [10, 20], unit = "mm"', 'values = [10, 20, 30], unit = "mm"')]
    weighted = study(
        change=[*wide, ("[situations.axes]", "[situations]\nweight = 'D / u'\n[situations.axes]")],
        quantities='u = "1 mm"',
    )
    (doubt,) = codes(calibrate.run(weighted), "beyond-tests")
    assert doubt.message.startswith("50 % of the weight")
    (doubt,) = codes(calibrate.run(study(quantities='f = "900 MPa"')), "beyond-tests")
    assert "100 % of the weight of the design situations lies beyond the tested range of 'f'" in doubt.message


def test_an_axis_of_another_dimension_is_not_compared_in_silence(study):
    change = [('values = [10, 20], unit = "mm"', "values = [10, 20]")]
    (doubt,) = codes(calibrate.run(study(change=change)), "beyond-tests-not-checked")
    assert "'D' is an input of the tests (a length (m))" in doubt.message


def test_a_model_factor_in_no_rule_claims_nothing(study):
    change = [("values = [10, 20]", "values = [100, 200]"), ("theta * R_n >= E", "R_n >= E")]
    assert not codes(calibrate.run(study(change=change)), "beyond-tests")


def test_a_split_is_named_by_its_covariate(study):
    made = study(invented_rows(n=60, slope=-1.2), tests="split_at = { D = 12 }")
    (options,) = [o for o in evaluate_resistances(made)["anchors"].options if o.covariate == "D"]
    assert options.split_at == 12.0
    with pytest.raises(InputError, match="divides 'DD', which is no input of the tests"):
        study(tests="split_at = { DD = 12 }")


def test_own_loads_of_the_north_american_form(study):
    """C_phi and V_Q by hand: dead-to-live 1/3, factors 1.25 and 1.5, as LSD derives them: 1.419753 and 0.186991."""
    loads = (
        "{ dead_factor = 1.25, live_factor = 1.5, dead_to_live = 0.3333333333333333, dead_bias = 1.05, "
        "live_bias = 1.0, dead_cov = 0.1, live_cov = 0.25 }"
    )
    form = f'format = "LRFD members", material = {PART}, fabrication = {PART}, loads = {loads}, target = 3.0'
    found = evaluate_resistances(study(tests=f"north_american = {{ {form} }}"))["anchors"].north_american
    assert found.c_phi == pytest.approx(1.419753, abs=1e-6)
    assert found.v_q == pytest.approx(0.186991, abs=1e-6)
    assert found.format.target == 3.0
    with pytest.raises(InputError, match="with loads of your own they are derived"):
        study(tests=f'north_american = {{ {form}, coefficients = "printed" }}')


SECOND = """
[resistance.physical]
file = "tests.csv"
measured = "R"
unit = "kN"
prediction = "0.25 * pi * D**2 * f"
units = { D = "mm", f = "MPa" }
"""


def test_tail_and_second_layer_are_those_of_direct_calls(study):
    made = study(
        tests='tail_share = 0.4\nsecond_layer = "physical"',
        change=[("[variables.theta]", SECOND + "[variables.theta]")],
    )
    found = evaluate_resistances(made)["anchors"]
    tests = found.records.tests
    fractiles = Fractiles(target_beta=3.0, alpha_r=0.8, fractile=0.05, source="formula")
    tail = annex_d8_tail(tests, {}, 0.4, fractiles=fractiles)
    k, d = FractileFactor.predictive(0.05), FractileFactor.predictive(stats.norm.sf(0.8 * 3.0))
    both = two_layers(layer(tests.ratio, "a"), layer(tests.ratio, "b"), characteristic=k, design=d)
    factors = {r.name: r.factor for r in found.routes}
    assert factors["lower tail alone"] == pytest.approx(tail.tail.small.gamma_m, rel=1e-12)
    assert factors["two layers"] == pytest.approx(both.closed_form.partial_factor, rel=1e-12)
    assert found.layers.cov == pytest.approx(np.sqrt((1 + layer_cov(tests) ** 2) ** 2 - 1), rel=1e-12)


def layer_cov(tests):
    """V of one lognormal layer; of two alike the variances of the logarithms add."""
    return np.sqrt(np.expm1(np.log(tests.ratio).var(ddof=1)))


def test_an_unknown_second_layer_is_told(study):
    found = problem_of(lambda: study(tests='second_layer = "physical"'), "no other table of component tests")
    assert found.line == 17
    assert "Add a section" in found.suggestion
