"""Factors of correlation matrices, against numpy and closed forms."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.errors import InputError
from calibrate.reliability.dependence import correlation_factor


def correlations(seed, m, n):
    """Return random correlation matrices, (m, m, n)."""
    a = np.random.default_rng(seed).standard_normal((n, m, m + 2))
    c = a @ np.swapaxes(a, 1, 2)
    scale = 1.0 / np.sqrt(np.diagonal(c, axis1=1, axis2=2))
    r = c * scale[:, :, None] * scale[:, None, :]
    r = 0.5 * (r + np.swapaxes(r, 1, 2))
    r[:, np.arange(m), np.arange(m)] = 1.0
    return np.ascontiguousarray(np.moveaxis(r, 0, -1))


@given(st.integers(0, 2**32 - 1), st.integers(1, 7), st.integers(1, 5))
def test_like_numpy(seed, m, n):
    r = correlations(seed, m, n)
    found = correlation_factor(r)
    assert found.lower.shape == r.shape
    assert found.smallest.shape == found.failed.shape == (n,)
    assert not found.failed.any()
    assert found.block == ()
    for k in range(n):
        np.testing.assert_allclose(found.lower[..., k], np.linalg.cholesky(r[..., k]), atol=1e-11)
        assert found.smallest[k] == pytest.approx(np.linalg.eigvalsh(r[..., k])[0], abs=1e-13)


@given(st.integers(0, 2**32 - 1), st.integers(2, 7))
def test_the_same_alone_and_in_a_batch(seed, m):
    r = correlations(seed, m, 6)[..., [0, 1, 2, 3, 1, 4, 5, 1]]
    whole = correlation_factor(r)
    for k in range(8):
        alone = correlation_factor(r[..., k])
        assert alone.smallest.shape == ()
        assert alone.smallest == whole.smallest[k]
        np.testing.assert_array_equal(alone.lower, whole.lower[..., k])


def test_two_variables():
    """L = [1, 0; r, sqrt(1 - r^2)]; eigenvalues 1 - |r| and 1 + |r|."""
    found = correlation_factor([[1.0, 0.6], [0.6, 1.0]])
    np.testing.assert_allclose(found.lower, [[1.0, 0.0], [0.6, 0.8]], atol=1e-15)
    assert found.smallest == pytest.approx(0.4, abs=1e-15)


def unit(m, **pairs):
    r = np.eye(m)
    for name, value in pairs.items():
        i, j = int(name[1]), int(name[2])
        r[i, j] = r[j, i] = value
    return r


@pytest.mark.parametrize(
    ("matrix", "block"),
    [
        (unit(4, r02=0.3, r13=-1.0), (1, 3)),
        (unit(5, r03=0.9, r34=0.9, r04=-0.2, r12=0.4), (0, 3, 4)),
        # Four variables of equal correlation r are possible from r = -1/3, any three of them from -1/2.
        (unit(6, r01=-0.4, r02=-0.4, r04=-0.4, r12=-0.4, r14=-0.4, r24=-0.4, r35=0.9), (0, 1, 2, 4)),
        (unit(3, r01=0.5, r12=0.5), ()),
    ],
)
def test_variables_that_contradict_each_other(matrix, block):
    found = correlation_factor(matrix)
    assert found.block == block
    assert bool(found.failed) == bool(block)
    assert np.isnan(found.lower).any() == bool(block)


def test_a_failure_stays_in_its_situation():
    """The block is that of the situation with the smallest eigenvalue, here -0.8 against -0.2."""
    mild, bad = unit(4, r01=0.0, r12=0.8, r13=0.8, r23=-0.1), unit(4, r01=0.9, r02=0.9, r12=-0.9)
    fine, none = unit(4, r01=0.5), unit(4, r01=np.nan)
    found = correlation_factor(np.stack([fine, mild, none, bad, fine], axis=-1))
    np.testing.assert_array_equal(found.failed, [False, True, True, True, False])
    np.testing.assert_array_equal(np.isnan(found.smallest), [False, False, True, False, False])
    assert found.block == (0, 1, 2)
    assert found.smallest[3] == pytest.approx(-0.8, abs=1e-14)
    np.testing.assert_allclose(found.lower[..., 0], np.linalg.cholesky(fine), atol=1e-15)
    np.testing.assert_array_equal(found.lower[..., 4], found.lower[..., 0])
    assert correlation_factor(none).block == ()


def test_no_situations():
    found = correlation_factor(np.empty((3, 3, 0)))
    assert found.lower.shape == (3, 3, 0)
    assert found.smallest.shape == (0,)


@pytest.mark.parametrize(
    ("matrix", "words"),
    [
        (np.ones((2, 3)), r"\(m, m\) or \(m, m, n\); got \(2, 3\)"),
        (np.empty((0, 0)), r"got \(0, 0\)"),
        ([[1.0, 0.2], [0.2, 1.5]], "must be 1; got 1.5"),
        ([[1.0, 0.2], [0.3, 1.0]], "variables 1 and 2 are 0.2 and 0.3"),
        ([[1.0, -1.2], [-1.2, 1.0]], "between -1 and 1; got -1.2"),
    ],
)
def test_refused(matrix, words):
    with pytest.raises(InputError, match=words):
        correlation_factor(matrix)
