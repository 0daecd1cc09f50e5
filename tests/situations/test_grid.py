"""Grids, weights, and basic variables over situations."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.distributions import Extreme, distribution
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.situations import Axis, BasicVariable, full_factorial, is_converted, normalised_weights
from calibrate.units import parse_unit


def axis(name, *values):
    return Axis(name, np.array(values), parse_unit(""))


def test_last_axis_varies_fastest():
    columns = full_factorial([axis("a", 1.0, 2.0), axis("b", 5.0, 6.0, 7.0)])
    assert columns["a"].tolist() == [1, 1, 1, 2, 2, 2]
    assert columns["b"].tolist() == [5, 6, 7, 5, 6, 7]
    assert full_factorial([]) == {}


@given(st.lists(st.floats(0, 1e300), min_size=1, max_size=20).filter(lambda w: max(w) > 0))
def test_weights_sum_to_one_and_keep_their_ratios(raw):
    weight = normalised_weights(raw, len(raw))
    assert weight.sum() == pytest.approx(1.0, rel=1e-14)
    largest = int(np.argmax(raw))
    np.testing.assert_allclose(
        weight / weight[largest], np.array(raw) / raw[largest], rtol=1e-13, atol=1e-300
    )


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        ([1.0, -0.5, 2.0], "situation 2 has -0.5"),
        ([1.0, 1.0, np.nan], "situation 3 has nan"),
        ([np.inf, 1.0, 1.0], "situation 1 has inf"),
        (0.0, "All weights are zero"),
    ],
)
def test_bad_weights_are_refused(raw, words):
    with pytest.raises(InputError, match=words):
        normalised_weights(raw, 3)


def model(family="gumbel", ratio=1.0, **texts):
    return BasicVariable("Q", family, {k: parse(v) for k, v in texts.items()}, ratio)


def test_moments_follow_the_situation_and_the_period():
    q_k = np.array([1.0, 3.0])
    annual = model(mean="0.6 * Q_k", cov="0.35").distribution({"Q_k": q_k})
    np.testing.assert_allclose(annual.mean, 0.6 * q_k, rtol=1e-14)
    fifty = model(mean="0.6 * Q_k", cov="0.35", ratio=50.0).distribution({"Q_k": q_k})
    # Closed form: a Gumbel maximum moves by scale · ln n.
    scale = 0.35 * 0.6 * q_k * np.sqrt(6) / np.pi
    np.testing.assert_allclose(fifty.mean, 0.6 * q_k + scale * np.log(50), rtol=1e-13)
    assert not is_converted(annual)
    assert not is_converted(fifty)  # a Gumbel maximum is a Gumbel variable again
    lognormal = model("lognormal", 50.0, mean="Q_k", cov="0.2").distribution({"Q_k": q_k})
    assert isinstance(lognormal, Extreme)
    assert is_converted(lognormal)


@pytest.mark.parametrize("family", ["normal", "lognormal", "gumbel", "weibull", "gamma"])
@pytest.mark.parametrize("ratio", [1.0, 12.5])
def test_slope_by_the_size_agrees_with_differences(family, ratio):
    variable = model(family, ratio, mean="3 + z**2", cov="0.1 + 0.02 * z")
    u = np.array([-4.0, -0.3, 0.0, 2.5, 6.0])
    z = np.array([0.5, 1.0, 1.5, 2.0, 2.5])
    slope = variable.slope(variable.distribution({"z": z}), u, {"z": z}, "z")
    h = 1e-5
    up, down = (variable.distribution({"z": z + d}).x(u) for d in (h, -h))
    np.testing.assert_allclose(slope, (up - down) / (2 * h), rtol=1e-7)


def test_a_model_without_the_name_has_no_slope():
    variable = model("normal", mean="a", sd="0.1 * a")
    assert variable.slope(distribution("normal", mean=1.0, sd=0.1), np.zeros(1), {"a": 1.0}, "z") is None


def test_a_model_without_meaning_names_variable_and_value():
    with pytest.raises(InputError, match="Variable 'Q'"):
        model("lognormal", mean="Q_k", cov="0.2").distribution({"Q_k": np.array([1.0, -2.0])})


@pytest.mark.parametrize("family", ["weibull", "lognormal", "normal"])
def test_weakest_link_follows_the_size_and_its_slope(family):
    from calibrate.expressions import parse as expression

    variable = BasicVariable(
        "f", family, {"mean": expression("40"), "cov": expression("0.15")}, size_ratio=expression("z**2 / 4")
    )
    z = np.array([1.0, 2.0, 3.0, 6.0])
    u = np.array([-4.0, -1.0, 0.5, 3.0])
    model = variable.distribution({"z": z})
    if family == "weibull":
        # The closed form of Weibull's weakest link: strength falls with (A1/A2)^(1/m).
        base = distribution("weibull", mean=40.0, cov=0.15)
        m = float(base.parameters["shape"])
        np.testing.assert_allclose(model.x(u), base.x(u) * (z**2 / 4) ** (-1 / m), rtol=1e-10)
    h = 1e-5
    up, down = (variable.distribution({"z": z + d}).x(u) for d in (h, -h))
    np.testing.assert_allclose(variable.slope(model, u, {"z": z}, "z"), (up - down) / (2 * h), rtol=1e-6)
