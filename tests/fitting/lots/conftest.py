"""Samples by lots, and the restricted likelihood by dense matrices."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest


@dataclass(frozen=True)
class Lots:
    """Values with the lot of each."""

    values: np.ndarray
    lots: np.ndarray

    @property
    def apart(self) -> list[np.ndarray]:
        return [self.values[self.lots == name] for name in dict.fromkeys(self.lots)]


@pytest.fixture(scope="session")
def simulate() -> Callable[..., Lots]:
    """Draw lots of the given sizes with normal scatter between and within them."""

    def draw(rng, sizes, between, within, mean=30.0) -> Lots:
        names = np.array([f"lot {i + 1}" for i in range(len(sizes))])
        values = mean + np.repeat(rng.normal(0.0, between, len(sizes)), sizes)
        return Lots(values + rng.normal(0.0, within, values.size), np.repeat(names, sizes))

    return draw


@pytest.fixture
def uneven(simulate) -> Lots:
    """Six lots of different sizes that do scatter."""
    return simulate(np.random.default_rng(5), [9, 3, 1, 5, 7, 12], 1.5, 0.8)


@pytest.fixture(scope="session")
def dense_log_likelihood() -> Callable[..., float]:
    """Return the log-density of n - 1 orthonormal contrasts, with the full covariance matrix of the specimens."""

    def log_likelihood(values, lots, between, within) -> float:
        n = len(values)
        same = np.equal.outer(np.asarray(lots), np.asarray(lots))
        covariance = between**2 * same + within**2 * np.eye(n)
        basis = np.linalg.qr(np.column_stack([np.ones(n), np.eye(n)[:, : n - 1]]))[0][:, 1:]
        contrasts = basis.T @ np.asarray(values)
        lower = np.linalg.cholesky(basis.T @ covariance @ basis)
        z = np.linalg.solve(lower, contrasts)
        return float(-0.5 * (z @ z + (n - 1) * np.log(2 * np.pi)) - np.sum(np.log(np.diag(lower))))

    return log_likelihood
