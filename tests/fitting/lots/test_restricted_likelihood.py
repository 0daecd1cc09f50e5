"""The estimates against the likelihood by dense matrices, a general mixed model, and symmetries."""

import math
import warnings

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import optimize

from calibrate.fitting.lots import lot_scatter

LOTS = st.lists(
    st.lists(st.integers(-400, 400).map(lambda i: i / 8), min_size=1, max_size=5), min_size=2, max_size=6
)


def flat(lots):
    return np.concatenate(lots), np.repeat(np.arange(len(lots)), [len(x) for x in lots])


def numbers(found) -> np.ndarray:
    return np.array([found.mean, found.between_sd, found.within_sd, found.total_sd, found.se_mean])


def ends(found) -> np.ndarray:
    return np.array([found.between_interval, found.within_interval])


@given(LOTS, st.floats(-6, 6), st.floats(-3, 3))
def test_nothing_is_likelier_than_the_estimate(dense_log_likelihood, lots, log_ratio, log_scale):
    values, names = flat(lots)
    assume(any(len(set(x)) > 1 for x in lots))
    found = lot_scatter(values, names)
    at_estimate = dense_log_likelihood(values, names, found.between_sd, found.within_sd)
    assert found.log_likelihood == pytest.approx(at_estimate, rel=1e-9, abs=1e-7)
    within = found.within_sd * math.exp(log_scale)
    for between in (0.0, within * math.exp(log_ratio)):
        assert found.log_likelihood >= dense_log_likelihood(values, names, between, within) - 1e-7


@given(LOTS)
def test_bounds_that_always_hold(lots):
    values, names = flat(lots)
    assume(any(len(set(x)) > 1 for x in lots))
    found = lot_scatter(values, names)
    assert len(lots) * (1 - 1e-9) <= found.effective_n <= found.n * (1 + 1e-9)
    assert found.total_sd == pytest.approx(math.hypot(found.between_sd, found.within_sd), rel=1e-12)
    assert found.se_mean == pytest.approx(found.total_sd / math.sqrt(found.effective_n), rel=1e-12)
    means = found.lot_means
    assert np.min(means) - 1e-9 <= found.mean <= np.max(means) + 1e-9
    for value, (low, high) in (
        (found.between_sd, found.between_interval),
        (found.within_sd, found.within_interval),
        (found.intraclass, found.intraclass_interval),
    ):
        assert 0.0 <= low <= value * (1 + 1e-9)
        assert value <= high * (1 + 1e-9)
        assert math.isfinite(high)


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("sizes", [[9, 3, 1, 5, 7, 12], [4, 6, 2, 8] * 4])
def test_general_mixed_model_agrees_where_lots_scatter(simulate, sizes, seed):
    from statsmodels.regression.mixed_linear_model import MixedLM

    sample = simulate(np.random.default_rng([seed, len(sizes)]), sizes, 2.0, 1.0)
    found = lot_scatter(sample.values, sample.lots)
    model = MixedLM(sample.values, np.ones((sample.values.size, 1)), groups=sample.lots)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the general routine doubts its own gradient now and then
        other = model.fit(reml=True, method="lbfgs", gtol=1e-10)
    assert found.mean == pytest.approx(other.params[0], rel=1e-6)
    assert found.within_sd == pytest.approx(math.sqrt(other.scale), rel=1e-4)
    assert found.between_sd == pytest.approx(math.sqrt(other.cov_re[0, 0]), rel=1e-4)
    # Its constant leaves out ln n.
    assert found.log_likelihood == pytest.approx(other.llf + 0.5 * math.log(found.n), abs=1e-6)
    effects = [float(other.random_effects[name].iloc[0]) for name in found.lots]
    assert_allclose([s.shrunken_mean - found.mean for s in found.shares], effects, rtol=1e-3, atol=1e-4)


def test_mean_is_the_generalised_least_squares_mean(uneven):
    found = lot_scatter(uneven.values, uneven.lots)
    same = np.equal.outer(uneven.lots, uneven.lots)
    weights = np.linalg.inv(found.between_sd**2 * same + found.within_sd**2 * np.eye(found.n)).sum(axis=1)
    assert found.mean == pytest.approx(weights @ uneven.values / weights.sum(), rel=1e-12)
    assert found.se_mean == pytest.approx(1 / math.sqrt(weights.sum()), rel=1e-12)


@pytest.mark.parametrize(
    ("sizes", "means", "mean_square", "zero_is_best"),
    [
        ([1, 20, 2, 1, 3], [-3.5, 0.01, 0.49, 0.36, 0.33], 1.3073, True),
        ([1, 20, 20, 1], [-1.51, -0.16, 0.09, 3.47], 1.0558, False),
        ([1, 1, 2, 3, 1], [3.27, -3.07, -0.9, 0.01, -4.63], 3.6854, False),
    ],
)
def test_the_higher_of_two_maxima(dense_log_likelihood, sizes, means, mean_square, zero_is_best):
    noise = np.concatenate([np.arange(m) - (m - 1) / 2 for m in sizes])
    noise *= math.sqrt(mean_square * (len(noise) - len(sizes)) / (noise @ noise))
    values, lots = np.repeat(means, sizes) + noise, np.repeat(np.arange(len(sizes)), sizes)
    found = lot_scatter(values, lots)
    assert (found.between_sd == 0.0) == zero_is_best

    def height(ratio):
        spread = optimize.minimize_scalar(
            lambda v: -dense_log_likelihood(values, lots, math.exp(v) * math.sqrt(ratio), math.exp(v)),
            bounds=(-1.0, 2.0),
            method="bounded",
            options={"xatol": 1e-8},
        )
        return -spread.fun

    heights = np.array([height(r) for r in np.r_[0.0, np.geomspace(1e-3, 30.0, 40)]])
    fence = np.r_[-np.inf, heights, -np.inf]
    assert np.count_nonzero((heights > fence[:-2]) & (heights > fence[2:])) == 2
    assert found.log_likelihood >= np.max(heights) - 1e-9


def test_order_of_rows_does_not_matter(uneven):
    order = np.random.default_rng(1).permutation(uneven.values.size)
    found, other = (lot_scatter(uneven.values[i], uneven.lots[i]) for i in (slice(None), order))
    assert_allclose(numbers(other), numbers(found), rtol=1e-12)
    assert_allclose(ends(other), ends(found), rtol=1e-9)
    shares = {s.name: s.shrunken_mean for s in found.shares}
    assert {s.name: s.shrunken_mean for s in other.shares} == pytest.approx(shares, rel=1e-12)


def test_names_do_not_matter(uneven):
    other = lot_scatter(uneven.values, [f"Z{name[::-1]}" for name in uneven.lots])
    assert (numbers(other) == numbers(lot_scatter(uneven.values, uneven.lots))).all()


@pytest.mark.parametrize("factor", [-1.0, 1e-3, 6.894757, 1e150, 1e-150])
def test_unit(uneven, factor):
    found, other = (lot_scatter(f * uneven.values, uneven.lots) for f in (1.0, factor))
    signs = np.array([np.sign(factor), 1, 1, 1, 1])
    assert_allclose(numbers(other) / abs(factor), numbers(found) * signs, rtol=1e-10)
    assert_allclose(ends(other) / abs(factor), ends(found), rtol=1e-8)
    assert_allclose(other.intraclass_interval, found.intraclass_interval, rtol=1e-8)
    # The density of 36 contrasts has the unit to the power -36.
    moved = found.log_likelihood - 36 * math.log(abs(factor))
    assert other.log_likelihood == pytest.approx(moved, rel=1e-12)


@pytest.mark.parametrize("shift", [-30.0, 1e3, 1e6])
def test_shift(uneven, shift):
    found, other = (lot_scatter(uneven.values + s, uneven.lots) for s in (0.0, shift))
    assert other.mean - shift == pytest.approx(found.mean, abs=1e-12 * abs(shift))
    assert_allclose(numbers(other)[1:], numbers(found)[1:], rtol=1e-8)
    assert_allclose(ends(other), ends(found), rtol=1e-7)
    assert other.log_likelihood == pytest.approx(found.log_likelihood, rel=1e-9)


def test_logarithmic_scale_is_the_logarithm(uneven):
    positive = np.exp(0.1 * uneven.values)
    found = lot_scatter(positive, uneven.lots, scale="logarithmic")
    other = lot_scatter(0.1 * uneven.values, uneven.lots)
    assert_allclose(numbers(found), numbers(other), rtol=1e-9)
    assert_allclose(ends(found), ends(other), rtol=1e-8)
    assert found.log_likelihood == pytest.approx(other.log_likelihood, rel=1e-9)
    assert found.total_cov == pytest.approx(math.sqrt(math.exp(found.total_sd**2) - 1), rel=1e-12)
    assert other.total_cov == pytest.approx(other.total_sd / other.mean, rel=1e-12)


def test_many_lots_at_once(simulate):
    rng = np.random.default_rng(3)
    sample = simulate(rng, rng.integers(1, 9, 4000), 0.5, 1.0)
    found = lot_scatter(sample.values, sample.lots)
    assert found.between_interval[0] < 0.5 < found.between_interval[1]
    assert found.within_interval[0] < 1.0 < found.within_interval[1]
    assert found.between_interval[1] - found.between_interval[0] < 0.06
