"""Penalties: values, derivatives, and convexity."""

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.factors import PENALTIES, make_penalty


@pytest.mark.parametrize("name", ["squared", "asymmetric"])
@given(r=st.floats(-3.0, 3.0))
def test_derivatives_are_exact(name, r):
    penalty = make_penalty(name)
    formula = {
        "squared": lambda t: t**2,
        "asymmetric": lambda t: t / mpmath.mpf(0.23) - 1 + mpmath.exp(-t / mpmath.mpf(0.23)),
    }[name]
    for order, method in enumerate((penalty.value, penalty.slope, penalty.curvature)):
        exact = float(mpmath.diff(formula, mpmath.mpf(r), order))
        assert method(np.array([r]))[0] == pytest.approx(exact, rel=1e-9, abs=1e-12)


def test_asymmetric_penalty_costs_more_below_the_target():
    penalty = make_penalty("asymmetric")
    below, above = penalty.value(np.array([-0.5, 0.5]))
    # (β − β_T)/d − 1 + exp(−(β − β_T)/d) with d = 0.23, by hand.
    assert below == pytest.approx(-0.5 / 0.23 - 1 + np.exp(0.5 / 0.23), rel=1e-14)
    assert above == pytest.approx(0.5 / 0.23 - 1 + np.exp(-0.5 / 0.23), rel=1e-14)
    assert below > 4 * above


def test_every_registered_penalty_is_zero_and_smallest_at_the_target():
    r = np.linspace(-2, 2, 41)
    for name in PENALTIES:
        values = make_penalty(name).value(r)
        assert values[20] == pytest.approx(0.0, abs=1e-15)
        assert (np.delete(values, 20) > 0).all()
        assert (np.diff(values, 2) > -1e-12).all()


def test_minimax_objective_is_the_largest_departure():
    assert (
        make_penalty("minimax").objective(np.array([0.1, -0.7, 0.3]), np.array([0.2, 0.0001, 0.7999])) == 0.7
    )


def test_unknown_penalty_and_bad_scale_are_refused():
    with pytest.raises(InputError, match=r"no penalty 'sqared'.*squared"):
        make_penalty("sqared")
    with pytest.raises(InputError, match="must be positive; got -1"):
        make_penalty("asymmetric", -1.0)
