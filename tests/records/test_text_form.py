"""Separators, decimal marks and encodings: found and told, stated, or refused when in doubt."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import ReadOptions, TextForm, read_column, read_table
from calibrate.units import ONE

GERMAN = "Größe;f_u;Los\nM10;512,3;a\nM12;498,25;b\nM16;1034;b\n"


def stated(**form):
    return ReadOptions(form=TextForm(**form))


@pytest.mark.parametrize(
    ("content", "note", "values"),
    [
        ("f_u,b\n1.5,x\n2,y\n", "commas, decimal point, UTF-8", [1.5, 2.0]),
        (GERMAN.encode("cp1252"), "semicolons, decimal comma, Windows-1252", [512.3, 498.25, 1034.0]),
        (
            GERMAN.encode("utf-8-sig"),
            "semicolons, decimal comma, UTF-8 with byte order mark",
            [512.3, 498.25, 1034],
        ),
        (GERMAN.encode("utf-16"), "semicolons, decimal comma, UTF-16", [512.3, 498.25, 1034.0]),
        (
            b"\xfe\xff" + GERMAN.encode("utf-16-be"),
            "semicolons, decimal comma, UTF-16",
            [512.3, 498.25, 1034.0],
        ),
        ("f_u;b\n1;x\n2;y\n", "semicolons, UTF-8", [1.0, 2.0]),
        ("f_u\tb\n1.5\tx, z\n,5\ty\n".replace(",5", ".5"), "tabulators, decimal point, UTF-8", [1.5, 0.5]),
        ("f_u\tb\n1.234\tx\n2.345\ty\n", "tabulators, decimal point, UTF-8", [1.234, 2.345]),
        ("f_u\n512,3\n1,5e3\n", "one column, decimal comma, UTF-8", [512.3, 1500.0]),
        ("f_u\n512\n498\n", "one column, decimal point, UTF-8", [512.0, 498.0]),
        # a comma in a name or a note does not divide, as the rows show
        ("f_u;load, kN\n512,3;7,25\n1;2\n", "semicolons, decimal comma, UTF-8", [512.3, 1.0]),
        ('f_u;"a,b"\n1,5;x\n2;y\n', "semicolons, decimal comma, UTF-8", [1.5, 2.0]),
        ("f_u,a;b\n1,2\n3,4\n", "commas, decimal point, UTF-8", [1.0, 3.0]),
        # 1,234 is decimal where another number of the file shows it
        ("f_u;t\n1,234;0,5\n2,345;7\n", "semicolons, decimal comma, UTF-8", [1.234, 2.345]),
        # numbers in a column of text are no evidence
        ("f_u;note\n1,5;see 3.2\n2,5;3.2\n3;none\n", "semicolons, decimal comma, UTF-8", [1.5, 2.5, 3.0]),
    ],
)
def test_found_and_told(write, content, note, values):
    sample = read_column(write(content), "f_u", unit=ONE)
    np.testing.assert_array_equal(sample.values, values)
    assert sample.format_note == note


@pytest.mark.parametrize(
    ("content", "line", "words"),
    [
        ("a;f_u\n1.5;2,5\n", 2, "decimal mark is in doubt: '1.5' (column 'a', row 2) has a point, '2,5' (column"),
        ("f_u;b\n512,3;x\n1;y\n498.2;z\n", 4, "'498.2' (column 'f_u', row 4) has a point, '512,3'"),
        ("f_u;b\n1,234;x\n", 2, "Column 'f_u': '1,234' can be read as 1.234 or as 1234, and no other number"),
        ("f_u;b\n1.234;x\n", 2, "'1.234' can be read as 1.234 or as 1234"),
        ("f_u;b\n1.234;2,345\n", 2, "decimal mark is in doubt"),
        ("f_u\n1,234\n", 2, "'1,234' can be read as 1.234 or as 1234"),
        ("f_u;a,b\n1;2,3\n", 1, "separator is in doubt: commas and semicolons both divide every row alike."),
        (b"f_u;\xfc\n1;\xc3\xbc\n", 1, "in doubt: byte 0xFC in this line has no meaning in UTF-8, but line 2"),
        (b"f_u,b\n1,\x81\n", 2, "neither in UTF-8, nor in Windows-1252: byte 0x81 in this line"),
        (b"\xff\xfef_u", None, "begins as UTF-16 but cannot be read as such"),
        (b"\xff\xfe\x00\x00" + "f_u\n1\n".encode("utf-32-le"), 1, "contains null bytes"),
    ],
)  # fmt: skip
def test_doubt_is_refused(write, refusal, content, line, words):
    text = refusal(write(content))
    assert text.startswith("rods.csv: " if line is None else f"rods.csv:{line}: ")
    assert words in text


@pytest.mark.parametrize(
    ("content", "form", "values"),
    [
        ("f_u;b\n1,234;x\n", {"decimal": ","}, [1.234]),
        ("a;f_u\n1.5;2,5\n", {"decimal": ","}, [2.5]),
        ("f_u;b\n1.234;x\n", {"decimal": "."}, [1.234]),
        ("f_u;a,b\n1;2,3\n", {"separator": ";"}, [1.0]),
        ('b,f_u\nx,"2,5"\n', {"decimal": ","}, [2.5]),
        (b"f_u;\xfc\n1;\xc3\xbc\n", {"encoding": "Windows-1252"}, [1.0]),
        ("f_u;ü\n1;x\n".encode("utf-8-sig"), {"encoding": "UTF-8"}, [1.0]),
    ],
)
def test_what_is_stated_decides(write, content, form, values):
    sample = read_column(write(content), "f_u", unit=ONE, options=stated(**form))
    np.testing.assert_array_equal(sample.values, values)


@pytest.mark.parametrize(
    ("cell", "words"),
    [
        ("1.5", "'1.5' has a decimal point in a file with decimal commas. Write 1,5."),
        (
            "1.234",
            "'1.234' has a point, which may stand for decimals or between thousands. Write 1,234 or 1234.",
        ),
        ("1.234,5", "'1.234,5' has separators between thousands. Write 1234,5."),
        ("1.234.567", "'1.234.567' has separators between thousands. Write 1234567."),
        ("1,5 MPa", "If 'MPa' is the unit, write 1,5 and state"),
        ("\u22121,5", "typographic minus sign, not a hyphen. Write -1,5."),
        ("1,2,3", "'1,2,3' is not a number."),
        ("1,5e999", "too large to be a number"),
    ],
)
def test_cells_of_a_file_with_decimal_commas(write, refusal, cell, words):
    path = write(f"f_u;b\n0,5;x\n{cell};y\n")
    text = refusal(path, options=stated(decimal=","))
    assert text.startswith("rods.csv:3: Column 'f_u': ")
    assert words in text


def test_a_statement_against_the_file_is_refused(write, refusal, tmp_path):
    text = refusal(write("f_u\n1\n".encode("utf-16")), options=stated(encoding="UTF-8"))
    assert "byte order mark of UTF-16, but its encoding is stated as UTF-8" in text
    text = refusal(write(b"f_u\n\xfc\n"), options=stated(encoding="UTF-8"))
    assert "The file is not in UTF-8: byte 0xFC in this line" in text
    text = refusal(write(b"", "a.xlsx"), options=stated(decimal=",", encoding="UTF-8"))
    assert "An XLSX workbook has no decimal and no encoding to be stated" in text
    for form in ({"separator": "|"}, {"decimal": "'"}, {"encoding": "latin9"}):
        with pytest.raises(InputError, match="is not known"):
            TextForm(**form)


def test_tables_too(write):
    table = read_table(write(GERMAN.encode("cp1252")))
    assert list(table.columns) == ["Größe", "f_u", "Los"]
    np.testing.assert_array_equal(table.numbers("f_u"), [512.3, 498.25, 1034.0])
    assert table.format_note == "semicolons, decimal comma, Windows-1252"
    same = read_table(write("a;b\n1,234;x\n"), form=TextForm(decimal=","))
    assert same.numbers("a")[0] == 1.234
