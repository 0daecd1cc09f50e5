"""Detection limits and coverage of blocks in records."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import ReadOptions, read_column
from calibrate.units import parse_unit


@pytest.fixture
def record(tmp_path):
    def read(rows, **options):
        path = tmp_path / "r.csv"
        path.write_text("d,part\n" + "\n".join(rows) + "\n", encoding="utf-8")
        return read_column(path, "d", unit=parse_unit("mm"), options=ReadOptions(censoring=True, **options))

    return read


def test_zeros_and_values_below_a_limit_are_known_only_to_lie_below_it(record):
    sample = record(["0,1", "12,1", "20,1", "35,1", ">50,1", "<10,1"], detection_limit=20.0)
    seen = sample.observations
    np.testing.assert_array_equal(seen.lower, [-np.inf, -np.inf, 20.0, 35.0, 50.0, -np.inf])
    np.testing.assert_array_equal(seen.upper, [20.0, 20.0, 20.0, 35.0, np.inf, 10.0])


def test_coverage_is_a_part_of_each_block(record):
    np.testing.assert_array_equal(record(["3,1", "4,0.75"], coverage="part").coverage, [1.0, 0.75])
    with pytest.raises(InputError) as caught:
        record(["3,1", "4,75", "5,0"], coverage="part")
    message = str(caught.value)
    assert "75 is no part of a block" in message
    assert "r.csv:3" in message
    assert "r.csv:4" in message


def test_a_limit_beyond_the_truncation_is_refused(record):
    with pytest.raises(InputError, match="detection limit 20 is not below 15"):
        record(["3,1"], detection_limit=20.0, below=15.0)
