"""Wrong tables and options of ``calibrate resistance``: one message each, exit code 2, nothing on standard output."""

import pytest

# Self-made: six invented tests of anchors; R in kN, A in mm^2, f in MPa.
ROWS = (
    ("50", "410", "22.0", "failed", "x"),
    ("60", "395", "21.9", "failed", "y"),
    ("80", "420", "36.8", "stopped", "x"),
    ("100", "405", "39.1", "failed", "y"),
    ("120", "400", "52.9", "failed", "x"),
    ("150", "415", "60.6", "failed", "y"),
)
COLUMNS = ("A", "f", "R", "end", "site")


@pytest.fixture
def refused(tmp_path, calibrate):
    """Run the command on the table, one cell changed, and return its messages."""

    def run(*arguments, cell=None, rows=ROWS, prediction="A * f", units="A=mm^2,f=MPa"):
        rows = [dict(zip(COLUMNS, row, strict=True)) for row in rows]
        if cell is not None:
            at, column, value = cell
            rows[at][column] = value
        file = tmp_path / "anchors.csv"
        lines = [",".join(COLUMNS), *(",".join(row.values()) for row in rows)]
        file.write_text("\n".join(lines) + "\n", encoding="utf-8")
        ended = calibrate(
            "resistance", file, "--measured", "R", "--unit", "kN", "--prediction", prediction, "--units", units,
            *arguments,
        )  # fmt: skip
        assert (ended.code, ended.out) == (2, "")
        assert "Traceback" not in ended.err
        return ended.err.replace(str(file), "anchors.csv").splitlines()

    return run


def only(lines):
    (line,) = lines
    return line


@pytest.mark.parametrize("value", ["0", "-22"])
def test_a_capacity_that_is_not_positive(refused, value):
    assert only(refused(cell=(0, "R", value))) == (
        f"anchors.csv:2: Column 'R': the measured capacity is {value} kN; it must be above zero. Correct the cell, or "
        "exclude the row with its reason."
    )


def test_a_prediction_that_is_not_positive(refused):
    line = only(refused(cell=(3, "f", "-405")))
    assert line.startswith("anchors.csv:5: The prediction 'A * f' is -40.5 kN; it must be above zero.")


def test_a_prediction_that_misses_an_input(refused):
    line = only(refused(prediction="A * f * site_factor", units="A=mm^2,f=MPa"))
    assert line == "anchors.csv:1: There is no column 'site_factor'. Known: A, f, R, end, site."
    assert "Did you mean 'end'?" in only(refused("--survived", "ends"))


def test_a_prediction_of_another_dimension(refused):
    line = only(refused(prediction="A * f * A"))
    assert line.startswith("--prediction 'A * f * A' is ")
    assert "but the measured capacity 'R' in kN is a force" in line
    assert "No unit is stated for f." in only(refused(units="A=mm^2"))


def test_too_few_tests(refused):
    assert only(refused(rows=ROWS[:3])) == (
        "anchors.csv: There are 3 tests; a resistance model needs at least 4."
    )


def test_too_few_failures_for_a_trend(refused):
    line = only(refused("--survived", "end", rows=ROWS[:4]))
    assert line.startswith("anchors.csv: ")
    assert "4" in line


@pytest.mark.parametrize(
    ("arguments", "cell", "words"),
    [
        (["--subgroup", "site"], (1, "site", ""), "anchors.csv:3: Column 'site': the cell is empty."),
        (["--cluster", "site"], (1, "site", " "), "anchors.csv:3: Column 'site': the cell is empty."),
        ([], (1, "A", ""), "anchors.csv:3: Column 'A': "),
        (["--input", "site"], None, "Column 'site': "),
        (["--survived", "end"], (4, "end", "maybe"), "anchors.csv:6: Column 'end': 'maybe' does not say"),
        (["--survived", "end"], (4, "end", "left"), "the capacity is known to lie below 52.9 kN"),
        (["--nominal", "f"], None, "--prediction uses 'f', a column of nominal values"),
        (["--cov", "f=-0.05"], None, "--cov gives 'f' the coefficient of variation -0.05"),
        (["--cov", "f=nan"], None, "--cov gives 'f' the coefficient of variation nan"),
        (["--cov", "f=much"], None, "--cov: 'much' of 'f' is no number. Write NAME=NUMBER"),
        (["--cov", "f"], None, "--cov: 'f' is no NAME=VALUE."),
        (["--known", "m=-1"], None, "--known gives 'm' the coefficient of variation -1"),
        (["--column-unit", "f=MPa"], None, "--column-unit: 'f' has a unit in --units as well."),
        (["--column-unit", "g=MPa"], None, "--units states a unit for the column 'g'"),
        (["--column-unit", "g=MPx"], None, "--column-unit: unknown unit 'MPx'"),
        (["--nominal-ratio", "0"], None, "--nominal-ratio is 0; it must be above zero."),
        (["--target", "-1"], None, "--target is -1; it must be above zero."),
        (["--sheet", "first"], None, "anchors.csv: "),
    ],
)
def test_other_slips(refused, arguments, cell, words):
    lines = refused(*arguments, cell=cell)
    assert any(words in line for line in lines), lines


def test_several_slips_are_told_at_once(refused):
    lines = refused("--cov", "f=-1", "--target", "0", "--nominal", "A")
    assert len(lines) == 4
    assert lines[-1] == "3 problems; nothing was written."


def test_a_file_that_is_not_there(calibrate):
    ended = calibrate("resistance", "no.csv", "--measured", "R", "--prediction", "A")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith("no.csv: ")
