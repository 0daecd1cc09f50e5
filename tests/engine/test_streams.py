"""Random streams depend on seed and purpose, and on nothing else."""

import numpy as np
import pytest

from calibrate.engine import stream


def test_the_same_purpose_gives_the_same_numbers_in_any_order():
    first = stream(7, "bootstrap", 3).standard_normal(5)
    stream(7, "bootstrap", 2).standard_normal(1000)
    assert np.array_equal(stream(7, "bootstrap", 3).standard_normal(5), first)


def test_different_purposes_and_seeds_give_different_numbers():
    keys = [
        (7, "a"), (8, "a"), (7, "b"), (7,), (7, "a", 0), (7, "a", 1), (7, 0, "a"), (7, 1), (7, 0),
        (7, 2**32), (7, 2**32 + 1), (7, 1, 0), (7, "a", "b"), (7, "ab"),
    ]  # fmt: skip
    draws = {stream(*key).integers(2**63) for key in keys}
    assert len(draws) == len(keys)


def test_streams_of_neighbouring_replicates_are_uncorrelated():
    # 200 streams of 500 values: the correlation of neighbours has standard error 1/sqrt(500 * 199) = 0.0032.
    draws = np.array([stream(1, "replicate", i).standard_normal(500) for i in range(200)])
    assert abs(np.mean(draws[:-1] * draws[1:])) < 5 * 0.0032


def test_a_negative_number_is_no_purpose():
    with pytest.raises(ValueError, match="at least 0"):
        stream(1, -1)
