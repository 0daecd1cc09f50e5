"""Texts of failure logic: what they mean, and what is refused, with the column."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.expressions.errors import ExpressionError
from calibrate.expressions.logic_parser import Gate, read_logic

KNOWN = ("yielding", "slip", "rupture")

# text, column (from 1), part of the message
REFUSED = [
    ("", 1, "empty"),
    (" \n\t", 1, "empty"),
    ("not slip", 1, "because a component holds"),
    ("slip and not rupture", 10, "because a component holds"),
    ("slip or Not rupture", 9, "because a component holds"),
    ("slip not rupture", 6, "because a component holds"),
    ("!slip", 1, "because a component holds"),
    ("~slip", 1, "because a component holds"),
    ("slip & rupture", 6, "Write 'and'"),
    ("slip && rupture", 6, "'&&'"),
    ("slip | rupture", 6, "Write 'or'"),
    ("slip || rupture", 6, "Write 'or'"),
    ("slip ∧ rupture", 6, "Write 'and'"),
    ("slip, rupture", 5, "'or' where one failure suffices"),
    ("slip + rupture", 6, "Write 'or'"),
    ("slip * rupture", 6, "Write 'and'"),
    ("[slip]", 1, "round brackets"),
    ("slip > 0", 6, "cannot be used"),
    ("slip or 2", 9, "numbers have no meaning"),
    ("slip.rupture", 5, "cannot be used"),
    ("_slip", 1, "begin with a letter"),
    ("slip or γ", 9, "letters A to Z"),
    ("slip\x00", 5, "number 0"),
    ("slip or 'rupture'", 9, "cannot be used"),
    ("slipp", 1, "Did you mean 'slip'"),
    ("Slip", 1, "Did you mean 'slip'"),
    ("slip and wxyz", 10, "Known: yielding, slip, rupture"),
    ("slip AND rupture", 6, "Write 'and'"),
    ("slip Or rupture", 6, "Write 'or'"),
    ("OR slip", 1, "small letters"),
    ("and slip", 1, "a name is expected"),
    ("slip or", 8, "ends"),
    ("slip or and rupture", 9, "a name is expected here, not 'and'"),
    ("slip rupture", 6, "'and' or 'or' is missing"),
    ("slip (rupture)", 6, "'and' or 'or' is missing"),
    ("(slip", 1, "never closed"),
    ("slip or (rupture and (yielding)", 9, "never closed"),
    ("slip)", 5, "closes nothing"),
    (")", 1, "not ')'"),
    ("()", 2, "not ')'"),
    ("if", 1, "reserved"),
    ("slip or lambda", 9, "reserved"),
    ("slip(rupture)", 5, "missing"),
    ("a" * 41, 1, "at most 40 characters"),
    ("(" * 41 + "slip" + ")" * 41, 41, "more than 40 deep"),
    ("slip or " * 260, 2001, "at most 2000 characters"),
    ("slip or " * 110 + "slip", 801, "at most 200 names"),
]


@pytest.mark.parametrize(("text", "column", "part"), REFUSED)
def test_refused_with_column_and_hint(text, column, part):
    with pytest.raises(ExpressionError) as caught:
        read_logic(text, KNOWN)
    assert caught.value.column == column
    assert part in str(caught.value)


def test_and_binds_more_strongly_than_or():
    expected = Gate("or", ("yielding", Gate("and", ("slip", "rupture"))))
    assert read_logic("yielding or slip and rupture", KNOWN) == expected
    assert read_logic("  yielding\nor (slip and\trupture) ", KNOWN) == expected


def test_brackets_bind_most_strongly():
    tree = read_logic("(yielding or slip) and rupture", KNOWN)
    assert tree == Gate("and", (Gate("or", ("yielding", "slip")), "rupture"))


def test_gates_of_one_kind_become_one():
    assert read_logic("(a or (b or c)) or d") == Gate("or", ("a", "b", "c", "d"))


def test_a_name_alone_is_a_system():
    assert read_logic("((slip))", KNOWN) == "slip"


def test_any_name_is_taken_where_none_is_known():
    assert read_logic("x1 and x_2") == Gate("and", ("x1", "x_2"))


def test_a_component_may_have_the_name_of_a_python_word():
    assert read_logic("del or slip", ("del", "slip")) == Gate("or", ("del", "slip"))


@given(st.text(alphabet="ab ()&andor!\n", max_size=40))
def test_every_text_is_read_or_refused(text):
    column = None
    try:
        read_logic(text)
    except InputError as error:
        column = error.column
    assert column is None or 1 <= column <= len(text) + 1
