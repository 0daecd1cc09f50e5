"""XLSX columns: the same values and refusals as CSV, and what only a workbook can hold."""

import datetime
import zipfile

import numpy as np
import openpyxl
import pytest

from calibrate.errors import InputError
from calibrate.records import ReadOptions, read_column, read_table, xlsx_file
from calibrate.units import ONE, parse_unit


@pytest.fixture
def book(tmp_path):
    def make(sheets, name="rods.xlsx"):
        workbook = openpyxl.Workbook()
        workbook.remove(workbook.active)
        for title, rows in sheets.items():
            sheet = workbook.create_sheet(title)
            for row in rows:
                sheet.append(row)
        path = tmp_path / name
        workbook.save(path)
        return path

    return make


def refusal(path, column="f_u", **options):
    with pytest.raises(InputError) as caught:
        read_column(path, column, unit=ONE, display="rods.xlsx", **options)
    return caught.value


def test_first_sheet_or_the_named_one(book):
    path = book({"Tests": [["id", "f_u"], ["A", 512.3], ["B", 498]], "Old": [["f_u"], [1.5]]})
    sample = read_column(path, "f_u", unit=parse_unit("MPa"))
    np.testing.assert_array_equal(sample.values, [512.3, 498.0])
    np.testing.assert_array_equal(sample.rows, [2, 3])
    assert sample.sheet == "Tests"
    other = read_column(path, "f_u", unit=ONE, sheet="Old")
    assert (other.sheet, list(other.values)) == ("Old", [1.5])
    assert "no sheet 'Test'. Did you mean 'Tests'?" in str(refusal(path, sheet="Test"))


def test_rows_are_numbered_as_on_the_sheet(tmp_path):
    workbook = openpyxl.Workbook()
    sheet = workbook.active
    sheet["B1"], sheet["B2"], sheet["B3"] = "f_u", 1.0, 2.0
    sheet["B5"] = 3.0
    path = tmp_path / "gap.xlsx"
    workbook.save(path)
    error = refusal(path)
    assert (error.problems[0].line, "row is empty" in str(error)) == (4, True)
    sheet["B4"] = 9.0
    workbook.save(path)
    sample = read_column(path, "f_u", unit=ONE)
    np.testing.assert_array_equal(sample.rows, [2, 3, 4, 5])
    assert list(read_table(path).columns) == ["f_u"]


@pytest.mark.parametrize(
    ("cell", "words"),
    [
        ("abc", "'abc' is not a number."),
        ("12,5", "'12,5' has a decimal comma. Write 12.5."),
        (True, "'TRUE' is a truth value"),
        (datetime.datetime(2024, 5, 1), "is a date or time, not a number"),
        ("#DIV/0!", "'#DIV/0!' is the error of a formula."),
        ("=B2*2", "'=B2*2' is a formula whose result is not stored in the file."),
        (None, "the cell is empty."),
    ],
)
def test_refused_cells(book, cell, words):
    error = refusal(book({"Tests": [["id", "f_u"], ["a", 1.0], ["b", cell], ["c", 3]]}))
    assert len(error.problems) == 1
    assert str(error).startswith("rods.xlsx:3: Column 'f_u': ")
    assert words in str(error)


def test_text_of_a_number_reads_as_in_csv(book):
    path = book({"Tests": [["f_u"], ["12.5"], [3]]})
    np.testing.assert_array_equal(read_column(path, "f_u", unit=ONE).values, [12.5, 3.0])


def test_empty_cells_below_and_beside_are_ignored(book):
    rows = [["f_u", "n", None], [1.0, 2, None], [2.0, 3, None], [None, " ", None], [None, None, None]]
    path = book({"Tests": rows})
    np.testing.assert_array_equal(read_column(path, "f_u", unit=ONE).values, [1.0, 2.0])
    assert list(read_table(path).columns) == ["f_u", "n"]


def test_structure_is_checked(book):
    assert "Sheet 'Tests' is empty" in str(refusal(book({"Tests": []})))
    assert "no data rows" in str(refusal(book({"Tests": [["f_u"]]})))
    assert "occurs 2 times" in str(refusal(book({"Tests": [["f_u", "f_u"], [1, 2]]})))
    assert "Did you mean 'f_u'?" in str(refusal(book({"Tests": [["f_u"], [1]]}), column="fu"))


def test_what_is_not_a_workbook(tmp_path, monkeypatch, book):
    path = tmp_path / "rods.xlsx"
    path.write_bytes(b"f_u\n1\n")
    assert "cannot be read as an XLSX workbook" in str(refusal(path))
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("note.txt", "no workbook")
    assert "cannot be read as an XLSX workbook" in str(refusal(path))
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("[Content_Types].xml", "<broken")
    assert "cannot be read as an XLSX workbook" in str(refusal(path))
    monkeypatch.setattr(xlsx_file, "MAX_UNPACKED", 1000)
    assert "unpacks to" in str(refusal(book({"Tests": [["f_u"], [1]]})))


def test_cells_keep_their_type_in_labels_flags_and_order(book):
    day = datetime.datetime
    rows = [
        ["f_u", "lot", "kept", "when"],
        [5, 1, True, day(2024, 5, 2)],
        ["4..6", 2.0, None, day(2024, 5, 1, 8)],
        [7, " A ", 0, day(2024, 5, 1, 7)],
    ]
    options = ReadOptions(censoring=True, lot="lot", censored="kept", order="when")
    sample = read_column(book({"Tests": rows}), "f_u", unit=ONE, options=options)
    assert list(sample.labels["lot"]) == ["1", "2", "A"]
    np.testing.assert_array_equal(sample.observations.lower, [5, 4, 7])
    np.testing.assert_array_equal(sample.observations.upper, [np.inf, 6, 7])
    np.testing.assert_array_equal(sample.order, [3, 2, 1])
    assert sample.format_note == "XLSX"
