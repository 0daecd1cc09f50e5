"""Limit states of standard normal variables with exact probabilities."""

import numpy as np
from scipy import integrate, special, stats

# Der Kiureghian and Dakessian (1998), b = 5, k = 0.5, e = 0.1: by quadrature over x1 of Phi(k (x1 - e)^2 - b).
PARABOLA = "5 - x2 - 0.5 * (x1 - 0.1)**2"
PARABOLA_POINTS = np.array([[-2.74085, 0.96480], [2.91584, 1.03551]])
# Series system of four branches (Waarts 2000): by one-dimensional quadrature.
R2 = 2**0.5
SERIES = (
    f"min(min(3 + 0.1 * (a - b)**2 - (a + b) / {R2}, 3 + 0.1 * (a - b)**2 + (a + b) / {R2}),"
    f" min(a - b + 7 / {R2}, b - a + 7 / {R2}))"
)
SERIES_EXACT = 2.2227951e-3
SERIES_POINTS = np.array([[3.0, 3.0], [-3.0, -3.0], [-3.5, 3.5], [3.5, -3.5]]) / R2


def parabola_exact():
    def density(x):
        return special.ndtr(0.5 * (x - 0.1) ** 2 - 5.0) * np.exp(-0.5 * x * x) / np.sqrt(2.0 * np.pi)

    return integrate.quad(density, -12.0, 12.0, epsabs=0.0, epsrel=1e-11, limit=400)[0]


def paraboloid_exact(b, k, others):
    """P(x1 > b + k q) with q chi-square."""

    def density(q):
        return special.ndtr(-b - k * q) * stats.chi2.pdf(q, others)

    return integrate.quad(density, 0.0, 300.0, epsabs=0.0, epsrel=1e-10, limit=500)[0]


def spread(points, n):
    return np.repeat(points[:, :, None], n, axis=2)
