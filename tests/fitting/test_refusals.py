"""What is refused, with which words, and what is only doubted."""

import warnings

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.fitting import compare, fit, fit_family

SOME = [3.1, 4.7, 2.2, 5.9, 3.8, 4.1, 2.9, 6.3, 4.4, 3.5, 5.2, 4.9]


@pytest.mark.parametrize(
    ("name", "given", "estimate", "k"),
    [
        ("exponential", {}, (), 1),
        ("normal", {"location": 4.0}, (), 1),
        ("normal", {}, (), 2),
        ("uniform", {}, (), 2),
        ("beta", {"upper": 9.0}, (), 2),
        ("weibull3", {"threshold": 0.0}, (), 2),
        ("weibull3", {}, ("threshold",), 3),
        ("gev", {}, (), 3),
        ("student_t", {}, (), 3),
    ],
)
@pytest.mark.parametrize("method", ["likelihood", "moments"])
def test_one_value_more_than_parameters(name, given, estimate, k, method):
    if method == "moments" and "location" in given:
        method = "likelihood"
    plural = "parameter" if k == 1 else "parameters"
    with pytest.raises(InputError) as error:
        fit_family(SOME[:k], name, fixed=given, estimate=estimate, method=method)
    assert str(error.value) == (
        f"The family '{name}' needs at least {k + 1} values, one more than it has {plural} to estimate; "
        f"the sample has {k}."
    )
    fit_family(SOME[: k + 1], name, fixed=given, estimate=estimate, method=method)


@pytest.mark.parametrize(("n", "doubted"), [(4, True), (9, True), (10, False)])
def test_fewer_than_ten_values_are_a_doubt(n, doubted):
    doubts = fit_family(SOME[:n], "normal").doubts
    assert [d.code for d in doubts] == (["few-values"] if doubted else [])
    if doubted:
        assert doubts[0].message.startswith(f"Only {n} values:")
        assert doubts[0].where == "fit.normal"


@pytest.mark.parametrize("value", [7.0, -7.0, 0.0, 0.1])
@pytest.mark.parametrize("name", ["normal", "gumbel", "uniform", "gev", "student_t"])
def test_equal_values_have_no_fit(name, value):
    found = fit_family([value] * 6, name)
    assert found.status == "failed"
    assert found.reason.startswith("all values are equal")


def test_equal_values_fit_an_exponential_family():
    assert fit_family([7.0] * 6, "exponential").parameters == {"scale": pytest.approx(7.0)}


def test_equal_values_end_a_public_fit():
    with pytest.raises(
        InputError, match=r"^The family 'normal' cannot be fitted: all values are equal, .*\.$"
    ):
        fit([7.0] * 6, "normal")


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ([], "There are no values."),
        ([1.0, float("nan"), 2.0], "Value 2 of 3 is nan; all must be finite."),
        ([1.0, 2.0, float("inf")], "Value 3 of 3 is inf; all must be finite."),
        ([1.0, 2.0, float("-inf")], "Value 3 of 3 is -inf; all must be finite."),
        ([[1.0, 2.0], [3.0, 4.0]], "The values must be one row of numbers; they have 2 dimensions."),
        (4.0, "The values must be one row of numbers; they have 0 dimensions."),
        (["a", "b"], "The values must be numbers."),
        ([1.0, [2.0, 3.0]], "The values must be numbers."),
        ([1.0, 2.0, 3j], "The values must be numbers."),
        (np.array([1.0, 2.0, 3j]), "The values must be numbers."),
        (["1.0", "2.0", "3.0"], "The values must be numbers."),
        ([True, False, True], "The values must be numbers."),
        (np.array([1.0, "2.0", {}], dtype=object), "The values must be numbers."),
        (np.array([1.0, None], dtype=object), "Value 2 of 2 is nan; all must be finite."),
        (None, "The values must be one row of numbers; they have 0 dimensions."),
    ],
)
@pytest.mark.parametrize("call", [fit_family, fit, lambda values, name: compare(values, [name])])
def test_what_is_no_sample(call, values, message):
    with pytest.raises(InputError) as error:
        call(values, "normal")
    assert str(error.value) == message


ABOVE_ZERO = ["lognormal", "weibull", "frechet", "gamma"]


@pytest.mark.parametrize(
    ("name", "given", "bad", "message"),
    [
        *((n, {}, [-1.5, 0.0], "values above zero; 2 values are not, the smallest -1.5") for n in ABOVE_ZERO),
        *((n, {}, [0.0], "values above zero; 1 value is not, the smallest 0") for n in ABOVE_ZERO),
        ("exponential", {}, [-1.5], "holds only values from zero up; the smallest is -1.5"),
        ("weibull3", {"threshold": 2.2}, [], "above its threshold 2.2; 1 value is not, the smallest 2.2"),
        ("lognormal3", {"threshold": 3.0}, [], "above its threshold 3; 2 values are not, the smallest 2.2"),
        ("beta", {}, [], "holds only values between 0 and 1; 12 values are not, for example 3.1"),
        ("beta", {"lower": 2.0, "upper": 6.3}, [], "between 2 and 6.3; 1 value is not, for example 6.3"),
        ("truncated_normal", {"lower": 2.5}, [], "between 2.5 and inf; 1 value is not, for example 2.2"),
        ("truncated_normal", {}, [], "it needs a bound: give lower, upper or both"),
        ("truncated_normal", {"lower": 9.0, "upper": 1.0}, [], "its bounds 9 and 1 leave nothing between them"),
        ("uniform", {"lower": 2.5}, [], "between 2.5 and inf; 1 value is not, for example 2.2"),
    ],
)  # fmt: skip
def test_values_that_the_family_cannot_hold(name, given, bad, message):
    with pytest.raises(InputError) as error:
        fit_family([*bad, *SOME], name, fixed=given)
    assert str(error.value).startswith(f"The family '{name}' cannot be fitted: ")
    assert message in str(error.value)


@pytest.mark.parametrize(
    ("name", "suggestion"),
    [("lognormol", "lognormal"), ("Gumbel", "gumbel"), ("weibul", "weibull"), ("student-t", "student_t")],
)
def test_unknown_family(name, suggestion):
    for call in (fit_family, lambda v, n: compare(v, ["normal", n]), lambda v, n: fit(v, [n])):
        with pytest.raises(InputError) as error:
            call(SOME, name)
        (problem,) = error.value.problems
        assert problem.message == f"There is no family '{name}'."
        assert problem.suggestion.startswith(f"Did you mean '{suggestion}'?")
        assert "Known: normal, lognormal," in problem.suggestion


def test_family_that_resembles_none():
    with pytest.raises(InputError) as error:
        fit_family(SOME, "zzz")
    assert str(error.value).count("Known:") == 1


def test_constant_cannot_be_fitted():
    with pytest.raises(InputError, match="has no scatter"):
        fit_family(SOME, "constant")


@pytest.mark.parametrize(
    ("name", "options", "message"),
    [
        ("normal", {"method": "momens"}, "There is no method 'momens'. Did you mean 'moments'?"),
        ("normal", {"fixed": {"locatio": 1.0}}, "has no parameter 'locatio'. Did you mean 'location'?"),
        ("normal", {"estimate": ["threshold"]}, "has no parameter 'threshold'."),
        (
            "normal",
            {"fixed": {"scale": -1.0}},
            "The parameter 'scale' of 'normal' must be positive; got -1.0.",
        ),
        ("normal", {"fixed": {"scale": float("nan")}}, "must be positive; got nan."),
        ("normal", {"fixed": {"scale": "big"}}, "must be positive; got 'big'."),
        ("normal", {"fixed": {"scale": True}}, "must be positive; got True."),
        ("normal", {"fixed": {"location": 4.0, "scale": 1.0}}, "All parameters of 'normal' are fixed;"),
        ("weibull3", {}, "The family 'weibull3' needs its threshold."),
        (
            "weibull3",
            {"fixed": {"threshold": 0.0}, "estimate": ["threshold"]},
            "both fixed and to be estimated.",
        ),
        ("beta", {"estimate": ["lower"]}, "The parameter 'lower' of 'beta' cannot be estimated."),
    ],
)
def test_choice_of_parameters(name, options, message):
    with pytest.raises(InputError) as error:
        fit_family(SOME, name, **options)
    assert message in str(error.value)


def test_all_problems_at_once():
    with pytest.raises(InputError) as error:
        fit_family(SOME, "beta", fixed={"shape_1": -1.0, "lower": float("nan")}, estimate=["upper"])
    assert len(error.value.problems) == 3


@pytest.mark.parametrize("families", [[], ()])
def test_no_candidates(families):
    with pytest.raises(InputError, match="No family is named"):
        compare(SOME, families)


def test_parameter_that_no_candidate_has():
    with pytest.raises(
        InputError, match=r"None of the families has a parameter 'shap'. Did you mean 'shape'\?"
    ):
        compare(SOME, ["weibull", "gamma"], fixed={"shap": 2.0})


def test_no_candidate_can_take_the_values():
    with pytest.raises(InputError) as error:
        compare([-1.0, 2.0, 3.0, 4.0], ["lognormal", "weibull"])
    assert len(error.value.problems) == 2


def test_sample_is_copied_and_read_only():
    values = np.array(SOME)
    found = fit_family(values, "normal")
    values[0] = 99.0
    assert found.values[0] == SOME[0]
    with pytest.raises(ValueError, match="read-only"):
        found.values[0] = 1.0
    with pytest.raises(ValueError, match="read-only"):
        found.covariance[0, 0] = 1.0


def test_integers_are_values():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert fit_family(np.array([1, 2, 3, 4]), "normal").parameters["location"] == pytest.approx(2.5)
