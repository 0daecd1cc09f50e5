"""Whole files: the same sample from every format, hostile files, and the time for many rows."""

import numpy as np
import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.records import Covariate, ReadOptions, read_column, read_table
from calibrate.units import ONE, parse_unit


def as_csv(path, header, rows, separator=",", mark=".", encoding="utf-8"):
    def cell(value):
        text = repr(float(value)) if isinstance(value, float) else str(value)
        return text.replace(".", mark) if isinstance(value, float) else text

    lines = [separator.join(header), *(separator.join(cell(v) for v in row) for row in rows)]
    path.write_text("\n".join(lines) + "\n", encoding=encoding)


def as_xlsx(path, header, rows):
    book = openpyxl.Workbook()
    for row in [header, *rows]:
        book.active.append(row)
    book.save(path)


def as_parquet(path, header, rows):
    pq.write_table(pa.table({name: [row[i] for row in rows] for i, name in enumerate(header)}), path)


numbers = st.floats(min_value=-1e300, max_value=1e300, allow_subnormal=False)


@settings(max_examples=15)
@given(st.lists(st.tuples(numbers, st.sampled_from(["A", "Ö", "B1"])), min_size=1, max_size=8))
def test_export_equals_import_in_every_format(tmp_path_factory, rows):
    """Shortest decimal forms of float64 read back to the same bits; whole numbers settle the decimal mark."""
    folder = tmp_path_factory.mktemp("records")
    header, rows = ["f_u", "lot"], [*rows, (0.5, "A")]
    files = {name: folder / name for name in ("a.csv", "b.csv", "c.csv", "d.tsv", "e.xlsx", "f.parquet")}
    as_csv(files["a.csv"], header, rows)
    as_csv(files["b.csv"], header, rows, ";", ",", "cp1252")
    as_csv(files["c.csv"], header, rows, ";", ".", "utf-16")
    as_csv(files["d.tsv"], header, rows, "\t", ",", "utf-8-sig")
    as_xlsx(files["e.xlsx"], header, rows)
    as_parquet(files["f.parquet"], header, rows)
    for path in files.values():
        sample = read_column(path, "f_u", unit=parse_unit("MPa"), options=ReadOptions(lot="lot"))
        # openpyxl writes 16 digits, one less than every float64 needs
        tolerance = 1e-15 if path.suffix == ".xlsx" else 0.0
        np.testing.assert_allclose(sample.values, [value for value, _ in rows], rtol=tolerance, atol=0.0)
        assert list(sample.labels["lot"]) == [label for _, label in rows]


HOSTILE = {
    "many columns": b",".join(b"c%d" % i for i in range(50_000)) + b"\n" + b"1," * 49_999 + b"1\n",
    "one name many times": b",".join([b"c"] * 50_000) + b"\n" + b"1," * 49_999 + b"1\n",
    "control characters": b"f_u\x1b[31m,b\n\x1b]0;x\x07,1\n",
    "only quotes": b'"' * 100_001,
    "never-ending number": b"f_u\n" + b"1" * 131_000 + b"\n",
    "thousands without end": b"f_u;b\n" + b"1,111" + b",111" * 30_000 + b"x;1\n",
    "bound without end": b"f_u\n" + b">" * 100_000 + b"1\n",
    "dots without end": b"f_u\n1" + b"." * 100_000 + b"1\n",
    "spaces without end": b"f_u\n1" + b" " * 100_000 + b"x\n",
    "not text": bytes(range(256)) * 40,
    "formula": b"f_u\n=cmd|' /C calc'!A0\n",
    "half a surrogate": b"\xff\xfe" + "f_u\n".encode("utf-16-le") + b"\x00\xd8",
}


@pytest.mark.parametrize("content", HOSTILE.values(), ids=HOSTILE)
def test_hostile_files_are_refused_in_few_words(write, content):
    path = write(content)
    for reader in (
        lambda: read_column(path, "f_u", unit=ONE, options=ReadOptions(censoring=True, order="f_u")),
        lambda: read_table(path).numbers("f_u"),
    ):
        with pytest.raises(InputError) as caught:
            reader()
        text = str(caught.value)
        assert len(text) < 4000
        assert "\x1b" not in text
        assert "\x07" not in text


def test_twenty_thousand_rows_with_a_fitted_exponent(tmp_path):
    rng = np.random.default_rng(3)
    t = rng.uniform(1.0, 2.0, 20_000)
    f_u = 500.0 * t**0.5 * np.exp(0.05 * rng.standard_normal(t.size))
    rows = [(x, y, f"L{i % 7}") for i, (x, y) in enumerate(zip(f_u.tolist(), t.tolist(), strict=True))]
    path = tmp_path / "many.csv"
    as_csv(path, ["f_u", "t", "lot"], rows, ";", ",")
    thickness = Covariate(column="t", reference=1.0, unit=ONE, exponent="fit")
    options = ReadOptions(censoring=True, lot="lot", normalise=(thickness,))
    sample = read_column(path, "f_u", unit=ONE, options=options)
    assert sample.n == 20_000
    result = sample.normalisation
    assert abs(result.exponents[0] - 0.5) < 4.0 * result.standard_errors[0]
