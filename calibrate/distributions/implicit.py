"""Derivatives of own parameters by moments, through the implicit function theorem."""

from __future__ import annotations

from collections.abc import Sequence

from calibrate.distributions.parameter import Array


def slopes_by_moments(
    jacobian: Sequence[tuple[Array, Array]], free: Sequence[int], count: int
) -> dict[int, tuple[Array, Array, dict[int, Array]]]:
    """Invert the derivatives of mean and sd by own parameters.

    Parameters
    ----------
    jacobian : sequence of (d mean/dp, d sd/dp)
        One pair per own parameter.
    free : sequence of int
        Indices of the one or two parameters that follow from the moments.
    count : int
        Number of moments that determine them: 1 (mean) or 2 (mean and sd).

    Returns
    -------
    dict
        For each free index: d p/d mean, d p/d sd, and d p/d q for each kept parameter's index q.

    Notes
    -----
    With M(free, kept) = moments held fixed, d free/d kept = -(dM/d free)^-1 dM/d kept.
    """
    kept = [j for j in range(len(jacobian)) if j not in free]
    if count == 1:
        (i,) = free
        slope = 1.0 / jacobian[i][0]
        return {i: (slope, 0.0 * slope, {j: -slope * jacobian[j][0] for j in kept})}
    i, j = free
    (mean_i, sd_i), (mean_j, sd_j) = jacobian[i], jacobian[j]
    determinant = mean_i * sd_j - mean_j * sd_i
    inverse = {
        i: (sd_j / determinant, -mean_j / determinant),
        j: (-sd_i / determinant, mean_i / determinant),
    }
    return {
        f: (by_mean, by_sd, {q: -(by_mean * jacobian[q][0] + by_sd * jacobian[q][1]) for q in kept})
        for f, (by_mean, by_sd) in inverse.items()
    }
