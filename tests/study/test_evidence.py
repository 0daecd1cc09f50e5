"""What a study may say of its records and of what stands for them: bounds, lots, estimators, characteristic values."""

import json

import numpy as np
import pytest

import calibrate
from calibrate.errors import InputError
from calibrate.study.export import table_files

STUDY = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Rods"
reference_period = 50
seed = 5
[target]
beta = 3.0
[records.rods]
file = "rods.csv"
column = "F"
unit = "kN"
censored = "state"
lot = "lot"
{records}
[quantities]
{quantities}
A = 1.0
[variables.F]
records = "rods"
family = "lognormal"
role = "resistance"
{variable}
[variables.S]
family = "gumbel"
mean = "20 kN"
cov = 0.2
role = "action"
grade = "judgement"
[rules.rods]
design_check = "A * z * gamma >= 1"
sizes = "z"
limit_state = "z * F >= S"
[factors]
gamma = {{ present = 1.0, lower = 0.2, upper = 5.0 }}
"""

RNG = np.random.default_rng(31)
LOTS = np.repeat(["a", "b", "c", "d"], 8)
LOG = np.log(60.0) + np.repeat(RNG.normal(0.0, 0.10, 4), 8) + RNG.normal(0.0, 0.06, 32)
VALUES = np.round(np.exp(LOG), 2)


@pytest.fixture
def study(tmp_path):
    def write(records="", quantities="", variable="", survivors=0):
        lines = ["F,state,lot"]
        lines += [f"{v},{'failed'},{lot}" for v, lot in zip(VALUES, LOTS, strict=True)]
        lines += ["40,survived,a"] * survivors
        (tmp_path / "rods.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
        path = tmp_path / "study.toml"
        path.write_text(
            STUDY.format(records=records, quantities=quantities, variable=variable), encoding="utf-8"
        )
        return calibrate.read_study(path)

    return write


def content(result):
    return json.loads(table_files(result)["result.json"])


def test_survivors_raise_the_fitted_resistance(study):
    without = calibrate.run(study()).fitted["F"].fit
    with_them = calibrate.run(study(survivors=12)).fitted["F"].fit
    assert with_them.n == 44
    assert with_them.observations.right.sum() == 12
    # Twelve more specimens that held 40 kN: the lower tail is shorter than it seemed.
    low = [float(f.distribution.ppf(0.001)) for f in (without, with_them)]
    assert low[1] > low[0]


def test_an_excluded_row_is_told_with_its_reason(study):
    result = calibrate.run(study(records='exclude = [{ row = 5, reason = "grip slipped" }]'))
    records = content(result)["records"]["rods"]
    assert records["n"] == 31
    assert records["excluded"] == [{"row": 5, "reason": "grip slipped"}]


def test_lots_ignored_are_doubted_and_answered_by_what_the_variable_stands_for(study):
    pooled = calibrate.run(study())
    assert "lots-matter" in {d.code for d in pooled.doubts}
    answered = calibrate.run(study(variable='stands_for = "lot mean"'))
    assert "lots-matter" not in {d.code for d in answered.doubts}
    scatter = answered.fitted["F"].lots
    assert answered.variables["F"].cov[0] == pytest.approx(
        np.sqrt(np.expm1(scatter.between_sd**2)), rel=1e-12
    )
    within = calibrate.run(study(variable='stands_for = "within a lot"'))
    assert within.variables["F"].cov[0] == pytest.approx(
        np.sqrt(np.expm1(within.fitted["F"].lots.within_sd ** 2)), rel=1e-12
    )


def test_the_predictive_variable_is_students_and_has_a_smaller_beta(study):
    plain = calibrate.run(study(), workers=1)
    wide = calibrate.run(study(variable="predictive = true"))
    assert wide.variables["F"].family == "log_student_t"
    assert content(wide)["variables"]["F"]["predictive"] is True
    gamma = [r.calibration.present.evaluation.beta[0] for r in (plain, wide)]
    assert gamma[1] < gamma[0]


def test_a_predictive_weibull_is_a_mixture_shown_with_its_fit(study):
    result = calibrate.run(study(variable="predictive = true").__class__(**_changed(study, family="weibull")))
    shown = result.variables["F"]
    assert shown.family == "weibull"
    assert shown.parameters["shape"][0] == pytest.approx(result.fitted["F"].fit.parameters["shape"])
    assert shown.sd[0] > float(result.fitted["F"].fit.distribution.sd)


def _changed(study, family):
    import dataclasses

    made = study(variable="predictive = true")
    fields = {f.name: getattr(made, f.name) for f in dataclasses.fields(made)}
    fields["variables"] = {
        **made.variables,
        "F": dataclasses.replace(made.variables["F"], families=(family,)),
    }
    return fields


def test_a_characteristic_value_comes_from_the_tests_of_the_variable(study):
    quantities = 'F_k = { characteristic_of = "F", fractile = 0.05, confidence = 0.75 }'
    made = study(quantities=quantities)
    log = np.log(VALUES)
    from scipy.stats import nct

    k = nct.ppf(0.75, 31, 1.6448536269514722 * np.sqrt(32)) / np.sqrt(32)
    by_hand = np.exp(log.mean() - k * log.std(ddof=1)) * 1e3
    assert made.quantities["F_k"].value == pytest.approx(by_hand, rel=1e-6)
    result = calibrate.run(made)
    (bond,) = content(result)["bonds"]
    assert (bond["quantity"], bond["variable"], bond["value_type"]) == ("F_k", "F", "5 % fractile")
    mean = float(result.variables["F"].mean[0])
    assert bond["bias"][0] == pytest.approx(mean * 1e3 / by_hand, rel=1e-9)


def test_a_typed_bias_that_contradicts_the_model_stops_the_run(study):
    stated = 'F_k = {{ value = "50 kN", of = "F", is = "5 % fractile", bias = {bias} }}'
    implied = float(calibrate.run(study()).variables["F"].mean[0]) / 50.0
    assert calibrate.run(study(quantities=stated.format(bias=round(implied, 3)))).biases[0].variable == "F"
    with pytest.raises(InputError, match=r"with a bias of 1\.05, but the model of 'F' implies"):
        calibrate.run(study(quantities=stated.format(bias=1.05)))


@pytest.mark.parametrize(
    ("stated", "code"),
    [
        ('value = "20 kN", of = "F", is = "5 % fractile"', "fractile-differs"),
        ('value = "90 kN", of = "F", is = "nominal"', "nominal-above-mean"),
        ('value = "50 kN", of = "F", is = "mean"', "mean-differs"),
    ],
)
def test_a_value_that_is_not_what_it_is_said_to_be_is_doubted(study, stated, code):
    result = calibrate.run(study(quantities=f"F_k = {{ {stated} }}"))
    assert code in {d.code for d in result.doubts}


def test_shares_of_the_pedigree_sum_to_one(study):
    result = calibrate.run(study())
    shares = {p.grade: p.share for p in result.pedigree}
    assert set(shares) == {"own data", "judgement"}
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-12)
    alpha = result.situations["alpha_F"].iloc[0]
    assert shares["own data"] == pytest.approx(alpha**2, abs=1e-12)


@pytest.mark.parametrize(
    ("where", "text", "words"),
    [
        ("records", 'lots = "lot"', "unknown key 'lots' in [records.rods]"),
        ("records", 'above = "3 mm"', "is a length (m), but the sample is a force"),
        ("records", "exclude = [{ row = 5 }]", "the key 'reason' is missing in [records.rods.exclude[1]]"),
        ("records", 'exclude = [{ where = "lot", equals = "z", reason = "other plant" }]', "'z'"),
        ("records", 'declared = ["90 kN", "20 kN"]', "in the wrong order"),
        ("variable", 'method = "bayes"', "needs prior_mean"),
        ("variable", 'method = { name = "known_cov", fraction = 0.2, cov = 0.1 }', "no option fraction"),
        ("variable", 'method = { name = "lower_tail", fraction = 0.0 }', "must lie above 0"),
        ("variable", 'lot = "a"', "names a lot, but"),
        ("variable", 'stands_for = "a lot"', "must be one of 'whole population', 'lot mean', 'within a lot'"),
        ("quantities", 'F_k = { characteristic_of = "G" }', "names 'G', which is no basic variable"),
        ("quantities", 'F_k = { characteristic_of = "S" }', "which has no records"),
        ("quantities", 'F_k = { characteristic_of = "F", confidence = 1.5 }', "less than 1"),
        ("quantities", 'F_k = { characteristic_of = "F", route = "guess" }', "no route 'guess'"),
        (
            "quantities",
            'F_k = { value = "50 kN", of = "F", is = "typical" }',
            "must be 'mean', 'nominal', 'declared'",
        ),
    ],
)
def test_slips_are_told_with_their_line(study, where, text, words):
    with pytest.raises(InputError) as caught:
        calibrate.run(study(**{where: text}))
    assert words in str(caught.value)
    assert any(p.line is not None for p in caught.value.problems)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("normalise = { t = { reference = 1.5, exponent = true } }", 'must be a number, or "fit"; got true'),
        ("normalise = { t = { exponent = 1.0 } }", "the key 'reference' is missing"),
        ("normalise = { t = { reference = 1.5, exponent = 1.0 } }", "There is no column 't'"),
        ("declared = [[1]]", "must be a number, a text"),
        ("declared = [1, 2, 3]", "one nominal value, or the two ends"),
        ("unit_by = 3", "must be a table with keys; got 3"),
        ('decimal = ";"', "decimal ';' is not known"),
        ('exclude = [{ row = 5, reason = " " }]', "must be filled in"),
        ('value = "F * 2"', "needs either 'column' or 'value'"),
    ],
)
def test_slips_of_records_are_told(study, text, words):
    with pytest.raises(InputError) as caught:
        study(records=text)
    assert words in str(caught.value)


def test_the_bias_of_a_model_over_its_own_basis_is_computed(study):
    made = study(quantities='S_k = "25 kN"')
    import dataclasses

    from calibrate.expressions import parse

    basis = dataclasses.replace(
        made.variables["S"], arguments={**made.variables["S"].arguments, "mean": parse("0.8 * S_k")}
    )
    result = calibrate.run(dataclasses.replace(made, variables={**made.variables, "S": basis}))
    (bias,) = result.biases
    assert (bias.quantity, bias.variable, bias.value_type) == ("S_k", "S", "basis of the model")
    assert bias.bias == pytest.approx((0.8, 0.8), rel=1e-12)


def test_failure_modes_are_fitted_as_competing_risks(study):
    lines = (study().path.parent / "rods.csv").read_text(encoding="utf-8").splitlines()
    modes = ["thread", "shank"] * 16
    records = 'mode = "mode"'
    made = study()
    path = made.path.parent / "rods.csv"
    path.write_text(
        "\n".join([lines[0] + ",mode", *(f"{a},{m}" for a, m in zip(lines[1:], modes, strict=True))]) + "\n"
    )
    text = made.path.read_text(encoding="utf-8")
    for variable, count in (("", None), ('failure_mode = "shank"', 16)):
        made.path.write_text(
            text.replace('lot = "lot"\n', f'lot = "lot"\n{records}\n').replace(
                'role = "resistance"', f'role = "resistance"\n{variable}'
            ),
            encoding="utf-8",
        )
        result = calibrate.run(calibrate.read_study(made.path))
        fits = {m.name: m for m in result.fitted["F"].modes}
        assert {(n, m.failures, m.survivors) for n, m in fits.items()} == {
            ("thread", 16, 16),
            ("shank", 16, 16),
        }
        if count is not None:
            used = result.fitted["F"].fit
            assert used.observations.n_exact == count
            assert used.parameters == fits["shank"].fit.parameters
        # The weakest of both modes has the strength of all specimens together.
        from calibrate.fitting.modes import weakest_below

        median = np.median(VALUES)
        assert float(weakest_below(list(fits.values()), np.array([median]))[0]) == pytest.approx(0.5, abs=0.1)
    made.path.write_text(
        text.replace('lot = "lot"\n', f'lot = "lot"\n{records}\n').replace(
            'role = "resistance"', 'failure_mode = "weld"'
        )
    )
    with pytest.raises(InputError, match="does not occur among the failure modes"):
        calibrate.read_study(made.path)


def test_a_family_that_others_beat_is_kept_and_reported(study):
    result = calibrate.run(study(variable="").__class__(**_changed(study, "frechet")))
    assert result.variables["F"].family == "frechet"
    assert "not-recommended" in {d.code for d in result.doubts}


def test_the_scatter_of_fitted_exponents_widens_the_variable(study):
    made = study()
    path = made.path.parent / "rods.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    t = np.round(np.exp(RNG.normal(0.0, 0.15, 32)) * 1.4, 3)
    path.write_text(
        "\n".join([lines[0] + ",t", *(f"{a},{x}" for a, x in zip(lines[1:], t, strict=True))]) + "\n"
    )
    text = made.path.read_text(encoding="utf-8")
    options = 'normalise = { t = { reference = "1.5", exponent = "fit" } }'.replace('"1.5"', "1.5")
    made.path.write_text(text.replace('lot = "lot"\n', f'lot = "lot"\n{options}\n'), encoding="utf-8")
    result = calibrate.run(calibrate.read_study(made.path))
    added = float(np.mean(result.study.records["rods"].normalisation.added_variance))
    plain = result.fitted["F"].fit.parameters["log_sd"]
    assert added > 0
    assert result.variables["F"].parameters["log_sd"][0] == pytest.approx(
        np.hypot(plain, np.sqrt(added)), rel=1e-12
    )
    assert "normalisation-carried" in {d.code for d in result.doubts}
