"""Ranks of distribution-free limits against sums of binomial probabilities."""

from math import comb

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.fitting.characteristic import characteristic_value, rank, smallest_sample


def at_least_below(r, n, p):
    """Probability that at least r of n specimens lie below the p fractile."""
    return sum(comb(n, j) * p**j * (1.0 - p) ** (n - j) for j in range(r, n + 1))


@pytest.mark.parametrize("confidence", [0.5, 0.75, 0.9, 0.95])
@pytest.mark.parametrize(("n", "p"), [(60, 0.05), (100, 0.05), (200, 0.05), (30, 0.3), (15, 0.5)])
def test_rank_is_the_closest_that_holds_the_confidence(n, p, confidence):
    r = rank(n, p, confidence)
    assert at_least_below(r, n, p) >= confidence > at_least_below(r + 1, n, p)


def test_upper_ranks_mirror_lower_ones():
    for n in (28, 60, 137):
        assert rank(n, 0.95, 0.75) == n + 1 - rank(n, 0.05, 0.75)


@pytest.mark.parametrize("p", [1e-3, 0.01, 0.05, 0.2, 0.5])
@pytest.mark.parametrize("c", [0.1, 0.75, 0.99])
def test_smallest_sample_is_the_smallest(p, c):
    n = smallest_sample(p, c)
    assert rank(n, p, c) == 1
    if n > 1:
        with pytest.raises(InputError, match=f"at least {n} values; there are {n - 1}"):
            rank(n - 1, p, c)


def test_exact_powers_are_not_rounded_up():
    assert smallest_sample(0.5, 0.75) == 2


def test_value_is_that_order_statistic():
    x = np.random.default_rng(5).lognormal(6.0, 0.2, 100)
    found = characteristic_value(x, None, 0.05, 0.75)
    assert found.value == np.sort(x)[rank(100, 0.05, 0.75) - 1]
    assert found.family is None
    assert found.factor is None
    assert found.statement == (
        "5 % fractile at 75 % confidence, distribution-free, n = 100, value number 3 of 100 in rising order"
    )
    assert found.value <= found.point_estimate


def test_coverage():
    n, samples = 40, 2_000
    below = np.random.default_rng(8).random((samples, n)) < 0.05
    r = rank(n, 0.05, 0.75)
    # The r-th smallest value lies below the fractile if at least r values do.
    covered = np.mean(below.sum(axis=1) >= r)
    exact = at_least_below(r, n, 0.05)
    assert covered == pytest.approx(exact, abs=3.0 * np.sqrt(exact * (1.0 - exact) / samples))
    assert exact >= 0.75
