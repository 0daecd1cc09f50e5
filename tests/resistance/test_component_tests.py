"""Component tests: what is accepted, and refusals that name the rows."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.resistance import ComponentTests

EXPERIMENTAL = [110.0, 122.0, 147.0, 151.0, 169.0]
PREDICTED = [102.0, 119.0, 132.0, 145.0, 150.0]


def messages(**columns):
    with pytest.raises(InputError) as caught:
        ComponentTests(**{"experimental": EXPERIMENTAL, "predicted": PREDICTED, **columns})
    return [str(p) for p in caught.value.problems]


def test_plain_columns_become_arrays_that_cannot_be_written_to():
    tests = ComponentTests(EXPERIMENTAL, PREDICTED, inputs={"t": [1, 2, 3, 4, 5]})
    assert tests.n == tests.n_failed == 5
    assert not tests.survived.any()
    assert tests.inputs["t"].dtype == np.float64
    np.testing.assert_array_equal(tests.rows, [1, 2, 3, 4, 5])
    np.testing.assert_allclose(tests.ratio, np.array(EXPERIMENTAL) / PREDICTED, rtol=1e-15)
    with pytest.raises(ValueError, match="read-only"):
        tests.experimental[0] = 1.0


def test_columns_are_copied():
    given = np.array(EXPERIMENTAL)
    tests = ComponentTests(given, PREDICTED)
    given[0] = -1.0
    assert tests.experimental[0] == EXPERIMENTAL[0]


def test_survivors_are_counted_apart():
    tests = ComponentTests(EXPERIMENTAL, PREDICTED, survived=[False, True, False, False, True])
    assert (tests.n, tests.n_failed) == (5, 3)


def test_subgroups_come_in_the_order_of_their_first_test_and_keep_their_rows():
    tests = ComponentTests(
        EXPERIMENTAL, PREDICTED, subgroup=["b", "a", "b", "b", "b"], inputs={"t": [1, 2, 3, 4, 5]}
    )
    assert tests.subgroups == ("b", "a")
    part = tests.taken(tests.in_subgroup("b"))
    np.testing.assert_array_equal(part.rows, [1, 3, 4, 5])
    np.testing.assert_array_equal(part.inputs["t"], [1, 3, 4, 5])
    assert part.subgroups == ("b",)


def test_a_part_names_the_rows_of_the_whole():
    tests = ComponentTests(EXPERIMENTAL, PREDICTED, rows=[12, 13, 15, 16, 20])
    with pytest.raises(InputError, match="are 3 tests"):
        tests.taken([0, 1, 2])
    assert messages(predicted=[102.0, 119.0, -3.0, 145.0, 150.0], rows=[12, 13, 15, 16, 20]) == [
        "The predicted resistance in row 15 is -3; it must be above zero."
    ]


def test_an_empty_subgroup_is_refused_with_the_nearest_name():
    tests = ComponentTests(EXPERIMENTAL, PREDICTED, subgroup=["short", "short", "long", "long", "long"])
    with pytest.raises(InputError, match=r"'shorts' has no tests\. Did you mean 'short'\?"):
        tests.in_subgroup("shorts")
    with pytest.raises(InputError, match="no column of subgroups"):
        ComponentTests(EXPERIMENTAL, PREDICTED).in_subgroup("short")


def test_capacities_must_be_above_zero():
    assert messages(experimental=[110.0, 0.0, 147.0, 151.0, 169.0]) == [
        "The measured resistance in row 2 is 0; it must be above zero."
    ]
    assert messages(experimental=[110.0, -2.0, 147.0, -1.0, 0.0]) == [
        "The measured resistance in rows 2, 4 and 5 is not in order (the first is -2); it must be above zero."
    ]


def test_many_rows_are_counted_rather_than_listed():
    (found,) = messages(experimental=[-1.0] * 9, predicted=[1.0] * 9)
    assert "in rows 1, 2, 3, 4, 5 and 4 more is not in order (the first is -1)" in found


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_values_must_be_finite(value):
    found = messages(inputs={"thickness": [1.0, 2.0, 3.0, value, 5.0]})
    assert found == [f"The input 'thickness' in row 4 is {value:g}; it must be a finite number."]


def test_lengths_must_agree():
    assert messages(predicted=PREDICTED[:-1]) == [
        "The predicted resistance has 4 entries; each of the 5 measured resistances needs one."
    ]
    assert "'cluster' has 1 entry;" in messages(cluster=["a"])[0]


def test_text_is_not_a_number():
    assert messages(predicted=["a", "b", "c", "d", "e"]) == [
        "The predicted resistance: not all entries are numbers."
    ]


def test_marks_of_survivors_are_true_or_false():
    assert messages(survived=["no", "no", "yes", "no", "no"])[0].startswith(
        "The mark of a survivor in rows 1, 2, 3, 4 and 5 is 'no'; it must be true or false."
    )
    assert messages(survived=[0, 1, 2, 0, 0]) == [
        "The mark of a survivor in row 3 is 2; it must be true or false."
    ]
    assert ComponentTests(EXPERIMENTAL, PREDICTED, survived=[0, 1, 0, 0, 0]).n_failed == 4


@pytest.mark.parametrize("blank", [None, "", "  ", float("nan")])
def test_labels_must_not_be_blank(blank):
    (found,) = messages(subgroup=["a", "b", blank, "a", "b"])
    assert found.startswith("The subgroup is blank in row 3; every test needs one.")


def test_three_tests_are_too_few():
    assert messages(experimental=[1.0, 2.0, 3.0], predicted=[1.0, 2.0, 3.0]) == [
        "There are 3 tests; a resistance model needs at least 4."
    ]
    assert messages(experimental=[1.0], predicted=[1.0]) == [
        "There is 1 test; a resistance model needs at least 4."
    ]


def test_all_problems_are_told_at_once():
    found = messages(
        experimental=[-1.0, 2.0, np.nan],
        predicted=[1.0, 2.0],
        inputs={"t": [1.0, np.inf, 2.0]},
        cluster=["", "x", "y"],
    )
    assert len(found) == 6
