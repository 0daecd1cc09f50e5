"""Parquet columns: the same samples as from CSV, and what only Parquet can hold."""

import datetime
import sys
from decimal import Decimal

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from calibrate.errors import InputError
from calibrate.records import Exclude, ReadOptions, TextForm, parquet_file, read_column, read_table
from calibrate.units import ONE, parse_unit


@pytest.fixture
def store(tmp_path):
    def make(columns, name="rods.parquet"):
        path = tmp_path / name
        pq.write_table(pa.table(columns), path)
        return path

    return make


def test_columns_of_every_kind(store):
    path = store(
        {
            "f_u": [512.3, 498.0],
            "count": pa.array([3, 4], pa.int8()),
            "exact": [Decimal("1.50"), Decimal("2.25")],
            "lot": pa.array(["A", "B"]).dictionary_encode(),
            "bound": [">512", "480..495"],
            "when": [datetime.date(2024, 5, 2), datetime.date(2024, 5, 1)],
        }
    )
    sample = read_column(path, "f_u", unit=parse_unit("MPa"), options=ReadOptions(lot="lot", order="when"))
    np.testing.assert_array_equal(sample.values, [512.3, 498.0])
    np.testing.assert_array_equal(sample.rows, [1, 2])
    np.testing.assert_array_equal(sample.order, [2.0, 1.0])
    assert list(sample.labels["lot"]) == ["A", "B"]
    assert (sample.format_note, sample.sheet) == ("Parquet", None)
    np.testing.assert_array_equal(read_column(path, "count", unit=ONE).values, [3.0, 4.0])
    np.testing.assert_array_equal(read_column(path, "exact", unit=ONE).values, [1.5, 2.25])
    bounds = read_column(path, "bound", unit=ONE, options=ReadOptions(censoring=True)).observations
    np.testing.assert_array_equal(bounds.lower, [512.0, 480.0])
    left = read_column(path, "f_u", unit=ONE, options=ReadOptions(exclude=(Exclude(row=1, reason="r"),)))
    np.testing.assert_array_equal(left.rows, [2])
    assert read_table(path).is_number("exact")


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ([1.0, None], "rods.csv:2: Column 'f_u': the cell is empty."),
        ([1.0, float("nan")], "rods.csv:2: Column 'f_u': 'nan' is not a finite number."),
        ([True, False], "rods.csv:1: Column 'f_u': 'TRUE' is a truth value"),
        ([[1.0], [2.0]], "is a nested or binary entry, not a number. Choose a column of numbers."),
        ([b"1", b"2"], "is a nested or binary entry"),
        ([datetime.date(2024, 5, 2)], "'2024-05-02' is a date or time, not a number."),
        (pa.array([], pa.float64()), "The file has no rows."),
    ],
)
def test_refused_cells(store, refusal, values, words):
    assert words in refusal(store({"f_u": values}))


def test_structure_is_checked(store, refusal, write):
    assert "There is no column 'fu'. Did you mean 'f_u'?" in refusal(store({"f_u": [1.0]}), column="fu")
    assert "A Parquet file has no sheets" in refusal(store({"f_u": [1.0]}), sheet="Tests")
    text = refusal(store({"f_u": [1.0]}), options=ReadOptions(form=TextForm(separator=";")))
    assert "A Parquet file has no separator to be stated" in text
    for content in (b"", b"f_u\n1\n", b"PAR1" + bytes(40) + b"PAR1"):
        assert "The file cannot be read as Parquet." in refusal(write(content, "rods.parquet"))
    whole = store({"f_u": np.arange(1000.0)}).read_bytes()
    assert "cannot be read as Parquet" in refusal(write(whole[: len(whole) // 2], "cut.parquet"))


def test_a_small_file_that_unpacks_to_very_much(store, refusal, monkeypatch):
    monkeypatch.setattr(parquet_file, "MAX_CELLS", 1000)
    assert "The file has 2000 cells in 2000 rows; the limit is 1000 cells." in refusal(
        store({"f_u": np.zeros(2000)})
    )
    assert "The file has 2000 cells in 1 rows" in refusal(store({"f_u": [[0.0] * 2000]}))


def test_a_long_text_that_repeats_is_held_once(store):
    text = "x" * 20_000
    path = store({"f_u": np.ones(2000), "note": [text] * 2000})
    assert path.stat().st_size < 100_000
    notes = read_table(path).columns["note"]
    assert len({id(note) for note in notes}) == 1


def test_without_pyarrow_the_message_says_what_to_install(store, monkeypatch):
    path = store({"f_u": [1.0]})
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    with pytest.raises(InputError, match=r"need the package pyarrow\. Install the extra 'parquet'"):
        read_column(path, "f_u", unit=ONE)
