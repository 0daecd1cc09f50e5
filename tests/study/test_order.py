"""Order of dependence and cycles, against definitions that hold by construction."""

import itertools

from hypothesis import given
from hypothesis import strategies as st

from calibrate.study.reading.order import dependence_order


def test_order_of_the_file_where_it_is_free():
    assert dependence_order({"b": [], "a": [], "c": ["a"]}) == (["b", "a", "c"], [])
    assert dependence_order({"c": ["a", "elsewhere"], "b": [], "a": []}) == (["b", "a", "c"], [])


def test_cycles_are_closed_walks():
    order, cycles = dependence_order({"a": ["b"], "b": ["c"], "c": ["a"], "d": ["a"], "e": [], "f": ["f"]})
    assert order == ["e"]
    assert cycles == [["a", "b", "c", "a"], ["f", "f"]]


def test_names_that_only_lead_into_a_cycle_belong_to_neither():
    assert dependence_order({"x": ["a"], "a": ["b"], "b": ["a"]}) == ([], [["a", "b", "a"]])


def test_shortest_way_round():
    _, cycles = dependence_order({"a": ["b", "d"], "b": ["c"], "c": ["a"], "d": ["a"]})
    assert cycles[0] == ["a", "d", "a"]


def test_long_chains_take_no_time():
    n = 100_000
    order, cycles = dependence_order({f"q{i}": [f"q{i + 1}"] for i in range(n)})
    assert order[0] == f"q{n - 1}"
    assert cycles == []


@given(st.dictionaries(st.sampled_from("abcdefgh"), st.lists(st.sampled_from("abcdefghij"), max_size=3)))
def test_any_definitions(uses):
    order, cycles = dependence_order(uses)
    for i, name in enumerate(order):
        assert all(u in order[:i] for u in uses[name] if u in uses)
    for walk in cycles:
        assert walk[0] == walk[-1]
        assert all(b in uses[a] for a, b in itertools.pairwise(walk))
    assert bool(cycles) == (len(order) < len(uses))
