"""Specimens known by bounds: cells, flag columns, truncation, and the refusal where they are not honoured."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import ReadOptions, read_column
from calibrate.units import ONE, parse_unit

INF = np.inf
BOUNDS = ReadOptions(censoring=True)


def flags(**more):
    return ReadOptions(censored="kept", **more)


def test_bounds_in_cells(write):
    cells = ["500", ">512", ">= 512.5", "≥5e2", "<480", "<=-.5", "≤3", "480..495", "480.5 .. 495.2"]
    sample = read_column(
        write("f_u,b\n" + "".join(f"{c},x\n" for c in cells)), "f_u", unit=parse_unit("MPa"), options=BOUNDS
    )
    o = sample.observations
    np.testing.assert_array_equal(o.lower, [500, 512, 512.5, 500, -INF, -INF, -INF, 480, 480.5])
    np.testing.assert_array_equal(o.upper, [500, INF, INF, INF, 480, -0.5, 3, 495, 495.2])
    np.testing.assert_array_equal(sample.values, [500, 512, 512.5, 500, 480, -0.5, 3, 487.5, 487.85])
    np.testing.assert_array_equal(sample.si_observations.lower, o.lower * 1e6)
    for array in (sample.values, o.lower, o.upper):
        assert not array.flags.writeable


def test_bounds_with_decimal_commas(write):
    sample = read_column(write("f_u\n>512,3\n<480,5\n480,5..495,2\n7\n"), "f_u", unit=ONE, options=BOUNDS)
    np.testing.assert_array_equal(sample.observations.lower, [512.3, -INF, 480.5, 7.0])
    np.testing.assert_array_equal(sample.observations.upper, [INF, 480.5, 495.2, 7.0])
    assert sample.format_note == "one column, decimal comma, UTF-8"


def test_a_complete_sample_stays_as_it_was(write):
    path = write("f_u\n1.5\n2.5\n")
    plain, bounded = (read_column(path, "f_u", unit=ONE, options=o) for o in (ReadOptions(), BOUNDS))
    assert plain.observations.complete
    assert bounded.observations.complete
    np.testing.assert_array_equal(plain.values, bounded.values)
    assert (plain.labels, plain.order, plain.excluded, plain.normalisation) == ({}, None, (), None)


@pytest.mark.parametrize(
    ("cell", "words"),
    [
        (
            ">512 MPa",
            "'>512 MPa' is neither a value nor a bound. State the unit once for the column. Allowed",
        ),
        ("60+", "'60+' is neither a value nor a bound. Write >60. Allowed are a number, '>512'"),
        ("480-495", "Write 480..495."),
        ("480 – 495", "Write 480..495."),
        ("480...495", "Write 480..495."),
        ("480…495", "Write 480..495."),
        (">>5", "'>>5' is neither a value nor a bound."),
        (">", "'>' is neither a value nor a bound."),
        ("495..480", "'495..480' has its larger bound first. Write 480..495."),
        ("480..480.0", "has no width. Write 480 for a value"),
        (">1e999", "'>1e999' is too large"),
        ("1..1e999", "too large to be an interval"),
        ('">512,3"', "'>512,3' is neither a value nor a bound."),
        ("abc", "'abc' is not a number."),
        ("N/A", "'N/A' marks a missing value."),
        ("", "the cell is empty."),
    ],
)
def test_refused_bounds(write, refusal, cell, words):
    text = refusal(write(f"f_u,b\n1,x\n{cell},y\n"), options=BOUNDS)
    assert text.startswith("rods.csv:3: Column 'f_u': ")
    assert words in text


@pytest.mark.parametrize(
    ("entries", "kind"),
    [
        (["yes", "TRUE", " 1 ", "right", "Survived"], "right"),
        (["left", "LEFT"], "left"),
        (["no", "False", "0", "failed", ""], "exact"),
    ],
)
def test_flag_column(write, entries, kind):
    content = "f_u,kept,b\n" + "".join(f"12.5,{e},x\n" for e in entries)
    o = read_column(write(content), "f_u", unit=ONE, options=flags(censoring=True)).observations
    assert getattr(o, kind).all()
    np.testing.assert_array_equal(o.values, 12.5)


@pytest.mark.parametrize(
    ("cell", "flag", "bounds"),
    [
        (">5", "yes", (5, INF)),
        (">5", "", (5, INF)),
        ("<5", "left", (-INF, 5)),
        ("<5", "failed", (-INF, 5)),
        ("4..5", "failed", (4, 5)),
        ("4..5", "", (4, 5)),
        (">5", "no", "'>5' contradicts column 'kept', which marks the specimen as 'failed'."),
        (">5", "left", "'>5' contradicts column 'kept'"),
        ("<5", "yes", "'<5' contradicts column 'kept', which marks the specimen as 'right'."),
        ("4..5", "1", "'4..5' contradicts column 'kept'"),
        ("5", "maybe", "Column 'kept': 'maybe' does not say whether the specimen is censored. Allowed are 'yes'"),
        ("5", "interval", "An interval is written in the value's cell, such as 480..495."),
        ("5", "2", "Column 'kept': '2' does not say"),
    ],
)  # fmt: skip
def test_flag_and_cell_together(write, refusal, cell, flag, bounds):
    path = write(f"f_u,kept,b\n1,,x\n{cell},{flag},y\n")
    if isinstance(bounds, str):
        text = refusal(path, options=flags(censoring=True))
        assert text.startswith("rods.csv:3: Column ")
        assert bounds in text
        return
    o = read_column(path, "f_u", unit=ONE, options=flags(censoring=True)).observations
    assert (o.lower[1], o.upper[1]) == bounds


def test_without_a_method_that_honours_censoring_flags_are_refused(write, refusal):
    path = write("f_u,kept\n1,failed\n2.5,survived\n")
    text = refusal(path, options=flags())
    assert text.startswith("rods.csv:3: Column 'f_u': '2.5' is marked as censored in column 'kept'")
    assert "bounds need a method that honours censoring, such as likelihood" in text
    complete = read_column(write("f_u,kept\n1,failed\n2,no\n"), "f_u", unit=ONE, options=flags())
    assert complete.observations.complete


def test_truncation(write, refusal):
    path = write("F\n11.5\n>11\n12\n")
    options = ReadOptions(censoring=True, above=11.0, below=20.0)
    o = read_column(path, "F", unit=parse_unit("kN"), options=options).observations
    assert (o.above, o.below, o.truncated) == (11.0, 20.0, True)
    text = refusal(
        write("F\n11.5\n11\n<10\n25\n"), column="F", unit=parse_unit("kN"), options=options
    ).splitlines()
    assert text[0].startswith(
        "rods.csv:3: 'F' is 11 kN, but only specimens above 11 kN are said to have entered"
    )
    assert text[1].startswith("rods.csv:4: 'F' is 10 kN, but only specimens above 11 kN")
    assert text[2].startswith("rods.csv:5: 'F' is 25 kN, but only specimens below 20 kN")
    assert "Correct the limit 'below', or exclude the row with its reason." in text[2]
    with pytest.raises(InputError, match="leave nothing between them"):
        ReadOptions(above=3.0, below=3.0)
