"""Files of records, and what reading them refuses."""

import pytest

from calibrate.errors import InputError
from calibrate.records import read_column
from calibrate.units import ONE


@pytest.fixture
def write(tmp_path):
    def write_file(content, name="rods.csv"):
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write_file


@pytest.fixture
def refusal():
    """Return the error of a reading that must be refused, as text with one line for each problem."""

    def read(path, column="f_u", unit=ONE, reader=read_column, **options):
        with pytest.raises(InputError) as caught:
            reader(path, column, unit=unit, display="rods.csv", **options)
        return str(caught.value)

    return read
