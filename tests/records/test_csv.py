"""CSV columns: what is read, and what is refused in which words."""

import hashlib

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import read_column, read_table
from calibrate.records.files import MAX_BYTES
from calibrate.units import ONE, parse_unit


def refusal(path, column="f_u", unit=ONE, **options):
    with pytest.raises(InputError) as caught:
        read_column(path, column, unit=unit, display="rods.csv", **options)
    return caught.value


def test_values_rows_unit_and_digest(write):
    content = "specimen,f_u\nA1,512.3\nA2,498\nA3, 5.3e2 \nA4,+.5\n"
    path = write(content)
    sample = read_column(path, "f_u", unit=parse_unit("MPa"), display="data/rods.csv")
    np.testing.assert_array_equal(sample.values, [512.3, 498.0, 530.0, 0.5])
    np.testing.assert_array_equal(sample.rows, [2, 3, 4, 5])
    np.testing.assert_allclose(sample.si_values, np.array([512.3, 498.0, 530.0, 0.5]) * 1e6, rtol=1e-15)
    assert (sample.n, sample.file, sample.sheet, sample.name) == (4, "data/rods.csv", None, "f_u")
    assert sample.unit.text == "MPa"
    assert sample.sha256 == hashlib.sha256(content.encode()).hexdigest()
    with pytest.raises(ValueError, match="read-only"):
        sample.values[0] = 1.0


@pytest.mark.parametrize(
    "content",
    [
        "\ufefff_u,b\n1,x\n2,y\n",  # byte order mark
        "f_u,b\r\n1,x\r\n2,y\r\n",  # Windows
        "f_u,b\r1,x\r2,y\r",  # old line ends
        'f_u , "b"\n1,x\n"2",y\n\n,\n\n',  # blanks, quotes, empty rows at the end
        "f_u,b,\n1,x,\n2,y,\n",  # spare comma at every line's end
        "f_u,b\n1,x,,\n2,y\n",  # spare commas at one line's end
        "f_u;b\n1;x\n2;y\n",
        "f_u\tb\n1\tx\n2\ty\n",
        'f_u,b\n1,"x, z"\n2,y',  # comma in quotes, no newline at the end
    ],
)
def test_forms_of_csv(write, content):
    np.testing.assert_array_equal(read_column(write(content), "f_u", unit=ONE).values, [1.0, 2.0])


def test_row_numbers_count_lines_of_the_file(write):
    path = write('note,f_u\n"two\nlines",1\nplain,2\n"x\ny\nz",bad\n')
    error = refusal(path)
    assert [p.line for p in error.problems] == [5]
    good = read_column(write('note,f_u\n"two\nlines",1\nplain,2\n'), "f_u", unit=ONE)
    np.testing.assert_array_equal(good.rows, [2, 4])


@pytest.mark.parametrize(
    ("cell", "words"),
    [
        ("abc", "'abc' is not a number."),
        ('"512,3"', "'512,3' has a decimal comma. Write 512.3."),
        ('"1,234.5"', "'1,234.5' has separators between thousands. Write 1234.5."),
        ('"1,234,567"', "Write 1234567."),
        ('"1 234"', "'1 234' has separators between thousands. Write 1234."),
        ("512.3 MPa", "'512.3 MPa' holds more than a number. If 'MPa' is the unit, write 512.3"),
        ("nan", "'nan' is not a finite number."),
        ("-inf", "'-inf' is not a finite number."),
        ("Infinity", "'Infinity' is not a finite number."),
        ("1e999", "'1e999' is too large to be a number."),
        ("N/A", "'N/A' marks a missing value. Delete the row"),
        (
            ">60",
            "'>60' is a bound, not a value. Only complete samples can be used as asked; bounds need a method",
        ),
        ("480..495", "'480..495' is an interval, not a value. Only complete samples"),
        (
            '"1,234"',
            "'1,234' has a comma, which may stand for decimals or between thousands. Write 1.234 or 1234.",
        ),
        ("60+", "'60+' is a bound, not a value."),
        ("\u22125", "typographic minus sign, not a hyphen. Write -5."),
        ("1_000", "'1_000' is not a number."),
        ("0x1F", "'0x1F' holds more than a number."),
        ("٣", "'٣' is not a number."),
        ("", "the cell is empty. Fill it, or delete the row"),
        ("  ", "the cell is empty."),
        ("=A1", "'=A1' is not a number."),
    ],
)
def test_refused_cells(write, cell, words):
    error = refusal(write(f"id,f_u\na,1\nb,{cell}\nc,3\n"))
    assert len(error.problems) == 1
    assert str(error).startswith("rods.csv:3: Column 'f_u': ")
    assert words in str(error)


def test_every_slip_is_told_at_once_up_to_a_limit(write):
    error = refusal(write("f_u\n" + "x\n2\n" * 40))
    assert len(error.problems) == 11
    assert [p.line for p in error.problems[:3]] == [2, 4, 6]
    assert "and 30 more" in error.problems[-1].message
    assert error.problems[-1].line == 80


@pytest.mark.parametrize(
    ("content", "line", "words"),
    [
        ("", None, "The file is empty."),
        ("\n\n", None, "The file is empty."),
        ("f_u\n", 1, "column names but no data rows"),
        ("f_u\n\n \n", 1, "column names but no data rows"),
        ("\nf_u\n1\n", 1, "begins with an empty row"),
        ("f_u,b\n1,2\n\n3,4\n", 3, "row is empty, but data follow"),
        ("f_u,b\n1,2\n3\n", 3, "This row has 1 cells, but there are 2 column names."),
        ("f_u,b\n512,3,7\n", 2, "This row has 3 cells, but there are 2 column names. A decimal comma"),
        ("f_u,f_u\n1,2\n", 1, "Column 'f_u' occurs 2 times."),
        ("fu,b\n1,2\n", 1, "There is no column 'f_u'. Did you mean 'fu'?"),
        ("alpha,beta\n1,2\n", 1, "There is no column 'f_u'. Known: alpha, beta."),
        ("512.3,1\n498,2\n", 1, "The first row holds numbers; it must hold the names"),
        ("f_u|b\n1|2\n", 1, "separated by bars; commas, semicolons and tabulators are read"),
        ('f_u,b\n1,"open\n2,3\n', 2, "quotation mark opened in this row is never closed"),
        (b"f_u,b\n1,a\x00b\n", 2, "contains null bytes"),
        ("f_u\n" + "9" * 140_000 + "\n", 2, "more than 131072 characters"),
    ],
)
def test_refused_files(write, content, line, words):
    error = refusal(write(content))
    assert words in str(error)
    assert error.problems[0].line == line
    assert error.problems[0].file == "rods.csv"


def test_missing_file_names_its_neighbour(write, tmp_path):
    write("a\n1\n", "rod-tests.csv")
    assert "does not exist. Did you mean 'rod-tests.csv'?" in str(refusal(tmp_path / "rod_test.csv"))
    assert "nor does its folder" in str(refusal(tmp_path / "nowhere" / "rods.csv"))
    assert "This is a folder" in str(refusal(tmp_path))


def test_kind_and_size(write):
    assert "kind '.xls' cannot be read" in str(refusal(write("a\n1\n", "old.xls")))
    assert "without a suffix cannot be read" in str(refusal(write("a\n1\n", "plain")))
    assert "A CSV file has no sheets" in str(refusal(write("f_u\n1\n"), sheet="Tests"))
    path = write("f_u\n1\n", "huge.csv")
    with path.open("ab") as stream:
        stream.truncate(MAX_BYTES + 1)
    assert "The file has 100 MB; the limit is 100 MB." in str(refusal(path))


def test_long_and_unprintable_cells_do_not_flood_the_message(write):
    text = str(refusal(write("f_u\n" + "y" * 5000 + "\n\x1b[31mred\n")))
    assert len(text) < 300
    assert "\x1b" not in text


def test_table_separates_numbers_from_text(write):
    table = read_table(write("line,Q_k,lot\nDN400,4.0,1\nDN250,2.6,b2\n"), display="stock.csv")
    assert list(table.columns) == ["line", "Q_k", "lot"]
    np.testing.assert_array_equal(table.numbers("Q_k"), [4.0, 2.6])
    assert list(table.columns["line"]) == ["DN400", "DN250"]
    assert list(table.columns["lot"]) == ["1", "b2"]
    assert (table.n, list(table.rows)) == (2, [2, 3])
    assert table.is_number("Q_k")
    assert not table.is_number("lot")
    assert not table.is_number("nothing")
    with pytest.raises(InputError, match=r"stock\.csv:3: Column 'lot': 'b2' is not a number"):
        table.numbers("lot")
    with pytest.raises(InputError, match=r"There is no column 'Qk'\. Did you mean 'Q_k'"):
        table.numbers("Qk")
    with pytest.raises(ValueError, match="read-only"):
        table.columns["Q_k"][0] = 1.0


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("a,b\n1,\n2,3\n", "stock.csv:2: Column 'b': the cell is empty."),
        ("a,a\n1,2\n", "stock.csv:1: Column 'a' occurs more than once."),
        ("a,,b\n1,2,3\n", "stock.csv:1: Column 2 has no name."),
    ],
)
def test_refused_tables(write, content, words):
    with pytest.raises(InputError, match="^" + words.replace(".", r"\.")):
        read_table(write(content), display="stock.csv")


def test_spare_column_without_name_or_cells_is_no_column(write):
    assert list(read_table(write("a,,b\n1,,3\n")).columns) == ["a", "b"]
