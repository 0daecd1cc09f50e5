"""Bounds of unions against events whose union is counted exactly."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.reliability.systems import ditlevsen_bounds, simple_bounds


@st.composite
def events(draw):
    """Return random events over 40 outcomes with random weights: probabilities, pairs, union."""
    rng = np.random.default_rng(draw(st.integers(0, 100_000)))
    c = draw(st.integers(1, 6))
    weight = rng.dirichlet(np.ones(40))
    inside = rng.random((c, 40)) < rng.uniform(0.02, 0.5)
    single = (inside * weight).sum(axis=1)
    pair = ((inside[:, None] & inside[None]) * weight).sum(axis=2)
    union = (inside.any(axis=0) * weight).sum()
    return single[:, None], pair[:, :, None], union


@given(events())
def test_bounds_contain_the_union_and_narrow(case):
    single, pair, union = case
    lower, upper = ditlevsen_bounds(single, pair)
    wide_lower, wide_upper = simple_bounds(single)
    rounding = 1e-12
    assert wide_lower - rounding <= lower <= union + rounding
    assert union - rounding <= upper <= wide_upper + rounding


@given(events())
def test_order_of_the_events_does_not_matter(case):
    single, pair, _ = case
    order = np.arange(len(single))[::-1]
    first = ditlevsen_bounds(single, pair)
    second = ditlevsen_bounds(single[order], pair[np.ix_(order, order)])
    np.testing.assert_allclose(first, second, rtol=1e-12, atol=1e-15)


def test_two_events_are_exact():
    single = np.array([[3e-4], [2e-4]])
    pair = np.array([[[0.0], [5e-5]], [[5e-5], [0.0]]])
    np.testing.assert_allclose(ditlevsen_bounds(single, pair), 4.5e-4, rtol=1e-14)


def test_heaviest_tree_by_hand():
    """The pairs 3 and 2 form the best tree; 1 would close a ring, as the order of the events 1, 2, 3 has it."""
    single = np.full((3, 1), 10.0) / 100.0
    pair = np.array([[0.0, 1.0, 2.0], [1.0, 0.0, 3.0], [2.0, 3.0, 0.0]])[:, :, None] / 100.0
    lower, upper = ditlevsen_bounds(single, pair)
    assert upper[0] == pytest.approx(0.25, rel=1e-14)
    # 10 + (10 - 1) + (10 - 2 - 3)
    assert lower[0] == pytest.approx(0.24, rel=1e-14)


def test_independence_bounds_what_is_associated():
    single = np.array([[1e-12, 0.3], [2e-12, 0.4]])
    lower, upper = simple_bounds(single, np.array([True, True]))
    np.testing.assert_allclose(upper, [3e-12, 0.58], rtol=1e-11)
    np.testing.assert_allclose(lower, [2e-12, 0.4])
    assert simple_bounds(np.array([[0.7], [0.6]]))[1][0] == 1.0
