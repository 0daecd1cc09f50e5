"""Estimates of correlation: scipy's coefficients and intervals, and coverage by simulation."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting.correlation import KINDS, estimate_correlation


def pairs(seed, n, r):
    x, e = np.random.default_rng(seed).standard_normal((2, n))
    return x, r * x + math.sqrt(1.0 - r * r) * e


@given(
    st.integers(0, 2**32 - 1), st.integers(4, 60), st.floats(-0.95, 0.95), st.sampled_from([0.8, 0.95, 0.99])
)
def test_product_moment_like_scipy(seed, n, r, confidence):
    x, y = pairs(seed, n, r)
    found = estimate_correlation(x, y, confidence=confidence)
    expected = stats.pearsonr(x, y)
    interval = expected.confidence_interval(confidence)
    assert (found.kind, found.n, found.confidence) == ("product-moment", n, confidence)
    assert found.coefficient == pytest.approx(expected.statistic, abs=1e-12)
    assert found.p_independent == pytest.approx(expected.pvalue, rel=1e-7, abs=1e-14)
    assert (found.lower, found.upper) == pytest.approx((interval.low, interval.high), abs=1e-10)


@given(st.integers(0, 2**32 - 1), st.integers(5, 60), st.floats(-0.9, 0.9), st.booleans())
def test_rank_like_scipy(seed, n, r, tied):
    x, y = pairs(seed, n, r)
    if tied:
        x, y = np.append(np.round(x), [5.0, 5.0]), np.append(np.round(y, 1), [0.5, -0.5])
    found = estimate_correlation(x, y, "rank")
    expected = stats.spearmanr(x, y)
    assert found.coefficient == pytest.approx(expected.statistic, abs=1e-12)
    if abs(found.coefficient) < 0.999:
        assert found.p_independent == pytest.approx(expected.pvalue, rel=1e-7, abs=1e-14)
        half = stats.norm.ppf(0.975) * math.sqrt((1.0 + found.coefficient**2 / 2.0) / (x.size - 3))
        centre = math.atanh(found.coefficient)
        assert math.atanh(found.lower) == pytest.approx(centre - half, abs=1e-6)
        assert math.atanh(found.upper) == pytest.approx(centre + half, abs=1e-6)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(("r", "n"), [(0.0, 12), (0.6, 20), (-0.85, 50)])
def test_coverage(kind, r, n):
    """1000 samples: three standard errors of the share are 0.021; a further 0.009 for the approximation of z."""
    truth = r if kind == "product-moment" else 6.0 / math.pi * math.asin(0.5 * r)
    covered = 0
    x, e = np.random.default_rng(11).standard_normal((2, 1000, n))
    for a, b in zip(x, r * x + math.sqrt(1.0 - r * r) * e, strict=True):
        found = estimate_correlation(a, b, kind)
        covered += found.lower <= truth <= found.upper
    assert covered / 1000 == pytest.approx(0.95, abs=0.03)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("sign", [-1.0, 1.0])
def test_perfect(kind, sign):
    x = np.array([1.0, 2.0, 3.0, 4.0, 7.0])
    found = estimate_correlation(x, sign * x + 3.0, kind)
    assert found.coefficient == pytest.approx(sign, abs=1e-15)
    assert found.lower == pytest.approx(sign, abs=1e-6)
    assert found.upper == pytest.approx(sign, abs=1e-6)
    assert found.p_independent < 1e-20


@given(st.integers(0, 2**32 - 1), st.sampled_from([1e-200, 1e-6, 1.0, 1e9, 1e200]), st.sampled_from(KINDS))
def test_units_do_not_matter(seed, factor, kind):
    x, y = pairs(seed, 9, 0.4)
    plain, turned = estimate_correlation(x, y, kind), estimate_correlation(-factor * x, y, kind)
    assert turned.coefficient == pytest.approx(-plain.coefficient, abs=1e-14)
    assert turned.upper == pytest.approx(-plain.lower, abs=1e-13)


def test_ranks_do_not_follow_the_scale():
    x, y = pairs(3, 25, 0.5)
    assert estimate_correlation(np.exp(3.0 * x), y**3, "rank") == estimate_correlation(x, y, "rank")


@pytest.mark.parametrize(
    ("x", "y", "options", "words"),
    [
        ([1, 2, 3], [1, 2, 4], {}, "at least 4 pairs of values; got 3"),
        ([1, 2, 3, 4], [1, 2, 4], {}, r"\(4,\) and \(3,\)"),
        ([[1, 2], [3, 4]], [[1, 2], [4, 4]], {}, r"\(2, 2\)"),
        ([1, 2, 3, 4], [1, math.nan, 4, 5], {}, "pair 2 has nan as its second value"),
        ([1, 2, 3, math.inf], [1, 2, 4, 5], {}, "pair 4 has inf as its first value"),
        ([2, 2, 2, 2], [1, 2, 4, 5], {}, "all first values are 2"),
        ([1, 2, 3, 4], [1, 2, 4, 5], {"kind": "ranks"}, "Did you mean 'rank'"),
        ([1, 2, 3, 4], [1, 2, 4, 5], {"confidence": 95.0}, "between 0 and 1; got 95"),
    ],
)
def test_refused(x, y, options, words):
    with pytest.raises(InputError, match=words):
        estimate_correlation(x, y, **options)
