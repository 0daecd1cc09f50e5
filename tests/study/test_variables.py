"""Basic variables: units shown, dimensions of arguments, models that depend on the size, what a fit keeps."""

import pytest

G = 'mean = "1.0 * G_k"\ncov = 0.10'
F_U = 'records = "bar_strength"\nfamily = "lognormal"             # a family, a list of candidates, or "best"'
THETA = 'family = "lognormal"\nmean = 1.05\ncov = 0.09'
LIMIT = '"theta_R * A_d * f_u >= G + Q"'
SIZE = 'sizes = "A_d"                    # solved in each situation so that the check is just met'


@pytest.mark.parametrize(
    ("text", "unit", "dimension"),
    [
        ('mean = "50 kN"\ncov = 0.1', "kN", "mass·length/time²"),
        ('mean = "1.0 * G_k"\nsd = "5 kN"', "kN", "mass·length/time²"),
        ('mean = "50 kN"\nsd = "5000 N"\nunit = "MN"', "MN", "mass·length/time²"),
        ('location = "50 kN"\nscale = "5 N"', "kN", "mass·length/time²"),
        ('location = 0\nscale = "5 N"', "N", "mass·length/time²"),
        ('mean = "1.0 * G_k"\ncov = "10 %"', "N", "mass·length/time²"),
        ('mean = "1.0 * G_k"\ncov = 0.1\nunit = "kN"', "kN", "mass·length/time²"),
    ],
)  # fmt: skip
def test_unit_that_is_shown(project, text, unit, dimension):
    variable = project.read((G, text)).variables["G"]
    assert variable.unit.text == unit
    assert str(variable.dimension) == dimension


def test_arguments_are_in_si(project):
    arguments = project.read((G, 'mean = "50 kN"\nsd = "500 N"')).variables["G"].arguments
    assert arguments["mean"].constant == pytest.approx(5e4, rel=1e-15)
    assert arguments["sd"].constant == pytest.approx(500.0, rel=1e-15)


def test_texts_for_the_basis_of_variables(project):
    more = '\ndescription = " model factor "\nsource = "12 tests"\ngrade = "own data"'
    more += "\nmay_be_negative = true\nperiod = 2.5"
    variable = project.read((THETA, THETA + more)).variables["theta_R"]
    assert variable.description == "model factor"
    assert variable.source == "12 tests"
    assert variable.grade == "own data"
    assert variable.may_be_negative is True
    assert variable.period == 2.5
    untold = project.read().variables["theta_R"]
    assert (untold.description, untold.source, untold.grade, untold.may_be_negative) == ("", "", "", False)


# --------------------------------------------------------------------- records


@pytest.mark.parametrize(
    ("family", "expected"),
    [
        ('"weibull"', ("weibull",)),
        ('["lognormal", "normal", "normal"]', ("lognormal", "normal")),
        ('"best"', ()),
        ('["best"]', ()),
    ],
)
def test_candidates(project, family, expected):
    study = project.read((F_U, f'records = "bar_strength"\nfamily = {family}\nmethod = "moments"'))
    assert study.variables["f_u"].families == expected
    assert study.variables["f_u"].method == "moments"


def test_unit_of_a_fitted_variable(project):
    study = project.read((F_U, F_U + '\nunit = "N/mm^2"'))
    assert study.variables["f_u"].unit.text == "N/mm^2"


@pytest.mark.parametrize(
    ("family", "more", "key", "value"),
    [
        ('"weibull3"', 'threshold = "300 MPa"', "threshold", 3e8),
        ('"weibull3"', 'threshold = "0.6 * f_uk"', "threshold", 3e8),
        ('["weibull3", "lognormal"]', "threshold = 0", "threshold", 0.0),
        ('"beta"', 'lower = "100 MPa"\nupper = "900 MPa"', "upper", 9e8),
        ('"truncated_normal"', "lower = 0", "lower", 0.0),
        ('"student_t"', "freedom = 5", "freedom", 5.0),
        ('"gev"', "shape = 0.1", "shape", 0.1),
        ('"best"', 'threshold = "300 MPa"', "threshold", 3e8),
    ],
)
def test_what_a_fit_keeps(project, family, more, key, value):
    variable = project.read((F_U, f'records = "bar_strength"\nfamily = {family}\n{more}')).variables["f_u"]
    assert variable.arguments[key].constant == pytest.approx(value, rel=1e-15)
    assert variable.texts[key]


@pytest.mark.parametrize(
    ("family", "more", "pieces"),
    [
        ('"weibull3"', 'threshold = "3 kN"', ["threshold is a force", "must be a stress"]),
        ('"weibull3"', 'threshold = "chi * f_uk"', ["differs between design situations", "fitted once"]),
        ('"weibull3"', 'shape = 3', ["has records and shape", "Only threshold may be kept fixed"]),
        ('"lognormal"', 'threshold = "3 MPa"', ["has records and threshold"]),
        ('"weibull3"', 'threshold = "300 MPa"\nestimate = "threshold"', ["both fixed and to be estimated"]),
        ('"weibull3"', "", ["The family 'weibull3' needs its threshold", "ask for it to be estimated"]),
        ('["weibull3", "lognormal3"]', "", ["'weibull3' needs its threshold", "'lognormal3' needs its threshold"]),
        ('"lognormal"', 'estimate = ["threshold"]', ["has no parameter 'threshold'"]),
        ('"lognormal"', "estimate = 5", ["estimate must be a name or an array of names; got 5"]),
        ('"beta"', 'lower = "100 MPa"', ["variables.f_u needs 'upper': its default 1 has no unit"]),
        ('"constant"', "", ["'constant' has no scatter and cannot be fitted"]),
        ('"student_t"', 'freedom = "3 m"', ["freedom is a length", "must be dimensionless"]),
    ],
)  # fmt: skip
def test_what_a_fit_cannot_keep(project, family, more, pieces):
    problems = project.problems((F_U, f'records = "bar_strength"\nfamily = {family}\n{more}'))
    told = "\n".join(str(p) for p in problems)
    assert {p.line for p in problems} <= {21, 22, 23, 24, 25}, told
    assert len(problems) == family.count('"') // 2, told
    for piece in pieces:
        assert piece in told


def test_what_a_fit_estimates(project):
    text = 'records = "bar_strength"\nfamily = ["weibull3", "lognormal"]\nestimate = "threshold"'
    variable = project.read((F_U, text)).variables["f_u"]
    assert variable.estimate == ("threshold",)
    assert variable.arguments == {}


def test_one_candidate_that_can_be_fitted_is_enough(project):
    study = project.read((F_U, 'records = "bar_strength"\nfamily = ["weibull3", "lognormal"]'))
    assert study.variables["f_u"].families == ("weibull3", "lognormal")


def test_bounds_without_unit_need_records_without_unit(project):
    without = ('f_uk = "500 MPa"', "f_uk = 5.0"), ('"mm^2"', '"kN"')
    beta = (F_U, 'records = "bar_strength"\nfamily = "beta"')
    assert project.read(*without, ('unit = "MPa"', 'unit = ""'), beta).variables["f_u"].families == ("beta",)
    (problem,) = project.problems(*without, ('unit = "MPa"', 'unit = "%"'), beta)
    assert "needs 'upper': its default 1 has no unit, the variable is in %" in problem.message


# ---------------------------------------------------------------- sets and bounds


@pytest.mark.parametrize(
    "text",
    [
        'family = "exponential"\nmean = 2',
        'family = "exponential"\nscale = 2',
        'family = "weibull3"\nmean = 2\ncov = 0.2\nthreshold = 0.5',
        'family = "gev"\nmean = 2\nsd = 0.2\nshape = 0.1',
        'family = "beta"\nshape_1 = 2\nshape_2 = 3',
        'family = "beta"\nshape_1 = 2\nshape_2 = 3\nlower = 0.5\nupper = 2',
        'family = "beta"\nmean = 0.4\ncov = 0.2\nlower = 0\nupper = 1',
        'family = "student_t"\nmean = 1\ncov = 0.2\nfreedom = 4',
        'family = "truncated_normal"\nlocation = 1\nscale = 0.2\nlower = 0.5\nupper = 2',
        'family = "uniform"\nlower = 0.5\nupper = 2',
        'family = "constant"\nvalue = 1.1',
        'family = "gumbel_min"\nmean = 1.1\ncov = 0.1',
        'family = "frechet"\nscale = 1.1\nshape = 6',
        'family = "gamma"\nmean = 1.1\nsd = 0.2',
        'family = "lognormal3"\nmedian = 1.1\nlog_sd = 0.2\nthreshold = 0.1',
    ],
)
def test_sets_of_arguments(project, text):
    variable = project.read((THETA, text)).variables["theta_R"]
    assert set(variable.arguments) == {line.split(" = ")[0] for line in text.split("\n")[1:]}


@pytest.mark.parametrize(
    ("text", "pieces"),
    [
        ('family = "weibull3"\nmean = 2\ncov = 0.2', ["gives mean, cov", "mean, cov and threshold"]),
        ('family = "constant"\nmean = 2', ["gives mean", "takes value"]),
        ('family = "uniform"\nlower = 2\nupper = 1', ["variables.theta_R", "lower"]),
        (
            'family = "lognormal"\nmean = -1\ncov = 0.1',
            ["variables.theta_R", "mean must be positive; got -1"],
        ),
        ('family = "lognormal"\nmean = 1\ncov = 1e300', ["variables.theta_R"]),
    ],
)
def test_sets_that_are_refused(project, text, pieces):
    problems = project.problems((THETA, text))
    assert [p.line in {25, 27} for p in problems] == [True], "\n".join(map(str, problems))
    for piece in pieces:
        assert piece in str(problems[0])


def test_default_bound_needs_a_unit(project):
    text = 'family = "beta"\nlower = "1 kN"\nshape_1 = 2\nshape_2 = 3'
    (problem,) = project.problems(('family = "normal"\n' + G, text))
    assert problem.line == 30
    assert "needs 'upper': its default 1 has no unit, the variable is a force" in problem.message


# --------------------------------------------------------------- the size of a rule

SECOND_RULE = """
[rules.second]
design_check = "{size} * f_uk / gamma_M{more} >= Q_k"
sizes = "{size}"
limit_state = "{size} * R_s{more} >= Q"

[factors]"""


def with_second_rule(size="A_d", more=""):
    return ("\n[factors]", SECOND_RULE.format(size=size, more=more))


R_S = (
    "[situations]\n",
    '[variables.R_s]\nfamily = "weibull"\nscale = "f_uk * (A_d / A_0)**-0.1"\nshape = 12\n\n[situations]\n',
)
A_0 = ('P = "100 kN"', 'P = "100 kN"\nA_0 = "100 mm^2"')


def test_model_that_depends_on_the_size(project):
    study = project.read(R_S, A_0, with_second_rule())
    variable = study.variables["R_s"]
    assert variable.arguments["scale"].depends_on("A_d")
    assert str(variable.dimension) == "mass/length/time²"
    assert study.rules["second"].variables == ("Q", "R_s")


def test_size_that_the_rule_does_not_have(project):
    (problem,) = project.problems(R_S, A_0, with_second_rule(size="B_d"))
    assert (
        "variables.R_s.scale uses the size 'A_d', but rules.second, which uses 'R_s', sizes 'B_d'"
        in problem.message
    )


def test_size_of_another_dimension(project):
    model = R_S[1].replace("shape = 12", 'shape = 12\nunit = "MPa"')
    (problem,) = project.problems((R_S[0], model), A_0, with_second_rule(more=" / A_0"))
    assert problem.message.startswith("variables.R_s.scale is in ")
    assert "but its unit is a stress" in problem.message


def test_size_may_repeat_between_rules_with_its_own_dimension(project):
    study = project.read(
        ("\n[factors]", SECOND_RULE.format(size="A_d", more=" / A_0").replace("R_s", "f_u")), A_0
    )
    assert str(study.size_dimensions["bar_rupture"]) == "length²"
    assert str(study.size_dimensions["second"]) == "length⁴"
    assert study.rules["second"].size_unit.text == "m^4"


def test_size_is_unknown_in_other_rules(project):
    (problem,) = project.problems(
        ("\n[factors]", SECOND_RULE.format(size="B_d", more="").replace("R_s", "f_u * A_d / A_d")), A_0
    )
    assert (
        "limit states may not use sizes of rules; 'A_d' is the size of a rule (rules.bar_rupture)"
        in problem.message
    )
    assert "only in its own rule" in str(problem)
