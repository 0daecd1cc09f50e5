"""Labels, order, exclusions and rows in other units."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import Exclude, Exclusion, ReadOptions, UnitBy, read_column
from calibrate.units import parse_unit

KN = parse_unit("kN")

TESTS = """id,lot,lab,F,mode,date,step,ok
S1,A,North,12.5,pull,2024-05-03,1,yes
S2,A,North,11.0,,2024-05-01,2,yes
S3,B,South,1325,grip,2024-05-03,10,no
S4,B,South,bad,grip,2024-12-01,3,no
"""

NO_GRIP = Exclude(where="mode", equals="grip", reason="slipped in the grip")


def excluding(*rules, **more):
    return ReadOptions(exclude=rules, **more)


def test_labels_by_role(write):
    path = write(TESTS.replace("bad", "12"))
    roles = ReadOptions(lot="lot", laboratory="lab", mode="mode", specimen="id")
    sample = read_column(path, "F", unit=KN, options=roles)
    assert list(sample.labels) == ["lot", "laboratory", "mode", "specimen"]
    assert list(sample.labels["lot"]) == ["A", "A", "B", "B"]
    assert list(sample.labels["mode"]) == ["pull", "", "grip", "grip"]
    assert sample.labels["specimen"].dtype == object
    with pytest.raises(ValueError, match="read-only"):
        sample.labels["lot"][0] = "C"


def test_an_empty_lot_is_refused_and_told_with_the_other_slips(write, refusal):
    text = refusal(write("F,lot\nx,A\n2,\n"), column="F", options=ReadOptions(lot="lot")).splitlines()
    assert text[0].startswith("rods.csv:2: Column 'F': 'x' is not a number.")
    assert text[1].startswith("rods.csv:3: Column 'lot': the cell is empty. Fill it: which group")
    text = refusal(write("F,lot\n1,A\n"), column="F", options=ReadOptions(lot="Lot"))
    assert "There is no column 'Lot'. Did you mean 'lot'?" in text


@pytest.mark.parametrize(
    ("entries", "ranks"),
    [
        (["1", "2", "10", "3"], [1, 2, 4, 3]),
        (["5", "5", "1", "5"], [3, 3, 1, 3]),
        (["2024-05-03", "2024-05-01", "2024-05-03", "2024-12-01"], [2.5, 1, 2.5, 4]),
        (["2024-05-03T14:30", "2024-05-03 08:00:00", "2024-05-02", "2023-12-31"], [4, 3, 2, 1]),
        (
            ["2024-05-03T10:00+02:00", "2024-05-03T09:00+00:00", "2024-05-03T12:00Z", "2025-01-01T00:00Z"],
            [1, 2, 3, 4],
        ),
    ],
)
def test_order_becomes_ranks(write, entries, ranks):
    path = write("F,when\n" + "".join(f"1,{e}\n" for e in entries))
    sample = read_column(path, "F", unit=KN, options=ReadOptions(order="when"))
    np.testing.assert_array_equal(sample.order, ranks)


@pytest.mark.parametrize(
    ("first", "entry", "words"),
    [
        (
            "2024-05-01",
            "01.05.2024",
            "'01.05.2024' is a date in another order than year-month-day. Allowed are",
        ),
        ("2024-05-01", "5/31/24", "'5/31/24' is a date in another order"),
        ("2024-05-01", "2024-02-30", "'2024-02-30' is not a date of the calendar."),
        ("2024-05-01", "Monday", "'Monday' is no date. Allowed are numbers, or dates such as 2024-05-31"),
        ("2024-05-01", "7", "'7' is no date."),
        ("2024-05-01", "", "the cell is empty. Fill it: the order of testing"),
        ("2024-05-01T10:00Z", "2024-05-02", "differ in stating a time zone. State all or none."),
        ("1", "2024-05-01", "'2024-05-01' is not a number. The first entry is a number; all must be"),
        ("1", "", "the cell is empty."),
    ],
)
def test_refused_order(write, refusal, first, entry, words):
    text = refusal(write(f"F,when\n1,{first}\n2,{entry}\n"), column="F", options=ReadOptions(order="when"))
    assert text.startswith("rods.csv:3: Column 'when': ")
    assert words in text


def test_rows_are_left_out_for_a_reason(write):
    rules = (Exclude(row=4, reason="wrong jaw"), NO_GRIP)
    sample = read_column(write(TESTS), "F", unit=KN, options=excluding(*rules, order="step", lot="lot"))
    np.testing.assert_array_equal(sample.values, [12.5, 11.0])
    np.testing.assert_array_equal(sample.rows, [2, 3])
    assert list(sample.labels["lot"]) == ["A", "A"]
    np.testing.assert_array_equal(sample.order, [1.0, 2.0])
    assert sample.excluded == (
        Exclusion(4, "wrong jaw; slipped in the grip", "1325"),
        Exclusion(5, "slipped in the grip", "bad"),
    )


@pytest.mark.parametrize(
    ("where", "equals", "left"),
    [("step", 3, 3), ("step", "3", 3), ("step", 3.0, 3), ("ok", False, 2), ("id", " S4 ", 3)],
)
def test_entries_are_compared_as_numbers_words_and_truth_values(write, where, equals, left):
    rule = Exclude(where=where, equals=equals, reason="r")
    sample = read_column(write(TESTS.replace("no\n", "False\n").replace("bad", "12")), "F", unit=KN,
                         options=excluding(rule))  # fmt: skip
    assert sample.n == left


@pytest.mark.parametrize(
    ("rules", "words"),
    [
        ([Exclude(row=17, reason="broken")], "of row 17 (broken) matches nothing. Data stand in rows 2 to 5."),
        ([Exclude(row=1, reason="header")], "exclusion of row 1 (header) matches nothing."),
        (
            [Exclude(where="mode", equals="Grip", reason="slip")],
            "rows where 'mode' equals 'Grip' (slip) matches nothing. Its entries are 'grip', 'pull'.",
        ),
        ([Exclude(where="modes", equals="x", reason="r")], "There is no column 'modes'. Did you mean 'mode'?"),
        ([Exclude(row=r, reason="r") for r in (2, 3, 4, 5)], "The exclusions leave no row."),
    ],
)  # fmt: skip
def test_refused_exclusions(write, refusal, rules, words):
    assert words in refusal(write(TESTS), column="F", options=excluding(*rules))


@pytest.mark.parametrize(
    ("rule", "words"),
    [
        ({"row": 17, "reason": " "}, "exclusion of row 17 has no reason"),
        ({"where": "mode", "equals": "grip", "reason": ""}, "rows where 'mode' equals 'grip' has no reason"),
        ({"reason": "r"}, "must name either a row, or a column with 'where' and its entry with 'equals'"),
        ({"reason": "r", "row": 3, "where": "mode", "equals": "x"}, "must name either a row"),
        ({"reason": "r", "row": 3, "equals": "x"}, "must name either a row"),
        ({"reason": "r", "where": "mode"}, "must name either a row"),
    ],
)
def test_refused_rules(rule, words):
    with pytest.raises(InputError, match=words):
        Exclude(**rule)


def test_rows_in_another_unit(write):
    by_lot = UnitBy("lot", {"B": parse_unit("kgf")})
    sample = read_column(write(TESTS.replace("bad", ">1000")), "F", unit=KN,
                         options=ReadOptions(unit_by=by_lot, censoring=True))  # fmt: skip
    # 1 kgf = 9.80665 N exactly (standard acceleration of free fall, CGPM 1901)
    np.testing.assert_allclose(sample.values, [12.5, 11.0, 1325 * 9.80665e-3, 9.80665], rtol=1e-15)
    np.testing.assert_array_equal(sample.observations.right, [False, False, False, True])
    assert sample.values[0] == 12.5


@pytest.mark.parametrize(
    ("unit_by", "words"),
    [
        (UnitBy("lot", {"C": parse_unit("kgf")}), "No row has 'C' in column 'lot'."),
        (UnitBy("lot", {"C": parse_unit("kgf")}), "A unit is stated for it; the entries are 'A', 'B'."),
        (
            UnitBy("lot", {"B": parse_unit("kg")}),
            "Column 'F' is in 'kN', a force (kg·m/s²), but rows with 'B'",
        ),
        (UnitBy("lot", {"B": parse_unit("kg")}), "column 'lot' are said to be in 'kg', a mass (kg)."),
        (UnitBy("Lot", {"B": parse_unit("kgf")}), "There is no column 'Lot'."),
    ],
)
def test_refused_units_of_rows(write, refusal, unit_by, words):
    text = refusal(write(TESTS), column="F", unit=KN, options=ReadOptions(unit_by=unit_by))
    assert words in text
