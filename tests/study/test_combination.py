"""Combined variable actions: every alternative, the worst of them, derivatives, and what is said of it."""

import numpy as np
import pytest
from scipy.special import log_ndtr, ndtr, ndtri_exp

import calibrate
from calibrate.distributions import distribution, maximum_of
from calibrate.errors import InputError
from calibrate.study.assemble import basic_variables, rule_models
from calibrate.study.fits import fit_variables

STUDY = """
format = 1
verification.method = "none"   # looked at in tests of its own
[study]
title = "Gantry"
reference_period = 50
{study}
[target]
beta = 3.8
[variables.R]
family = "lognormal"
mean = 1.0
cov = 0.1
[variables.Q]
family = "gumbel"
mean = "0.6 * chi"
cov = 0.35
{Q}
[variables.W]
family = "gumbel"
mean = "0.5 * (1 - chi)"
cov = 0.4
[combination]
Q = {{ repetitions = 5{present} }}
W = {{ repetitions = 50 }}
{more}
[situations.axes]
chi = [0.1, 0.3, 0.5, 0.7, 0.9]
[rules.gantry]
design_check = "z * phi >= gamma_Q * chi + gamma_W * (1 - chi)"
sizes = "z"
limit_state = "z * R >= Q + W"
[factors]
phi = {{ present = 0.6, lower = 0.3, upper = 1.2 }}
gamma_Q = 1.2
gamma_W = 1.5
"""


@pytest.fixture
def study(tmp_path):
    def write(**parts):
        texts = {"study": "", "present": "", "more": "", "Q": "", **parts}
        path = tmp_path / "study.toml"
        path.write_text(STUDY.format(**texts), encoding="utf-8")
        return calibrate.read_study(path)

    return write


def by_hand(chi, size, repeats_q, repeats_w):
    """Return beta of one alternative through the public form."""
    return calibrate.form(
        "z * R - Q - W",
        {
            "R": distribution("lognormal", mean=1.0, cov=0.1),
            "Q": maximum_of(distribution("gumbel", mean=0.6 * chi, cov=0.35), repeats_q),
            "W": maximum_of(distribution("gumbel", mean=0.5 * (1 - chi), cov=0.4), repeats_w),
        },
        quantities={"z": size},
    ).beta


def test_each_alternative_is_form_with_its_own_maxima(study):
    result = calibrate.run(study())
    frame = result.combinations
    chi, size = (result.situations[c].to_numpy() for c in ("chi", "size_proposed"))
    # Q leads with five repetitions, W beside it with the ten within one of them; or W leads with all fifty.
    led_by_q = by_hand(chi, size, 5, 10)
    led_by_w = by_hand(chi, size, 1, 50)
    np.testing.assert_allclose(frame["beta_Q"], led_by_q, atol=1e-8)
    np.testing.assert_allclose(frame["beta_W"], led_by_w, atol=1e-8)
    worst = np.minimum(led_by_q, led_by_w)
    np.testing.assert_allclose(result.situations["beta_proposed"], worst, atol=1e-8)
    assert list(frame["governing"]) == list(np.where(led_by_q <= led_by_w, "Q", "W"))
    assert {"Q", "W"} == set(frame["governing"])
    np.testing.assert_allclose(frame["beta_series_upper"], worst, atol=1e-8)
    joint = ndtri_exp(log_ndtr(led_by_q) + log_ndtr(led_by_w))
    np.testing.assert_allclose(frame["beta_series_lower"], joint, atol=1e-8)


def test_the_exact_maximum_is_form_on_its_quantile_and_never_above_the_alternatives(study):
    """Row by row against the nearest point of R z = S(u), S the quantile of the scalar quadrature, by scipy."""
    from scipy.optimize import minimize_scalar

    from calibrate.actions import Action, fbc_maximum

    result = calibrate.run(study())
    frame = result.combinations
    assert (frame["beta_fbc"] <= frame["beta_series_upper"] + 1e-9).all()
    law = distribution("lognormal", mean=1.0, cov=0.1)
    for row in (0, 2, 4):
        chi, z = (float(result.situations[c].iloc[row]) for c in ("chi", "size_proposed"))
        whole = fbc_maximum(
            [
                Action(distribution("gumbel", mean=0.6 * chi, cov=0.35), 5),
                Action(distribution("gumbel", mean=0.5 * (1 - chi), cov=0.4), 50),
            ]
        )

        def distance(u, whole=whole, z=z):
            return float(np.hypot(u, whole.u(z * law.x(u))))

        best = minimize_scalar(distance, bounds=(-5.0, 0.0), method="bounded", options={"xatol": 1e-7})
        assert frame["beta_fbc"].iloc[row] == pytest.approx(best.fun, abs=1e-6)


def test_a_limit_state_that_is_no_sum_has_no_exact_maximum(study, tmp_path):
    made = study()
    path = tmp_path / "product.toml"
    path.write_text(made.text.replace("z * R >= Q + W", "z * R >= Q + W + 0.1 * Q * W"), encoding="utf-8")
    result = calibrate.run(calibrate.read_study(path))
    assert result.combinations["beta_fbc"].isna().all()
    assert "combination-not-exact" in {d.code for d in result.doubts}
    assert result.situations["beta_proposed"].notna().all()


def test_the_combined_beta_lies_below_what_full_coincidence_would_give_and_above(study):
    result = calibrate.run(study())
    chi, size = (result.situations[c].to_numpy() for c in ("chi", "size_proposed"))
    beta = result.situations["beta_proposed"].to_numpy()
    assert (beta >= by_hand(chi, size, 5, 50) - 1e-9).all()
    assert (beta <= by_hand(chi, size, 1, 50) + 1e-9).all()


def test_beta_of_the_worst_alternative_agrees_with_simulation_of_the_pulses(study):
    """The alternatives bound the true combination from above; simulation of the pulses says how far (seeded)."""
    result = calibrate.run(study())
    rng = np.random.default_rng(87)
    row = 2
    chi, z = (float(result.situations[c].iloc[row]) for c in ("chi", "size_proposed"))
    n, size = 0, 0.62 * z  # a smaller member, so that failures are frequent enough to count
    failed = 0
    laws = (
        distribution("gumbel", mean=0.6 * chi, cov=0.35),
        distribution("gumbel", mean=0.5 * (1 - chi), cov=0.4),
    )
    for _ in range(20):
        q = laws[0].sample(rng, (10_000, 5))
        w = laws[1].sample(rng, (10_000, 5, 10)).max(axis=2)
        r = distribution("lognormal", mean=1.0, cov=0.1).sample(rng, 10_000)
        failed += int(np.sum(size * r < (q + w).max(axis=1)))
        n += 10_000
    p, error = failed / n, np.sqrt(failed) / n
    worst = min(
        float(by_hand(np.array([chi]), size, 5, 10)[0]), float(by_hand(np.array([chi]), size, 1, 50)[0])
    )
    series = ndtr(-worst)
    assert series <= p + 4 * error + 0.1 * p  # FORM's own error is of that order here
    assert p < 3 * series


def test_derivatives_of_the_worst_alternative_are_exact(study):
    made = study()
    from calibrate.factors import Response

    response = Response(rule_models(made, basic_variables(made, fit_variables(made))), made.factors)
    h, gamma = 1e-6, np.array([0.6])
    sides = [response(gamma + d).beta for d in (-h, h)]
    np.testing.assert_allclose(response(gamma).jacobian[0], (sides[1] - sides[0]) / (2 * h), rtol=1e-5)
    np.testing.assert_allclose(response(gamma, response(gamma * 1.1)).beta, response(gamma).beta, atol=1e-9)


def test_an_action_that_is_rarely_present_matters_less(study):
    always, rarely = (
        calibrate.run(study(present=text)).situations["beta_present"].to_numpy()
        for text in ("", ", presence = 0.2")
    )
    assert (rarely >= always - 1e-9).all()
    assert (rarely[2:] > always[2:]).all()


def test_other_periods_follow_the_repetitions(study):
    result = calibrate.run(study(study="other_periods = [10]"))
    chi, size = (result.situations[c].to_numpy() for c in ("chi", "size_proposed"))
    # Ten of fifty years: one repetition of Q and ten of W.
    exact = np.minimum(by_hand(chi, size, 1, 10), by_hand(chi, size, 1, 10))
    np.testing.assert_allclose(result.other_periods[0].direct, exact, atol=1e-8)


def test_presence_beyond_the_period_is_doubted(study):
    result = calibrate.run(study(present=", duration = 20"))
    assert "presence-beyond-period" in {d.code for d in result.doubts}


def test_files_and_report_show_the_alternatives(study, tmp_path):
    from calibrate.report import write_result

    write_result(calibrate.run(study()), tmp_path / "out")
    assert "led by Q" in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    head = (tmp_path / "out" / "combinations.csv").read_text(encoding="utf-8").splitlines()[0]
    assert head == "rule,situation,governing,beta_Q,beta_W,beta_series_upper,beta_series_lower,beta_fbc"


def test_a_period_says_the_repetitions(study, tmp_path):
    stated = calibrate.run(study())
    path = tmp_path / "periods.toml"
    text = (
        study()
        .text.replace("cov = 0.35\n", "cov = 0.35\nperiod = 10\n")
        .replace("Q = { repetitions = 5 }", "Q = {}")
    )
    path.write_text(text, encoding="utf-8")
    by_period = calibrate.run(calibrate.read_study(path))
    np.testing.assert_array_equal(by_period.combinations["beta_Q"], stated.combinations["beta_Q"])
    assert "period-converted" not in {d.code for d in by_period.doubts}
    path.write_text(text.replace("period = 10\n", ""), encoding="utf-8")
    with pytest.raises(InputError, match="needs 'repetitions' in the reference period, or a period"):
        calibrate.read_study(path)


@pytest.mark.parametrize(
    ("parts", "words"),
    [
        ({"more": "S = { repetitions = 3 }"}, "'S' is not a basic variable"),
        ({"present": ", presence = 1.5"}, "presence"),
        ({"present": ", repeats = 2"}, "unknown key 'repeats'"),
        (
            {"Q": "period = 1"},
            "says 5 repetitions, but its model is for 1 year, of which .* 50 years holds 50",
        ),
        ({"Q": 'period = 10\nconversion = "none"\nconversion_reason = "so"'}, 'conversion = "none"'),
        ({"Q": "period = 100"}, "longer than the reference period of 50 years"),
        ({"Q": 'role = "geometry"'}, "role geometry; only actions"),
    ],
)
def test_slips_of_combinations_are_told(study, parts, words):
    with pytest.raises(InputError, match=words):
        study(**parts)


def test_accompanying_parts_by_design_values(study):
    """By hand: fractiles of the maxima for the rules, FORM of both alternatives for the design points."""
    from calibrate.actions import accompanying_part

    result = calibrate.run(study())
    frame = result.accompanying.set_index(["accompanying", "leading"])
    w = frame.loc[("W", "Q")]
    law = maximum_of(distribution("gumbel", mean=1.0, cov=0.4), 50)
    assert w["intervals"] == 5
    assert w["psi_maximum"] == pytest.approx(float(law.x(0.28 * 3.8) / law.x(0.7 * 3.8)), rel=1e-9)
    assert w["psi_interval"] == pytest.approx(float(accompanying_part(law, 3.8, 5)), rel=1e-9)
    chi, size = (result.situations[c].to_numpy() for c in ("chi", "size_proposed"))

    def point(repeats_q, repeats_w):
        return calibrate.form(
            "z * R - Q - W",
            {
                "R": distribution("lognormal", mean=1.0, cov=0.1),
                "Q": maximum_of(distribution("gumbel", mean=0.6 * chi, cov=0.35), repeats_q),
                "W": maximum_of(distribution("gumbel", mean=0.5 * (1 - chi), cov=0.4), repeats_w),
            },
            quantities={"z": size},
        ).design_point["W"]

    assert w["psi_design_point"] == pytest.approx(np.mean(point(5, 10) / point(1, 50)), rel=1e-5)
    assert (frame[["psi_maximum", "psi_interval", "psi_design_point"]].to_numpy() < 1.0).all()
