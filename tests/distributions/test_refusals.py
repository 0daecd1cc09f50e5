"""What is refused, and in which words: the value, what is allowed, and what to do instead."""

import numpy as np
import pytest

from calibrate.distributions import distribution, family, family_names, maximum_of, minimum_of
from calibrate.errors import InputError

from .cases import CASES

NUMBER = "must be a number or an array of numbers"

REFUSED = [  # family, arguments, words of the message
    ("normal", {"mean": 1.0}, "cov or sd is missing. It takes mean and cov; mean and sd; or location and scale."),
    ("normal", {"cov": 0.1}, "mean is missing"),
    ("normal", {"location": 1.0}, "scale is missing"),
    ("normal", {}, "location and scale are missing"),
    ("normal", {"mean": 1.0, "cov": 0.1, "sd": 0.1}, "cov and sd are both given. Give one of them."),
    ("normal", {"mean": 1.0, "cov": 0.1, "location": 1.0}, "mean and cov cannot be given together with location"),
    ("normal", {"mean": 1.0, "cov": 0.0}, "cov must be positive; got 0. Use the family 'constant'"),
    ("normal", {"mean": 1.0, "sd": 0.0}, "sd must be positive; got 0. Use the family 'constant'"),
    ("normal", {"mean": 1.0, "cov": -0.1}, "cov must be positive; got -0.1."),
    ("normal", {"mean": 0.0, "cov": 0.1}, "mean must be different from zero when cov is given; got 0. Give sd"),
    ("normal", {"mean": np.nan, "sd": 0.1}, "mean must be a finite number; got nan."),
    ("normal", {"mean": np.inf, "sd": 0.1}, "mean must be a finite number; got inf."),
    ("normal", {"mean": "1 kN", "sd": 0.1}, f"mean {NUMBER}; got '1 kN'."),
    ("normal", {"mean": None, "sd": 0.1}, f"mean {NUMBER}; got None."),
    ("normal", {"mean": True, "sd": 0.1}, f"mean {NUMBER}; got True."),
    ("normal", {"mean": 1j, "sd": 0.1}, f"mean {NUMBER}; got 1j."),
    ("normal", {"mean": [1.0, [2.0, 3.0]], "sd": 0.1}, f"mean {NUMBER}; got [1.0, [2.0, 3.0]]."),
    ("normal", {"mean": ["a long text"] * 9, "sd": 0.1}, "...."),
    ("normal", {"mean": [1.0, 2.0], "sd": [1.0, 2.0, 3.0]}, "differ in their number of situations: mean 2, sd 3."),
    ("normal", {"location": 0.0, "scale": [1.0, -2.0, 0.0]}, "scale must be positive; got -2 in situation 2."),
    ("normal", {"mean": 1.0, "stdev": 0.1}, "unknown argument 'stdev'. Did you mean 'sd'?"),
    ("normal", {"mean": 1.0, "CV": 0.1}, "unknown argument 'CV'. Did you mean 'cov'?"),
    ("normal", {"location": 1.0, "scal": 0.1}, "unknown argument 'scal'. Did you mean 'scale'?"),
    ("student_t", {"location": 1.0, "scale": 0.1, "dof": 3.0}, "Did you mean 'freedom'?"),
    ("normal", {"mean": 1.0, "zzz": 0.1}, "unknown argument 'zzz'. Known: mean, cov, sd, location, scale."),
    ("lognormal", {"mean": -1.0, "cov": 0.1}, "mean must be positive; got -1. Use a family without that limit"),
    ("gamma", {"shape": [1.0, 2.0, -1.0], "scale": 1.0}, "shape must be positive; got -1 in situation 3."),
    ("gev", {"mean": 1.0, "cov": 0.1}, "shape is missing"),
    ("gev", {"mean": 1.0, "cov": 0.1, "shape": 0.5}, "shape must be less than 0.5 where mean and sd are given"),
    ("gev", {"mean": 1.0, "cov": 0.1, "shape": [0.1, 0.7]}, "got 0.7 in situation 2."),
    ("student_t", {"mean": 1.0, "cov": 0.1, "freedom": 2.0}, "freedom must be greater than 2 where mean and sd"),
    ("weibull3", {"mean": 1.0, "cov": 0.1, "threshold": 1.0}, "mean must be greater than the threshold; got 1."),
    ("lognormal3", {"mean": 1.0, "cov": 0.1}, "threshold is missing"),
    ("uniform", {"lower": 2.0, "upper": 1.0}, "lower must be less than upper (1); got 2. Are the bounds reversed?"),
    ("uniform", {"lower": 1.0, "upper": 1.0}, "lower must be less than upper (1); got 1."),
    ("uniform", {"lower": [0.0, 2.0], "upper": [1.0, 1.5]}, "less than upper (1.5); got 2 in situation 2."),
    ("beta", {"mean": 2.0, "cov": 0.1}, "mean must be between the bounds 0 and 1; got 2."),
    ("beta", {"mean": [0.5, 3.0], "cov": 0.1}, "between the bounds 0 and 1; got 3 in situation 2."),
    ("beta", {"mean": 0.5, "sd": 0.5}, "sd must be less than 0.5 for this mean and these bounds; got 0.5."),
    ("beta", {"mean": 0.5, "sd": 0.1, "lower": 1.0, "upper": 0.0}, "lower must be less than upper (0); got 1."),
    ("truncated_normal", {"mean": 1.0, "cov": 1.1, "lower": 0.0}, "sd must be less than 1 for this mean"),
    ("truncated_normal", {"mean": 1.0, "cov": 0.1, "lower": 2.0}, "mean must be between the bounds 2 and inf; got 1."),
    ("truncated_normal", {"location": 0.0, "scale": 1.0, "lower": np.nan}, "lower must be a number; got nan."),
    ("truncated_normal", {"location": -9e3, "scale": 1.0, "lower": 0.0}, "Consider the family 'exponential'."),
    ("constant", {"mean": 1.0}, "mean cannot be given. It takes value."),
    ("constant", {"value": np.inf}, "value must be a finite number; got inf."),
    ("exponential", {"mean": 1.0, "cov": 1.0}, "cov cannot be given. It takes mean; or scale."),
]  # fmt: skip


@pytest.mark.parametrize(("name", "arguments", "words"), REFUSED)
def test_arguments_are_refused_in_clear_words(name, arguments, words):
    with pytest.raises(InputError) as caught:
        distribution(name, **arguments)
    assert words in str(caught.value)
    assert str(caught.value).startswith(f"{name}: ")
    assert len(caught.value.problems) == 1


@pytest.mark.parametrize("bad", [0.0, -1.0, np.nan, np.inf])
@pytest.mark.parametrize(
    ("name", "parameter"),
    [(n, q.name) for n in family_names() for q in family(n).parameters if q.domain.low == 0.0],
)
def test_no_family_takes_a_scale_or_shape_that_is_not_positive(name, parameter, bad):
    own = dict(zip(family(name).parameter_names, CASES[name][0], strict=True))
    with pytest.raises(InputError, match=f"^{name}: {parameter} must be positive; got {bad:g}"):
        distribution(name, **{**own, parameter: bad})


@pytest.mark.parametrize("name", [n for n in family_names() if len(family(n).moment_names) == 2])
@pytest.mark.parametrize("scatter", [{"cov": 0.0}, {"cov": -0.2}, {"sd": 0.0}, {"sd": -1.0}, {"cov": np.nan}])
def test_no_family_takes_scatter_that_is_not_positive(name, scatter):
    kept = {q.name: q.default or 0.3 for q in family(name).parameters if q.name in family(name).moments_keep}
    (argument,) = scatter
    with pytest.raises(InputError, match=f"{argument} must be positive"):
        distribution(name, mean=0.5, **scatter, **kept)


def test_everything_that_is_wrong_is_told_at_once():
    with pytest.raises(InputError) as caught:
        distribution("gumbel", mean="x", cov=-0.1, foo=2.0)
    assert [p.message.split(";")[0] for p in caught.value.problems] == [
        "gumbel: unknown argument 'foo'.",
        f"gumbel: mean {NUMBER}",
        "gumbel: cov must be positive",
    ]


@pytest.mark.parametrize(
    ("wrong", "hint"), [("nomal", "'normal'"), ("Weibull", "'weibull'"), ("qqq", "Known: normal")]
)
def test_an_unknown_family_is_answered_with_the_nearest_and_all(wrong, hint):
    with pytest.raises(InputError, match=f"there is no family '{wrong}'") as caught:
        distribution(wrong, mean=1.0, cov=0.1)
    assert hint in str(caught.value)
    assert all(n in str(caught.value) for n in family_names())


def test_a_name_that_is_no_text_is_an_unknown_family():
    for wrong in (None, ["normal"], 3):
        with pytest.raises(InputError, match="there is no family"):
            family(wrong)


@pytest.mark.parametrize("extreme", [maximum_of, minimum_of])
@pytest.mark.parametrize(
    ("ratio", "words"),
    [
        (0.0, "the ratio of periods must be positive and finite; got 0."),
        (-2.0, "got -2."),
        (np.nan, "got nan."),
        (np.inf, "got inf."),
        ([1.0, 0.0], "got 0 in situation 2."),
        ("50 years", f"ratio {NUMBER}; got '50 years'."),
    ],
)
def test_ratios_that_are_not_positive_are_refused(extreme, ratio, words):
    with pytest.raises(InputError) as caught:
        extreme(distribution("gumbel", mean=1.0, cov=0.1), ratio)
    assert words in str(caught.value)


def test_families_without_moments_say_so():
    constant = family("constant")
    for attempt in (lambda: constant.moment_slopes(()), lambda: constant.from_moments(None)):
        with pytest.raises(InputError, match="constant: moments are not taken"):
            attempt()
