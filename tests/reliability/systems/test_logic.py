"""Failure logic against truth tables."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.expressions.errors import ExpressionError
from calibrate.reliability.systems import failure_logic, parallel, series
from calibrate.reliability.systems.cubes import (
    cubes,
    deciding,
    deciding_together,
    failure,
    survival,
)

NAMES = "abcde"


def trees():
    return st.recursive(
        st.sampled_from(NAMES),
        lambda inner: st.tuples(
            st.sampled_from([" and ", " or "]), st.lists(inner, min_size=2, max_size=3)
        ).map(lambda pair: "(" + pair[0].join(pair[1]) + ")"),
        max_leaves=8,
    )


def truth(logic, state):
    """Evaluate the normalised text by Python, whose 'and' and 'or' are the witness."""
    return eval(logic.text, {"__builtins__": {}}, dict(zip(logic.names, state, strict=True)))


def states(k):
    return list(itertools.product((False, True), repeat=k))


def test_cut_and_path_sets_by_hand():
    logic = failure_logic("yielding or (slip and rupture)")
    assert logic.names == ("yielding", "slip", "rupture")
    assert logic.cut_sets == ((0,), (1, 2))
    assert logic.path_sets == ((0, 1), (0, 2))
    assert logic.text == "yielding or (slip and rupture)"
    assert not logic.is_series
    assert not logic.is_parallel


def test_absorption():
    assert failure_logic("a or a and b").cut_sets == ((0,),)
    assert failure_logic("(a or b) and (a or c)").cut_sets == ((0,), (1, 2))


def test_two_out_of_three():
    logic = failure_logic("a and b or a and c or b and c")
    assert logic.cut_sets == logic.path_sets == ((0, 1), (0, 2), (1, 2))


def test_series_and_parallel():
    assert series(("x", "y")).is_series
    assert series(("x", "y")).cut_sets == ((0,), (1,))
    assert parallel(("x", "y")).is_parallel
    assert series(("x",)).is_parallel


def test_unknown_name():
    with pytest.raises(ExpressionError, match="Did you mean 'slip'"):
        failure_logic("slop or rupture", ("slip", "rupture"))


def test_too_many_cut_sets():
    text = " and ".join(f"(a{i} or b{i})" for i in range(9))
    with pytest.raises(InputError, match="more than 200 cut sets"):
        failure_logic(text)


@given(trees())
def test_sets_and_margins_agree_with_the_truth_table(text):
    logic = failure_logic(text)
    assert failure_logic(logic.text) == logic
    for state in states(len(logic.names)):
        expected = truth(logic, state)
        assert any(all(state[i] for i in s) for s in logic.cut_sets) == expected
        assert any(all(not state[i] for i in s) for s in logic.path_sets) == (not expected)
        assert bool(logic.fails(state)) == expected


@given(trees())
def test_cubes_are_disjoint_and_make_up_failure_and_its_differences(text):
    logic = failure_logic(text)
    k = len(logic.names)
    sets = frozenset(frozenset(s) for s in logic.cut_sets)

    def counted(terms, state):
        hits = [
            c.weight
            for c in cubes(terms)
            if all(state[i] for i in c.failed) and not any(state[i] for i in c.held)
        ]
        assert len(hits) <= 1
        return sum(hits)

    def fails(state, **changes):
        return int(truth(logic, [changes.get(f"c{i}", s) for i, s in enumerate(state)]))

    for state in states(k):
        assert counted(failure(sets), state) == fails(state)
        assert counted(survival(sets), state) == 1 - fails(state)
        one = counted(deciding(sets, 0), state)
        assert one == fails(state, c0=True) - fails(state, c0=False)
        if k > 1:
            expected = sum(
                (1 if a == b else -1) * fails(state, c0=a, c1=b) for a in (True, False) for b in (True, False)
            )
            assert counted(deciding_together(sets, 0, 1), state) == expected


def test_margin_is_least_of_or_and_greatest_of_and():
    logic = failure_logic("a or (b and c)")
    g, active = logic.active(
        [np.array([1.0, 5.0, 3.0]), np.array([2.0, -1.0, 3.0]), np.array([3.0, 2.0, 1.0])]
    )
    assert g.tolist() == [1.0, 2.0, 3.0]
    # Of equal margins the component that is named first.
    assert active.tolist() == [0, 2, 0]


@pytest.mark.parametrize("text", ["a or b", "a and b"])
def test_nan_of_a_component_is_no_margin(text):
    logic = failure_logic(text)
    g = logic.margin([np.array([np.nan, 1.0, 1.0]), np.array([1.0, np.nan, 2.0])])
    assert np.isnan(g).tolist() == [True, True, False]


def test_too_many_cases():
    # Five of twelve: each of the 792 ways to complete five failures is a case of its own.
    sets = frozenset(frozenset(s) for s in itertools.combinations(range(12), 5))
    with pytest.raises(InputError, match="more than 500 cases"):
        cubes(failure(sets))
