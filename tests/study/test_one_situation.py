"""One design situation under the lens, against closed forms, textbooks and the main job."""

import math

import numpy as np
import pytest
from scipy.optimize import brentq

from calibrate.errors import InputError
from calibrate.study import read_study, run
from calibrate.study.assemble import basic_variables, rule_models
from calibrate.study.fits import fit_variables
from calibrate.study.index_question import Asked
from calibrate.study.index_scene import evaluated, scene
from calibrate.study.index_varied import can_be_varied, present_size, varied
from calibrate.study.one_situation import one_situation

ROD = """\
format = 1
study = { title = "Rod", reference_period = 50 }
target = { beta = 3.8 }
[variables]
r = { family = "normal", mean = "350 MPa", sd = "35 MPa" }
a = { family = "normal", mean = "10 mm^2", sd = "1 mm^2" }
s = { family = "normal", mean = "1500 N", sd = "300 N" }
[rules.rod]
limit_state = "r * a >= s"
[factors]
gamma = 1.0
"""
MEMBERS = """\
format = 1
study = {{ title = "Members", reference_period = 50 }}
target = {{ beta = 3.8 }}
[quantities]
unit_load = "1 kN"
E_0 = "2 * unit_load"
[situations.axes]
chi = [0.5, 1.0]
[situations.derived]
E_k = "chi * E_0"
[variables]
R = {{ family = "{family}", mean = "1.2 * R_d", cov = 0.1 }}
E = {{ family = "{family}", mean = "0.6 * E_k", cov = 0.2, unit = "kN" }}
[rules.member]
design_check = "R_d >= gamma * E_k"
sizes = "R_d"
size_unit = "kN"
limit_state = "R >= E"
[factors]
gamma = {{ present = 2.0, lower = 0.6, upper = 6.0 }}
"""
GANTRY = """\
format = 1
study = { title = "Gantry", reference_period = 50 }
target = { beta = 3.8 }
[quantities]
share = 0.6
[variables]
R = { family = "lognormal", mean = 1.0, cov = 0.1 }
Q = { family = "gumbel", mean = "share * chi", cov = 0.35 }
W = { family = "gumbel", mean = "0.5 * (1 - chi)", sd = "0.2 * (1 - chi)" }
X = { family = "lognormal", mean = "1 + 0.1 * R", cov = 0.08 }
[combination]
Q = { repetitions = 5 }
W = { repetitions = 50 }
[situations.axes]
chi = [0.3, 0.7]
[rules.gantry]
design_check = "z * phi >= gamma_Q * chi + gamma_W * (1 - chi)"
sizes = "z"
limit_state = "z * R * X >= Q + W"
[rules.other]
limit_state = "R * X * 3 >= Q"
[factors]
phi = { present = 0.6, lower = 0.3, upper = 1.2 }
gamma_Q = 1.2
gamma_W = 1.5
"""


@pytest.fixture
def study(tmp_path):
    def read(text):
        path = tmp_path / "study.toml"
        path.write_text(text, encoding="utf-8")
        return read_study(path)

    return read


@pytest.fixture
def look(study):
    def ask(text, **asked):
        return one_situation(study(text), Asked(**{"method": "none", "situation": 1, **asked}))

    return ask


def scene_of(content, rule, number):
    models = rule_models(content, basic_variables(content, fit_variables(content)))
    factors = {f.name: float(f.present) for f in content.factors}
    return scene(content, rule, number, models[list(content.rules).index(rule.name)], factors)


def normal_beta(gamma, cov=0.1):
    r, e = 1.2 * gamma, 0.6
    return (r - e) / np.hypot(cov * r, 0.2 * e)


def lognormal_beta(gamma):
    medians = (1.2 * gamma / np.sqrt(1.01)) / (0.6 / np.sqrt(1.04))
    return np.log(medians) / np.sqrt(np.log1p(0.01) + np.log1p(0.04))


def test_the_rod_of_a_textbook_without_size(look):
    """M. H. Faber, Statistics and Probability Theory, example of a rod; beta and point recomputed to more digits."""
    found = look(ROD, situation=None, method="importance sampling")
    assert found.beta == pytest.approx(3.74483, abs=5e-6)
    x = [found.analysis.reliability.x[i, 0] / v.unit.factor for i, v in enumerate(found.variables)]
    np.testing.assert_allclose(x, (276.471, 7.89917, 2183.888), rtol=2e-6)
    assert (found.status, found.size_unit, found.dependent, found.leading) == ("converged", None, False, "")
    simulated = found.analysis.simulation
    assert simulated.cov[0] <= 0.02
    assert simulated.beta_lower[0] < found.analysis.second_order.beta[0] < simulated.beta_upper[0]


@pytest.mark.parametrize("text", [ROD, MEMBERS.format(family="lognormal"), GANTRY])
def test_the_last_row_of_the_trace_is_form_and_solvers_agree(look, text):
    names = ("hasofer-lind-rackwitz-fiessler", "gradient projection", "slsqp")
    rule = "gantry" if text == GANTRY else None
    found = look(text, rule=rule, solvers=names)
    steps, form = found.analysis.trace, found.analysis.reliability
    assert steps.what[-1] == "design point"
    assert steps.beta[-1] == pytest.approx(found.beta, abs=1e-12)
    np.testing.assert_allclose(steps.u[-1], form.u[:, 0], atol=1e-9)
    np.testing.assert_allclose(steps.u[0], 0.0)
    assert [name for name, _ in found.analysis.solvers] == list(names)
    for _, other in found.analysis.solvers:
        assert other.beta[0] == pytest.approx(found.beta, abs=1e-7)


@pytest.mark.parametrize(("family", "closed"), [("normal", normal_beta), ("lognormal", lognormal_beta)])
def test_the_curve_of_a_factor_is_the_closed_form(look, family, closed):
    """Sizes are solved anew; the limit state is plane, so that the second order changes nothing."""
    found = look(MEMBERS.format(family=family), situation=2, against="gamma", low="1.1", high="3.1", count=9)
    curve = found.curve
    gamma = np.linspace(1.1, 3.1, 9)
    np.testing.assert_allclose(curve.values, gamma, rtol=1e-15)
    np.testing.assert_allclose(curve.beta, closed(gamma), rtol=1e-9)
    np.testing.assert_allclose(curve.second_order, curve.beta, atol=1e-9)
    np.testing.assert_allclose(curve.size, gamma * 2000.0, rtol=1e-12)
    h = 1e-6
    np.testing.assert_allclose(curve.slope, (closed(gamma + h) - closed(gamma - h)) / (2 * h), rtol=1e-6)
    assert curve.sound.all()


def test_a_curve_of_the_size_takes_it_as_given(look):
    found = look(MEMBERS.format(family="normal"), against="R_d", low="1500 N", high="2.5", count=3)
    np.testing.assert_allclose(found.curve.values, (1500.0, 2000.0, 2500.0))
    np.testing.assert_allclose(found.curve.beta, normal_beta(found.curve.values / 1000.0), rtol=1e-9)
    assert found.curve.size is None
    assert (found.size, found.size_unit.text) == (pytest.approx(2.0), "kN")


def test_without_a_range_thirty_per_cent_to_both_sides(look):
    found = look(MEMBERS.format(family="normal"), against="R.cov")
    np.testing.assert_allclose(found.curve.values, np.linspace(0.07, 0.13, 21), rtol=1e-12)
    np.testing.assert_allclose(found.curve.beta, normal_beta(2.0, found.curve.values), rtol=1e-9)
    assert found.curve.beta[10] == pytest.approx(found.beta, abs=1e-12)


def test_one_value_of_a_curve_is_that_of_a_study_with_it(look):
    """Through a quantity, another computed from it, a derived quantity, the size and the models."""
    text = MEMBERS.format(family="lognormal").replace("cov = 0.1 }", 'sd = "0.3 kN" }')
    found = look(text, against="unit_load", low="0.8 kN", high="1.3 kN", count=2)
    other = look(text.replace('"1 kN"', '"1.3 kN"'))
    assert found.curve.beta[1] == pytest.approx(other.beta, abs=1e-10)
    assert found.curve.size[1] / 1000.0 == pytest.approx(other.size, rel=1e-12)
    axis = look(text, against="chi", low="0.5", high="1.0", count=2)
    assert axis.curve.beta[1] == pytest.approx(look(text, situation=2).beta, abs=1e-10)


@pytest.mark.parametrize("text", [ROD, MEMBERS.format(family="lognormal"), GANTRY])
def test_every_slope_is_that_of_differences(study, text):
    """Of everything that can be varied, at two situations or one."""
    content = study(text)
    rule = next(iter(content.rules.values()))
    for number in range(1, content.situations.n + 1):
        here = scene_of(content, rule, number)
        now = evaluated(here.model)
        names = can_be_varied(here)
        assert len(names) >= 7
        for name in names:
            what = varied(here, name, present_size(now))
            h = 1e-4 * what.present
            answer, slope = what.evaluated(what.present + np.array([-h, 0.0, h]))
            assert answer.beta[1] == pytest.approx(now.beta[0], abs=1e-10), name
            # central differences: error of the third derivative times h^2
            difference = (answer.beta[2] - answer.beta[0]) / 2e-4
            assert slope[1] * what.present == pytest.approx(difference, abs=2e-5), name


def test_the_inverse_question_for_a_factor_has_a_closed_form(look):
    exact = brentq(lambda g: lognormal_beta(g) - 3.8, 0.6, 6.0, xtol=1e-14)
    found = look(MEMBERS.format(family="lognormal"), target=3.8, vary="gamma").required
    assert found.met
    assert found.value == pytest.approx(exact, abs=1e-6)
    assert found.beta == pytest.approx(3.8, abs=1e-8)
    assert found.size == pytest.approx(1000.0 * exact, rel=1e-8)
    assert found.evaluations < 15


def test_the_inverse_question_for_a_cov_has_a_closed_form(look):
    """R - E normal: sd of R from beta = (mu_R - mu_E) / sqrt(sd_R^2 + sd_E^2)."""
    found = look(MEMBERS.format(family="normal"), target=4.0, vary="E.cov").required
    exact = math.sqrt((1.8 / 4.0) ** 2 - 0.24**2) / 0.6
    assert found.value == pytest.approx(exact, rel=1e-9)


def test_by_default_the_size_gives_the_target(look):
    exact = brentq(lambda g: normal_beta(g) - 4.5, 1.0, 3.0, xtol=1e-14)
    found = look(MEMBERS.format(family="normal"), target=4.5).required
    assert (found.varied.name, found.varied.kind) == ("R_d", "size")
    assert found.value == pytest.approx(1000.0 * exact, rel=1e-8)
    alone = look(GANTRY, rule="other", target=4.5, vary="R.mean").required
    assert alone.met
    with pytest.raises(InputError, match="sizes nothing and no free factor enters it; say with --vary"):
        look(GANTRY, rule="other", target=4.5)


def test_a_target_out_of_reach_is_told_with_the_range_of_beta(look):
    """Beta of R - E is bounded by 1/cov of R = 10 however large R is."""
    found = look(MEMBERS.format(family="normal"), target=11.0, vary="R_d").required
    assert not found.met
    assert math.isnan(found.value)
    assert "out of reach between 0.2 and 20: beta runs from" in found.status
    assert "(R_d in kN)" in found.status


def test_the_worst_alternative_is_looked_at_or_the_one_asked_for(look, study):
    found = look(GANTRY, rule="gantry", situation=2)
    assert set(found.alternatives) == {"Q", "W"}
    assert found.beta == min(found.alternatives.values()) == found.alternatives[found.leading]
    other = next(a for a in found.alternatives if a != found.leading)
    asked = look(GANTRY, rule="gantry", situation=2, leading=other)
    assert (asked.leading, asked.alternatives) == (other, {})
    assert asked.beta == pytest.approx(found.alternatives[other], abs=1e-10)
    assert asked.analysis.trace.beta[-1] == pytest.approx(asked.beta, abs=1e-12)
    curve = look(GANTRY, rule="gantry", against="chi", low="0.05", high="0.95", count=7).curve
    assert set(curve.governing) == {"Q", "W"}


def test_a_variable_that_depends_on_another_is_said_to(look):
    found = look(GANTRY, rule="gantry")
    assert found.dependent
    given = {v.name: v.given for v in found.variables}
    assert given == {"R": (), "Q": (), "W": (), "X": ("R",)}
    names = can_be_varied(scene_of(found.study, found.rule, 1))
    assert "X.cov" in names
    with pytest.raises(InputError, match=r"'X.mean' cannot be varied: it follows from R"):
        look(GANTRY, rule="gantry", against="X.mean")


def test_values_without_a_distribution_have_a_status(look):
    """A lognormal variable has a positive mean only."""
    text = MEMBERS.format(family="lognormal").replace('"0.6 * E_k"', '"0.6 * E_k - e"')
    text = text.replace('unit_load = "1 kN"', 'unit_load = "1 kN"\ne = "0.1 kN"')
    curve = look(text, against="e", low="0.1", high="0.9", count=5).curve
    assert np.isfinite(curve.beta).tolist() == [True, True, True, False, False]
    assert all(
        s.startswith("no distribution: Variable 'E': lognormal: mean must be positive")
        for s in curve.status[3:]
    )
    assert not any("situation" in s for s in curve.status)
    alone = look(text, against="e", low="0.1", high="0.5", count=3).curve
    np.testing.assert_allclose(curve.beta[:3], alone.beta, rtol=0.0, atol=1e-12)


def test_factors_are_present_given_or_calibrated(study):
    content = study(MEMBERS.format(family="lognormal"))
    given = one_situation(content, Asked(situation=2, factors={"gamma": 1.7}, method="none"))
    assert given.beta == pytest.approx(lognormal_beta(1.7), rel=1e-9)
    optimal = one_situation(content, Asked(situation=2, on="optimal", method="none"))
    result = run(content)
    assert optimal.factors == result.calibration.optimal.factors
    assert optimal.beta == pytest.approx(result.situations["beta_optimal"].iloc[1], abs=1e-10)


def test_a_fitted_variable_keeps_its_family(project):
    found = one_situation(
        project.read(), Asked(situation=3, method="none", against="f_u.cov", low="0.02", high="0.2", count=4)
    )
    fitted = next(v for v in found.variables if v.name == "f_u")
    what = found.curve.varied
    assert what.present == pytest.approx(fitted.cov, rel=1e-9)
    assert found.curve.answer.found.distributions[0].family.name == "lognormal"
    assert np.all(np.diff(found.curve.beta) < 0.0)
    assert np.interp(fitted.cov, found.curve.values, found.curve.beta) == pytest.approx(found.beta, abs=0.05)


def test_without_size_there_is_a_status_and_no_analysis(look):
    text = MEMBERS.format(family="normal").replace("R_d >= gamma * E_k", "R_d / R_d >= gamma * 2")
    found = look(text, against="gamma", low="0.2", high="0.6", count=3)
    assert math.isnan(found.beta)
    assert found.status == "not converged: no size meets the design check"
    assert found.analysis is None
    assert math.isnan(found.size)


def test_simulation_does_not_depend_on_what_else_is_asked(study):
    content = study(ROD)
    one = one_situation(content, Asked(method="directional simulation", cov=0.1))
    two = one_situation(
        content, Asked(method="directional simulation", cov=0.1, against="r.mean", solvers=("slsqp",))
    )
    assert one.analysis.simulation.beta[0] == two.analysis.simulation.beta[0]
    other = one_situation(content, Asked(method="directional simulation", cov=0.1), seed=5)
    assert other.analysis.simulation.beta[0] != one.analysis.simulation.beta[0]
